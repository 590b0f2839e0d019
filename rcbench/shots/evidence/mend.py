"""Mended shots beside the originals: bits put in order, shots filed under their circuit, and a record of what was done.

A new folder holds one Parquet file for each file of shots, row for row, with every column that the original has;
shots.toml, execution.toml as it was, and MENDED, which says what was done, why, and to which files (by SHA-256). The
originals stay as they are. Whoever reads the new folder is told so, and a report of it says so.
"""

from __future__ import annotations

import importlib
import json
import os
import shutil
import tempfile
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from rcbench.arrays import IntArray
from rcbench.errors import InputError
from rcbench.files import cannot_write, write_text
from rcbench.shots.declarations import EXECUTION_FILE, SHOTS_FILE, Declared, read_declared
from rcbench.shots.decode import ZERO
from rcbench.shots.evidence.finding import Finding
from rcbench.shots.evidence.orders import Order, words
from rcbench.shots.evidence.series import files_set_aside
from rcbench.shots.findings import many
from rcbench.shots.intake import Runs
from rcbench.shots.mended import MENDED_FILE
from rcbench.shots.records import MAX_REPEAT, Batch, Irregular, Text
from rcbench.shots.shots import RunKey, Shots
from rcbench.shots.sources import Source, list_sources

if TYPE_CHECKING:
    from rcbench.kit import Kit

_ORIGINAL = "original"


def write_mended(
    findings: Sequence[Finding], shots_path: Path, out: Path, kit: Kit, shots: Shots, *, bit_order: str | None = None
) -> dict[str, Any] | None:
    """Write mended shots into a new folder; returns what MENDED holds, None where there is nothing to mend.

    Args:
        findings: of `find_evidence`. shots_path: the file or folder that was read. out: the new folder.
        kit, shots: what was checked. bit_order: as it was given to `read_shots`.
    Raises:
        InputError: the folder exists, or cannot be written.
    """
    orders, moves = _repairs(findings)
    if not orders and not moves:
        return None
    refuse_existing(out)
    declared = read_declared(shots_path if shots_path.is_dir() else shots_path.parent, bit_order)
    record = _record(findings, orders, moves, kit, shots)
    try:
        out.parent.mkdir(parents=True, exist_ok=True)
        made = Path(tempfile.mkdtemp(dir=out.parent, prefix=".rcbench-mended-"))
    except OSError as error:
        raise cannot_write(out, error) from error
    try:
        _fill(made, declared, record, orders, moves, shots_path, kit, shots)
        os.chmod(made, 0o755)
        os.rename(made, out)
    except OSError as error:
        raise cannot_write(out, error) from error
    finally:
        if made.exists():
            shutil.rmtree(made)
    return record


def refuse_existing(out: Path) -> None:
    """InputError where the folder for mended shots is there already."""
    if out.exists():
        raise InputError("--apply", str(out), "a folder that does not exist yet: the originals stay as they are")


def _repairs(findings: Sequence[Finding]) -> tuple[dict[RunKey, Order], dict[RunKey, RunKey]]:
    orders: dict[RunKey, Order] = {}
    moves: dict[RunKey, RunKey] = {}
    for finding in findings:
        orders |= finding.repair.orders
        moves |= finding.repair.moves
    return orders, moves


def _record(
    findings: Sequence[Finding],
    orders: Mapping[RunKey, Order],
    moves: Mapping[RunKey, RunKey],
    kit: Kit,
    shots: Shots,
) -> dict[str, Any]:
    different = {(order.source, order.flipped): order for order in orders.values()}
    return {
        "kit": kit.hash,
        "originals": [{"name": file.name, "sha256": file.sha256} for file in shots.files],
        "findings": [
            {
                "kind": f.kind,
                "text": f.text,
                "evidence": round(f.evidence, 3),
                "limit": round(f.limit, 3),
                "measure": f.measure,
            }
            for f in findings
            if f.repair
        ],
        "reordered": [
            {
                "order": words(order),
                "source": list(order.source),
                "inverted": list(order.flipped),
                "runs": [list(key) for key, one in orders.items() if one == order],
            }
            for order in different.values()
        ],
        "refiled": [{"from": list(old), "to": list(new)} for old, new in moves.items()],
    }


def _fill(
    folder: Path,
    declared: Declared,
    record: dict[str, Any],
    orders: Mapping[RunKey, Order],
    moves: Mapping[RunKey, RunKey],
    shots_path: Path,
    kit: Kit,
    shots: Shots,
) -> None:
    runs = Runs(kit)
    aside = files_set_aside(shots)
    names: set[str] = set()
    written = []
    for source in list_sources(shots_path, None)[0]:
        if source.name in aside:
            continue
        name = _new_name(source.name, names)
        rows = _Rewriter(declared, runs, orders, moves, declared.repeat.get(source.name), shots).write(
            source, folder / name
        )
        written.append({"from": source.name, "to": name, "rows": rows})
    record["files"] = written
    write_text(folder / SHOTS_FILE, _shots_toml(declared))
    execution = (shots_path if shots_path.is_dir() else shots_path.parent) / EXECUTION_FILE
    if execution.exists():
        shutil.copyfile(execution, folder / EXECUTION_FILE)
    write_text(folder / MENDED_FILE, json.dumps(record, indent=1, sort_keys=True) + "\n")


def _new_name(name: str, taken: set[str]) -> str:
    stem = name
    for ending in (".gz", ".csv", ".json", ".npz", ".parquet"):
        stem = stem.removesuffix(ending)
    stem = stem.lstrip(".") or _ORIGINAL  # a hidden file would not be read
    new, number = f"{stem}.parquet", 1
    while new in taken:
        number += 1
        new = f"{stem}-{number}.parquet"
    taken.add(new)
    return new


def _shots_toml(declared: Declared) -> str:
    reading = declared.reading
    lines = ["# Written by rcbench check --apply; see mended.json."]
    lines.append(f"bits = {list(reading.bits)}" if reading.bits is not None else f'bit_order = "{reading.bit_order}"')
    if reading.symbols:
        lines.append(f"lost = {json.dumps(list(reading.symbols))}")
    return "\n".join(lines) + "\n"


class _Rewriter:
    """Rewrites the rows of one file: the strings in order, the ids as they should be."""

    def __init__(
        self,
        declared: Declared,
        runs: Runs,
        orders: Mapping[RunKey, Order],
        moves: Mapping[RunKey, RunKey],
        repeat: int | None,
        shots: Shots,
    ) -> None:
        self.reading, self.runs, self.file_repeat = declared.reading, runs, repeat
        self.orders, self.moves, self.shots = orders, moves, shots

    def write(self, source: Source, path: Path) -> int:
        """Rows written."""
        try:
            return self._write(source, path, exact=False)
        except Irregular:
            return self._write(source, path, exact=True)

    def _write(self, source: Source, path: Path, *, exact: bool) -> int:
        import pyarrow.parquet as pq

        module = importlib.import_module(f"rcbench.shots.{source.format}")
        writer, rows = None, 0
        try:
            for table in self._tables(module.batches(source, exact)):
                if writer is None:
                    writer = pq.ParquetWriter(str(path), table.schema, compression="zstd")
                writer.write_table(table)
                rows += table.num_rows
        finally:
            if writer is not None:
                writer.close()
        return rows

    def _tables(self, batches: Iterator[Batch]) -> Iterator[Any]:
        import pyarrow as pa

        for batch in batches:
            if not len(batch):
                continue
            repeat = self._repeats(batch)
            runs = list(_runs_of(batch, repeat))
            ids, repeats = self._places(batch, repeat, runs)
            columns: dict[str, Any] = {"circuit_id": ids, "bitstring": self._strings(batch, runs)}
            columns["count"] = pa.array(np.ones(len(batch), dtype=np.int64) if batch.count is None else batch.count)
            columns["repeat"] = pa.array(repeats, pa.int64())
            if batch.label is not None:
                columns["batch"] = pa.array([batch.labels[place] for place in batch.label.tolist()], pa.string())
            if batch.time is not None:
                columns["time_utc"] = pa.array(batch.time, pa.timestamp("us", tz="UTC"))
            yield pa.table(columns)

    def _repeats(self, batch: Batch) -> IntArray:
        """(rows,) repeat of each row as the reader took it."""
        if batch.repeat is not None:
            given = batch.repeat
        elif self.file_repeat is not None:
            given = np.full(len(batch), self.file_repeat, dtype=np.int64)
        else:
            by_id = [self._only_repeat(name) for name in batch.ids]
            return np.array(by_id, dtype=np.int64)[batch.circuit]
        out = given.copy()
        for place, name in enumerate(batch.ids):  # as `Runs.settle` numbers them
            only = self._only_repeat(name)
            if only and (name, 0) not in self.shots.returned:
                out[(batch.circuit == place) & (given == 0)] = only
        return out

    def _only_repeat(self, circuit_id: str) -> int:
        number = self.runs.ids.get(circuit_id)
        if number is None:
            return 0
        run = int(self.runs.only_run[number])
        return self.runs.keys[run][1] if run >= 0 else 0

    def _places(self, batch: Batch, repeat: IntArray, runs: Sequence[tuple[RunKey, IntArray]]) -> tuple[Any, IntArray]:
        """Circuit ids and repeats as they should be."""
        import pyarrow as pa

        names, place, out = list(batch.ids), batch.circuit.astype(np.int32), repeat.copy()
        for key, rows in runs:
            new = self.moves.get(key)
            if new is not None:
                place[rows], out[rows] = len(names), new[1]
                names.append(new[0])
        return pa.DictionaryArray.from_arrays(pa.array(place), pa.array(names, pa.string())).dictionary_decode(), out

    def _strings(self, batch: Batch, runs: Sequence[tuple[RunKey, IntArray]]) -> Any:
        """The strings with their bits in order, still written as shots.toml declares; other lengths are left alone."""
        import pyarrow as pa

        bits = batch.bits.without(ord(self.reading.separator)) if self.reading.separator else batch.bits
        data, lengths = bits.data.copy(), bits.lengths()
        for key, rows in runs:
            order = self.orders.get(key)
            if order is None:
                continue
            n = len(order.source)
            width = self.reading.n_characters(n)
            rows = rows[lengths[rows] == width]  # a bad row stays one
            if len(rows):
                at = bits.offsets[:-1][rows][:, None] + np.arange(width)
                data[at] = mended_characters(bits.data[at], order, self.reading.columns(n))
        if len(data) and data.max() > 127:  # no text of ours: as the reader shows it
            mended = Text(data, bits.offsets)
            return pa.array([mended.get(row) for row in range(len(batch))], pa.string())
        offsets = pa.py_buffer(np.ascontiguousarray(bits.offsets, dtype=np.int64))
        return pa.LargeStringArray.from_buffers(len(batch), offsets, pa.py_buffer(data))


def _runs_of(batch: Batch, repeat: IntArray) -> Iterator[tuple[RunKey, IntArray]]:
    """The runs of a batch, and the rows of each."""
    code = batch.circuit.astype(np.int64) * (MAX_REPEAT + 2) + np.clip(repeat, -1, MAX_REPEAT) + 1
    order = np.argsort(code, kind="stable")
    starts = np.flatnonzero(np.diff(code[order], prepend=-1))
    for rows in np.split(order, starts[1:]):
        yield (batch.ids[int(batch.circuit[rows[0]])], int(repeat[rows[0]])), rows


def mended_characters(text: IntArray, order: Order, columns: slice | IntArray) -> IntArray:
    """Strings with their bits in order; symbols for lost qubits move with their bit and are never inverted.

    Args:
        text: (rows, width) characters, uint8. order: of the classical bits.
        columns: position of the character of each classical bit.
    """
    n = len(order.source)
    where = np.arange(n)[columns] if isinstance(columns, slice) else np.asarray(columns)
    out = text.copy()
    for bit, place in enumerate(order.source):
        characters = text[:, where[place]]
        if bit in order.flipped:
            characters = np.where((characters == ZERO) | (characters == ZERO + 1), characters ^ 1, characters)
        out[:, where[bit]] = characters
    return out


def summary(record: Mapping[str, Any], out: Path) -> str:
    """What was written, for a terminal."""
    reordered = sum(len(one["runs"]) for one in record["reordered"])
    rows = sum(file["rows"] for file in record["files"])
    return (
        f"{out}: {rows} rows of {many(len(record['files']), 'file')}; bits put in order in {many(reordered, 'run')}, "
        f"{many(len(record['refiled']), 'run')} filed anew; {MENDED_FILE} there says what was done. The originals are "
        "as they were."
    )

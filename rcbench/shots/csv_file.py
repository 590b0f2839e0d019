"""Shots as CSV: circuit_id,bitstring[,count][,repeat,batch,time_utc], fast where all is well, exact where it is not.

Clean files are read by pyarrow in blocks. It names no line, so whatever it cannot take, and every file in which the
intake finds a bad row, is read again line by line: each line of the file is one row, and each error has its line.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np

from rcbench.arrays import IntArray
from rcbench.errors import suggest
from rcbench.shots.columns import COLUMNS, arrow_batch
from rcbench.shots.records import BadRow, Batch, Irregular, Place, Text, times_utc, whole_counts, whole_repeats
from rcbench.shots.sources import BROKEN, Source, one_line

BLOCK = 1 << 20
LONGEST_LINE = 1 << 20
ROWS = 50_000
_SEPARATORS = {";": "semicolons", "\t": "tabs"}


def batches(source: Source, exact: bool) -> Iterator[Batch]:
    """The rows of a CSV file.

    Raises:
        InputError: no text, no header with the columns needed.
        Irregular: (not exact) something whose line is not known.
    """
    names = _header(source)
    return _exact(source, names) if exact else _fast(source, names)


def _header(source: Source) -> list[str]:
    head = source.check_text().removeprefix(b"\xef\xbb\xbf")
    lines = head.splitlines()
    if len(lines[0]) >= LONGEST_LINE or (len(lines) == 1 and len(head) >= 1 << 16):
        raise source.error("line", f"{len(head)} characters without an end", "a first line with the column names", 1)
    text = lines[0].decode("utf-8", "backslashreplace")
    names = [name.strip() for name in next(csv.reader([text]), [])]
    for mark, word in _SEPARATORS.items():
        if len(names) == 1 and mark in text:
            raise source.error("separator", word, "commas between the columns", 1)
    for needed in ("circuit_id", "bitstring"):
        if needed not in names:
            raise source.error(
                "columns", ",".join(names), f"a first line with the column {needed}: {','.join(COLUMNS)}", 1
            )
    for name in set(names):
        if name in COLUMNS and names.count(name) > 1:
            raise source.error("columns", ",".join(names), f"the column {name} once", 1)
    if others := [name for name in names if name not in COLUMNS]:
        close = suggest(others[0], COLUMNS)
        source.notes.append(f"{source.name}: columns not read: {', '.join(map(repr, others))}; read are {close}")
    return names


def _fast(source: Source, names: list[str]) -> Iterator[Batch]:
    import pyarrow as pa
    import pyarrow.csv as pc

    used = [name for name in COLUMNS if name in names]
    # unread columns get names of their own: pyarrow refuses to pick from columns that share one
    labels = [name if name in COLUMNS else f"column {place}" for place, name in enumerate(names)]
    word = pa.dictionary(pa.int32(), pa.binary())
    kinds = {"circuit_id": word, "batch": word, "bitstring": pa.binary()}
    options = pc.ConvertOptions(
        column_types={name: kinds.get(name, pa.string()) for name in used}, include_columns=used
    )
    try:
        compression = "gzip" if source.path.suffix.lower() == ".gz" else None
        with pa.input_stream(str(source.path), compression=compression) as file:
            reader = pc.open_csv(
                file,
                read_options=pc.ReadOptions(block_size=BLOCK, column_names=labels, skip_rows=1),
                convert_options=options,
            )
            for table in reader:
                columns = {name: table.column(name) for name in used}
                yield arrow_batch(columns, strip=True, place=None)
    except (pa.ArrowException, *BROKEN) as error:
        raise Irregular(str(error)) from None


def _lines(source: Source) -> Iterator[tuple[int, str]]:
    """Lines with their numbers, without their ends; one that never ends is refused before it fills the memory."""
    number = 0
    with source.open() as file, io.TextIOWrapper(file, encoding="utf-8-sig", errors="surrogateescape") as text:
        try:
            while line := text.readline(LONGEST_LINE):
                number += 1
                if len(line) >= LONGEST_LINE:
                    raise source.error("line", f"more than {LONGEST_LINE} characters", "a shorter line", number)
                yield number, line.rstrip("\n")
        except BROKEN as error:
            raise source.error("compression", one_line(error), "a whole gzip file", number + 1) from None


def _fields(line: str) -> list[str] | None:
    """The fields of one line; None where its quotes do not close."""
    if '"' not in line:
        return line.split(",")
    try:
        return next(csv.reader([line], strict=True))
    except csv.Error:
        return None


def _exact(source: Source, names: list[str]) -> Iterator[Batch]:
    lines = _lines(source)
    next(lines)  # the header
    places = {name: names.index(name) for name in COLUMNS if name in names}
    numbers: list[int] = []
    contents: list[str] = []
    rows: list[list[str]] = []
    bad: list[BadRow] = []
    for number, line in lines:
        if not line.strip():
            continue
        fields = _fields(line)
        if fields is None or len(fields) != len(names):
            found = "quotes that do not close" if fields is None else f"{len(fields)} columns"
            place = Place(number, f"{source.name}:{number}: ")
            bad.append(BadRow(place, "row", found, f"{len(names)} columns, as in the first line", line))
        else:
            numbers.append(number)
            contents.append(line)
            rows.append([fields[place].strip() for place in places.values()])
        if len(rows) + len(bad) >= ROWS:
            yield _batch(source.name, dict(zip(places, zip(*rows, strict=True), strict=True)), numbers, contents, bad)
            numbers, contents, rows, bad = [], [], [], []
    columns = dict(zip(places, zip(*rows, strict=True), strict=True)) if rows else dict.fromkeys(places, ())
    yield _batch(source.name, columns, numbers, contents, bad)


def _positions(values: Sequence[str]) -> tuple[list[str], IntArray]:
    """Different values, and the position of each value among them."""
    different: dict[str, int] = {}
    where = [different.setdefault(value, len(different)) for value in values]
    return list(different), np.array(where, dtype=np.int64)


def _batch(name: str, columns: dict[str, Any], numbers: list[int], contents: list[str], bad: list[BadRow]) -> Batch:
    ids, circuit = _positions(columns["circuit_id"])
    labels, label = _positions(columns.get("batch", ()))
    times, bad_time = times_utc(columns["time_utc"]) if "time_utc" in columns else (None, None)
    return Batch(
        ids=ids,
        circuit=circuit,
        bits=Text.from_strings(columns["bitstring"]),
        place=lambda i: Place(numbers[i], f"{name}:{numbers[i]}: "),
        content=lambda i: contents[i],
        count=whole_counts(columns["count"]) if "count" in columns else None,
        repeat=whole_repeats(columns["repeat"]) if "repeat" in columns else None,
        time=times,
        bad_time=bad_time,
        labels=labels,
        label=label if "batch" in columns else None,
        shown=lambda column, i: columns[column][i],
        bad=bad,
    )

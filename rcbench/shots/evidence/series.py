"""Shots in the order in which the files have them, and which file each run came from.

Only rows that stand for one shot each have an order; where a file has a column of counts, its runs have none.
Reading the files a second time, in order, takes 16 bytes a shot; above MOST_ROWS rows it is left out, and said so.
"""

from __future__ import annotations

import importlib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from rcbench.arrays import IntArray
from rcbench.shots.declarations import read_declared
from rcbench.shots.intake import Intake, Part, Runs
from rcbench.shots.records import Irregular
from rcbench.shots.shots import Roster, RunKey, Shots
from rcbench.shots.sources import list_sources
from rcbench.shots.tally import Tally

MOST_ROWS = 20_000_000


@dataclass(frozen=True, slots=True, eq=False)
class Series:
    """Shots in order.

    Args:
        index: (shots,) state index of each shot, by run; runs without an order are not in.
        files: names of the files that hold shots of each run.
    """

    index: Mapping[RunKey, IntArray] = field(default_factory=dict)
    files: Mapping[RunKey, tuple[str, ...]] = field(default_factory=dict)


class _InOrder(Tally):
    """Rows as they come, not added up."""

    def __init__(self, max_bits: int) -> None:
        super().__init__(max_bits)
        self.rows: list[tuple[IntArray, IntArray]] = []
        self.counted: set[int] = set()  # runs with a row that is more than one shot: these have no order

    def add(self, run: IntArray, words: IntArray, counts: IntArray | None) -> None:
        """Keep the rows; of outcomes of more than 64 bits only that they came."""
        index = words[:, -1].astype(np.int64) if words.shape[1] == 1 else np.full(len(run), -1, dtype=np.int64)
        if counts is not None or words.shape[1] > 1:
            self.counted.update(np.unique(run if counts is None else run[counts > 1]).tolist())
        self.rows.append((run.copy(), index))


def read_series(path: Path, kit: Roster, shots: Shots, *, bit_order: str | None = None) -> Series | None:
    """The shots of files that `read_shots` has read, in order; None where there are more than MOST_ROWS rows."""
    if sum(file.rows for file in shots.files) > MOST_ROWS:
        return None
    sources, _ = list_sources(path, None)
    declared = read_declared(path if path.is_dir() else path.parent, bit_order)
    runs = Runs(kit)
    intake = Intake(runs, declared.reading, keep_all=True, collector=_InOrder)
    aside = files_set_aside(shots)
    files: dict[int, list[str]] = {}
    parts: list[_InOrder] = []
    for source in sources:
        if source.name in aside:
            continue
        module = importlib.import_module(f"rcbench.shots.{source.format}")
        repeat = declared.repeat.get(source.name)
        try:
            part: Part = intake.read(module.batches(source, False), repeat)
        except Irregular:
            part = intake.read(module.batches(source, True), repeat)
        assert isinstance(part.tally, _InOrder)
        parts.append(part.tally)
        for number in np.unique(np.concatenate([run for run, _ in part.tally.rows] or [np.zeros(0, int)])).tolist():
            files.setdefault(number, []).append(source.name)
    runs.settle(files.keys())
    return Series(_by_run(parts, runs), {runs.keys[number]: tuple(names) for number, names in files.items()})


def files_set_aside(shots: Shots) -> set[str]:
    """Files that were set aside as a whole."""
    return {name for name, bad in shots.bad_rows if bad.place.number == 0}


def _by_run(parts: list[_InOrder], runs: Runs) -> dict[RunKey, IntArray]:
    rows = [row for part in parts for row in part.rows]
    if not rows:
        return {}
    run, index = (np.concatenate([row[place] for row in rows]) for place in (0, 1))
    order = np.argsort(run, kind="stable")
    run, index = run[order], index[order]
    counted = set().union(*(part.counted for part in parts))
    starts = np.flatnonzero(np.diff(run, prepend=-1))
    ends = np.append(starts[1:], len(run))
    return {
        runs.keys[int(run[start])]: index[start:end]
        for start, end in zip(starts, ends, strict=True)
        if int(run[start]) not in counted
    }

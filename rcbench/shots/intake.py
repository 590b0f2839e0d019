"""Checking rows of shots against the roster, and adding them up by circuit and repeat."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Collection, Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from rcbench.arrays import BoolArray, IntArray
from rcbench.errors import InputError
from rcbench.shots.decode import Reading, pack_words
from rcbench.shots.records import MAX_COUNT, MAX_REPEAT, BadRow, Batch, Irregular
from rcbench.shots.shots import Roster, RunKey
from rcbench.shots.tally import Tally

AT_ONCE = 20  # bad rows told at once


class Runs:
    """The runs (circuit and repeat) that shots may belong to, numbered: those of the roster first.

    ids: number of each circuit_id. n_bits: classical bits by circuit. keys: circuit_id and repeat by run.
    """

    def __init__(self, kit: Roster) -> None:
        self.ids: dict[str, int] = {}
        self.keys: list[RunKey] = []
        self.run_bits: list[int] = []
        self._run: dict[tuple[int, int], int] = {}
        bits: list[int] = []
        for row in kit.rows:
            circuit = self.ids.setdefault(row.circuit_id, len(bits))
            if circuit == len(bits):
                bits.append(len(row.measured_qubits))
            self.run(row.circuit_id, circuit, row.repeat, len(row.measured_qubits))
        self.n_bits = np.array(bits, dtype=np.int64)
        self.max_bits = int(self.n_bits.max(initial=1))
        # the run of a row without a repeat: -1 where the roster has several
        self.n_asked = len(self.keys)
        self.only_run = np.full(len(bits), -2, dtype=np.int64)
        for (circuit, _), run in self._run.items():
            self.only_run[circuit] = run if self.only_run[circuit] == -2 else -1

    def settle(self, present: Collection[int]) -> None:
        """Give runs their place in the roster, once it is known which of them came back.

        The roster counts the repeats of a circuit, each under an id of its own; a sender may count the runs of each id
        from 0. So where the roster has one run of an id, and its repeat did not come back, the run numbered 0 is it.
        """
        for number in sorted(present):
            if number < self.n_asked or self.keys[number][1] != 0:
                continue
            asked = int(self.only_run[self.ids[self.keys[number][0]]])
            if asked >= 0 and asked not in present:
                self.keys[asked], self.keys[number] = self.keys[number], self.keys[asked]

    def run(self, circuit_id: str, circuit: int, repeat: int, n_bits: int) -> int:
        """Number of a run; a repeat that the roster lacks becomes a new one."""
        key = (circuit, repeat)
        if key not in self._run:
            self._run[key] = len(self.keys)
            self.keys.append((circuit_id, repeat))
            self.run_bits.append(n_bits)
        return self._run[key]


@dataclass(slots=True)
class Part:
    """What one file gave: rows read, outcomes, and the rest by run number or unknown circuit_id."""

    tally: Tally
    rows: int = 0
    shots: int = 0
    unknown: Counter[str] = field(default_factory=Counter)
    discards: Counter[int] = field(default_factory=Counter)
    times: dict[int, tuple[Any, Any]] = field(default_factory=dict)
    labels: dict[int, set[str]] = field(default_factory=dict)
    bad: list[BadRow] = field(default_factory=list)


class Intake:
    """Reads batches of one file after another.

    Args:
        runs: the runs of the kit. reading: how bitstrings are written. keep_all: read on however many rows are bad.
        collector: what takes the rows in; a Tally adds them up.
    """

    def __init__(
        self, runs: Runs, reading: Reading, *, keep_all: bool, collector: Callable[[int], Tally] = Tally
    ) -> None:
        self.runs, self.reading, self.keep_all, self.collector = runs, reading, keep_all, collector

    def read(self, batches: Iterable[Batch], repeat: int | None) -> Part:
        """All rows of a file; repeat: number of the repeat that the whole file holds, None where it is not stated.

        Raises:
            Irregular: a bad row in a batch that cannot name its place.
        """
        part = Part(self.collector(self.runs.max_bits))
        for batch in batches:
            _Rows(self, batch, part, repeat).take()
            if len(part.bad) >= AT_ONCE and not self.keep_all:
                break
        part.bad.sort(key=lambda bad: bad.place.number)
        return part


class _Rows:
    """One batch on its way in: rows are rejected one reason after another, and what is left is added up."""

    def __init__(self, intake: Intake, batch: Batch, part: Part, repeat: int | None) -> None:
        self.runs, self.reading, self.keep_all = intake.runs, intake.reading, intake.keep_all
        self.batch, self.part, self.file_repeat = batch, part, repeat
        self.bits = batch.bits.without(ord(self.reading.separator)) if self.reading.separator else batch.bits
        self.good = np.ones(len(batch), dtype=np.bool_)

    def take(self) -> None:
        """Check every row and add the good ones up."""
        batch, part = self.batch, self.part
        part.rows += len(batch) + len(batch.bad)
        part.bad += batch.bad
        if not len(batch):
            return
        self._check_ids()
        self._check_numbers()
        numbers = np.array([self.runs.ids.get(name, -1) for name in batch.ids], dtype=np.int64)
        known = numbers[batch.circuit]
        self._set_unknown_aside(known)
        run = self._run_numbers(known)
        self._check_total()
        widths = np.where(numbers >= 0, self.runs.n_bits[numbers], 0)  # of the few ids, not of every row
        for n_bits in np.unique(widths[widths > 0]).tolist():
            self._add(run, (widths == n_bits)[batch.circuit], n_bits)
        kept = self.good & (known >= 0)
        self._note_times(run, kept)
        self._note_labels(run, kept)

    def _reject(self, which: BoolArray, key: str, allowed: str, found: str = "") -> None:
        """Reject rows that are good so far; found: column whose value is shown, or what to say."""
        rows = np.flatnonzero(which & self.good)
        if not len(rows):
            return
        self.good[rows] = False
        batch = self.batch
        if batch.place is None:
            raise Irregular(key)
        room = len(rows) if self.keep_all else max(AT_ONCE - len(self.part.bad), 0) + 1
        for row in rows[:room].tolist():
            shown = found or (self.bits.get(row) if key == "bitstring" else batch.shown(key, row))
            self.part.bad.append(BadRow(batch.place(row), key, shown, allowed, batch.content(row)))

    def _check_ids(self) -> None:
        wrong = np.array([not (name and name.isprintable()) for name in self.batch.ids], dtype=np.bool_)
        if wrong.any():
            found = next(name for name, w in zip(self.batch.ids, wrong, strict=True) if w)
            self._reject(
                wrong[self.batch.circuit],
                "circuit_id",
                "the id of a circuit of the kit",
                repr(found)[1:-1] or "nothing",
            )

    def _check_numbers(self) -> None:
        batch = self.batch
        if batch.count is not None:
            self._reject(batch.count < 1, "count", f"a whole number of shots, 1 to {MAX_COUNT}")
        if batch.repeat is not None:
            self._reject(batch.repeat < 0, "repeat", f"a whole number from 0 to {MAX_REPEAT}")
        if batch.bad_time is not None:
            self._reject(batch.bad_time, "time_utc", "an ISO 8601 time in UTC, as 2026-03-04T09:30:00Z, or nothing")

    def _check_total(self) -> None:
        """Sums must stay exact in every table."""
        count = self.batch.count
        if count is not None:
            good = np.where(self.good, count, 0)
            rough = float(good.sum(dtype=np.float64))  # the whole sum may pass the end of int64
            self.part.shots += int(good.sum()) if rough < 2**62 else int(rough)
            if self.part.shots > MAX_COUNT:
                raise InputError("count", self.part.shots, f"at most {MAX_COUNT} shots in one file")

    def _count(self, rows: IntArray) -> IntArray:
        return np.ones(len(rows), dtype=np.int64) if self.batch.count is None else self.batch.count[rows]

    def _set_unknown_aside(self, known: IntArray) -> None:
        rows = np.flatnonzero((known < 0) & self.good)
        if not len(rows):
            return
        total = np.zeros(len(self.batch.ids), dtype=np.int64)
        np.add.at(total, self.batch.circuit[rows], self._count(rows))
        for place in np.flatnonzero(total).tolist():
            self.part.unknown[self.batch.ids[place]] += int(total[place])

    def _run_numbers(self, known: IntArray) -> IntArray:
        """Run of each row of a known circuit."""
        repeat = self.batch.repeat
        if repeat is None and self.file_repeat is None:
            run = self.runs.only_run[known]
            several = (run == -1) & (known >= 0)
            if several.any():
                allowed = (
                    "a column repeat, or the file's repeat in shots.toml: the roster asks for several of this circuit"
                )
                self._reject(several, "repeat", allowed, "nothing")
            return run
        if repeat is None:
            repeat = np.full(len(known), self.file_repeat, dtype=np.int64)
        elif self.file_repeat is not None:
            self._reject(repeat != self.file_repeat, "repeat", f"{self.file_repeat}, as shots.toml states for the file")
        pairs = known * (MAX_REPEAT + 1) + repeat
        run = np.zeros(len(known), dtype=np.int64)
        rows = np.flatnonzero((known >= 0) & self.good)
        different, first, where = np.unique(pairs[rows], return_index=True, return_inverse=True)
        numbers = [
            self.runs.run(
                self.batch.ids[self.batch.circuit[row]],
                int(known[row]),
                int(repeat[row]),
                int(self.runs.n_bits[known[row]]),
            )
            for row in rows[first].tolist()
        ]
        run[rows] = np.array(numbers, dtype=np.int64)[where] if len(different) else 0
        return run

    def _add(self, run: IntArray, which: BoolArray, n_bits: int) -> None:
        """Decode the rows of circuits of n_bits and add them to the tally."""
        if not self.reading.fits(n_bits):
            allowed = f"the register map of shots.toml; it is not for circuits of {n_bits} classical bits"
            self._reject(which, "bitstring", allowed)
            return
        width = self.reading.n_characters(n_bits)
        lengths = self.bits.lengths()
        allowed = f"{width} characters, {self.reading.alphabet()}"
        self._reject(which & (lengths != width), "bitstring", allowed)
        rows: IntArray | None = None  # all of them
        if not (which & self.good).all():
            rows = np.flatnonzero(which & self.good)
        characters = self.bits.matrix(rows, width)
        special = self.reading.sort_rows(characters)
        if special is not None:
            rows = np.arange(len(self.batch)) if rows is None else rows
            lost, illegal = special
            wrong = np.zeros(len(self.batch), dtype=np.bool_)
            wrong[rows[illegal]] = True
            self._reject(wrong, "bitstring", allowed)
            for number, count in zip(run[rows[lost]].tolist(), self._count(rows[lost]).tolist(), strict=True):
                self.part.discards[number] += count
            clean = ~(lost | illegal)
            rows, characters = rows[clean], characters[clean]
        words = pack_words(characters[:, self.reading.columns(n_bits)])
        count = self.batch.count
        if rows is None:
            self.part.tally.add(run, words, count)
        else:
            self.part.tally.add(run[rows], words, None if count is None else count[rows])

    def _note_times(self, run: IntArray, kept: BoolArray) -> None:
        if self.batch.time is None:
            return
        rows = np.flatnonzero(kept & ~np.isnat(self.batch.time))
        if not len(rows):
            return
        different, where = np.unique(run[rows], return_inverse=True)
        times = self.batch.time[rows]
        first, last = np.full(len(different), times.max()), np.full(len(different), times.min())
        np.minimum.at(first, where, times)
        np.maximum.at(last, where, times)
        for number, low, high in zip(different.tolist(), first, last, strict=True):
            self.part.times[number] = merge_times(self.part.times.get(number), (low, high))

    def _note_labels(self, run: IntArray, kept: BoolArray) -> None:
        label = self.batch.label
        if label is None:
            return
        rows = np.flatnonzero(kept)
        pairs = np.unique(np.stack([run[rows], label[rows]], axis=1), axis=0)
        for number, place in pairs.tolist():
            if self.batch.labels[place]:
                self.part.labels.setdefault(number, set()).add(self.batch.labels[place])


def merge_times(held: tuple[Any, Any] | None, new: tuple[Any, Any]) -> tuple[Any, Any]:
    """The first and the last of two spans."""
    return new if held is None else (min(held[0], new[0]), max(held[1], new[1]))


def by_key(runs: Runs, numbered: Mapping[int, Any]) -> dict[RunKey, Any]:
    """A mapping by run number as one by circuit_id and repeat."""
    return {runs.keys[number]: numbered[number] for number in sorted(numbered)}

"""Rows of shots as every file format hands them over: arrays, and a way to name the place of each row."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any, NamedTuple

import numpy as np

from rcbench.arrays import BoolArray, IntArray

MAX_COUNT = 2**53  # the largest sum that is still exact as a float64 of the tables
MAX_REPEAT = 9999
_NUMBER = re.compile(r"[-+]?[0-9]{1,20}(\.[0-9]{0,20})?([eE][-+]?[0-9]{1,3})?")
NO_TIME = np.datetime64("NaT", "us")


class Irregular(Exception):
    """A fast reader met something it cannot name the place of; the file is read again by the exact reader."""


class Place(NamedTuple):
    """Where a row stands. number: its line or row, from 1; prefix: what opens the message, as ``shots.csv:17: ``."""

    number: int
    prefix: str


class BadRow(NamedTuple):
    """A row that cannot be used, and why."""

    place: Place
    key: str
    found: object
    allowed: str
    content: str


@dataclass(frozen=True, slots=True)
class Text:
    """A column of byte strings: data (bytes one after another, uint8) and offsets (rows + 1)."""

    data: IntArray
    offsets: IntArray

    @classmethod
    def from_strings(cls, strings: Sequence[str]) -> Text:
        """From Python strings; what is not UTF-8 comes back as the bytes it was read from."""
        encoded = [s.encode("utf-8", "surrogateescape") for s in strings]
        lengths = np.fromiter(map(len, encoded), dtype=np.int64, count=len(encoded))
        return cls(np.frombuffer(b"".join(encoded), dtype=np.uint8), np.concatenate(([0], np.cumsum(lengths))))

    @classmethod
    def from_arrow(cls, column: Any) -> Text:
        """From a pyarrow array of string, binary or their large kinds, without a copy; missing values are empty."""
        import pyarrow as pa

        if column.null_count:
            column = column.fill_null(b"" if pa.types.is_binary(column.type) else "")
        wide = pa.types.is_large_string(column.type) or pa.types.is_large_binary(column.type)
        _, starts, data = column.buffers()
        kind = np.dtype(np.int64 if wide else np.int32)
        if len(column) == 0:
            return cls(np.zeros(0, dtype=np.uint8), np.zeros(1, dtype=np.int64))
        offsets = np.frombuffer(starts, dtype=kind, count=len(column) + 1, offset=column.offset * kind.itemsize)
        raw = np.zeros(0, dtype=np.uint8) if data is None else np.frombuffer(data, dtype=np.uint8)
        return cls(raw[offsets[0] : offsets[-1]], offsets - offsets[0])

    def __len__(self) -> int:
        return len(self.offsets) - 1

    def lengths(self) -> IntArray:
        """(rows,) length of each string in bytes."""
        return np.diff(self.offsets)

    def get(self, row: int) -> str:
        """One string, for a message."""
        return self.data[self.offsets[row] : self.offsets[row + 1]].tobytes().decode("utf-8", "backslashreplace")

    def matrix(self, rows: IntArray | None, width: int) -> IntArray:
        """(k, width) characters of rows that all have this length; None for all of them, then without a copy."""
        if rows is None:
            return self.data.reshape(len(self), width)
        characters: IntArray = self.data[self.offsets[:-1][rows][:, None] + np.arange(width)]
        return characters

    def without(self, character: int) -> Text:
        """The same strings with one character taken out wherever it stands."""
        keep = self.data != character
        before = np.concatenate(([0], np.cumsum(keep)))
        return Text(self.data[keep], before[self.offsets])


@dataclass(frozen=True, slots=True, kw_only=True)
class Batch:
    """Some rows of a file.

    Args:
        ids: different circuit ids. circuit: (rows,) position of each row's id in `ids`.
        bits: the bitstrings.
        place: where row i of the batch stands; None where only the exact reader knows.
        content: row i as text, for the file of bad rows and for messages.
        count: (rows,) int64, 0 where it was no whole number from 1 to MAX_COUNT; None: every row is one shot.
        repeat: (rows,) int64, -1 where it was no whole number from 0 to MAX_REPEAT; None: not given.
        time: (rows,) datetime64[us], not a time where none was given. bad_time: (rows,) what could not be read.
        labels: different batch labels. label: (rows,) position of each row's label in `labels`.
        shown: what stood in a column of row i, for messages.
        bad: rows that did not come far enough to be in the arrays.
    """

    ids: Sequence[str]
    circuit: IntArray
    bits: Text
    place: Callable[[int], Place] | None
    content: Callable[[int], str] = field(default=lambda _: "")
    count: IntArray | None = None
    repeat: IntArray | None = None
    time: Any = None
    bad_time: BoolArray | None = None
    labels: Sequence[str] = ()
    label: IntArray | None = None
    shown: Callable[[str, int], object] = field(default=lambda _, __: None)
    bad: Sequence[BadRow] = ()

    def __len__(self) -> int:
        return len(self.circuit)


def joined(batches: Iterable[Batch], rows: int = 50_000) -> Iterator[Batch]:
    """The same rows in fewer batches: many small circuits would cost more in calls than in data.

    For batches whose rows have places and one or no count, and no more columns.
    """
    held: list[Batch] = []
    size = 0
    for batch in batches:
        held.append(batch)
        size += len(batch)
        if size >= rows:
            yield _join(held)
            held, size = [], 0
    if held:
        yield _join(held)


def _join(parts: list[Batch]) -> Batch:
    if len(parts) == 1:
        return parts[0]
    first_row = np.cumsum([0, *(len(part) for part in parts)])
    first_id = np.cumsum([0, *(len(part.ids) for part in parts)])
    first_byte = np.cumsum([0, *(len(part.bits.data) for part in parts)])

    def part_of(row: int) -> tuple[Batch, int]:
        place = int(np.searchsorted(first_row, row, side="right")) - 1
        return parts[place], row - int(first_row[place])

    def place(row: int) -> Place:
        part, inner = part_of(row)
        assert part.place is not None
        return part.place(inner)

    def content(row: int) -> str:
        part, inner = part_of(row)
        return part.content(inner)

    def shown(column: str, row: int) -> object:
        part, inner = part_of(row)
        return part.shown(column, inner)

    counted = [part.count for part in parts if part.count is not None]
    offsets = [part.bits.offsets[1:] + start for part, start in zip(parts, first_byte[:-1], strict=True)]
    return Batch(
        ids=[name for part in parts for name in part.ids],
        circuit=np.concatenate([part.circuit + start for part, start in zip(parts, first_id[:-1], strict=True)]),
        bits=Text(np.concatenate([part.bits.data for part in parts]), np.concatenate([[0], *offsets])),
        place=place,
        content=content,
        count=np.concatenate(counted) if counted else None,
        shown=shown,
    )


def whole(value: object, lowest: int, highest: int, otherwise: int) -> int:
    """A whole number within limits, from a number or its text; `otherwise` where it is none."""
    if isinstance(value, str):
        try:
            # Python would take underscores and other scripts' digits
            value = (int(value) if value.isdecimal() else float(value)) if _NUMBER.fullmatch(value) else value
        except ValueError:
            return otherwise
    if isinstance(value, float) and value.is_integer():
        value = int(value)
    if isinstance(value, bool) or not isinstance(value, int) or not lowest <= value <= highest:
        return otherwise
    return value


def whole_counts(values: Sequence[object]) -> IntArray:
    """Counts, 0 where one is no whole number from 1 to MAX_COUNT."""
    return np.array([whole(v, 1, MAX_COUNT, 0) for v in values], dtype=np.int64)


def whole_repeats(values: Sequence[object]) -> IntArray:
    """Repeats, -1 where one is no whole number from 0 to MAX_REPEAT."""
    return np.array([whole(v, 0, MAX_REPEAT, -1) for v in values], dtype=np.int64)


def times_utc(values: Sequence[str]) -> tuple[Any, BoolArray]:
    """Times from ISO 8601 text in UTC (a closing Z or +00:00 may stand), and which were none."""
    from datetime import UTC, datetime, timedelta

    times = np.full(len(values), NO_TIME)
    bad = np.zeros(len(values), dtype=np.bool_)
    for i, text in enumerate(values):
        if not text:
            continue
        try:
            when = datetime.fromisoformat(text)
        except ValueError:
            bad[i] = True
            continue
        if when.tzinfo is not None and when.utcoffset() != timedelta(0):
            bad[i] = True
            continue
        times[i] = np.datetime64(when.astimezone(UTC).replace(tzinfo=None) if when.tzinfo else when, "us")
    return times, bad

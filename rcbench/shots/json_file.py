"""Shots as JSON: {circuit_id: {bitstring: count}}, one circuit in memory at a time besides the text itself."""

from __future__ import annotations

import json
import re
from bisect import bisect_right
from collections import Counter
from collections.abc import Iterator
from functools import cached_property

import numpy as np

from rcbench.shots.records import Batch, Place, Text, joined, whole_counts
from rcbench.shots.sources import BROKEN, Source, one_line

LARGEST = 1 << 28
_SHAPE = "{circuit_id: {bitstring: count}}"
_SPACES = re.compile(r"[ \t\n\r]*")
_STRING = re.compile(r'"(?:[^"\\]|\\.)*"(\s*:)?', re.DOTALL)


class _Pairs(list[tuple[str, object]]):
    """The pairs of a JSON object; a dictionary would keep the last of two equal keys without a word."""


class _Document:
    """A JSON text with the lines of its positions."""

    def __init__(self, source: Source, text: str) -> None:
        self.source, self.text = source, text
        self._decoder = json.JSONDecoder(object_pairs_hook=_Pairs)

    @cached_property
    def _breaks(self) -> list[int]:
        return [found.start() for found in re.finditer("\n", self.text)]

    def line(self, position: int) -> int:
        """Line of a position, from 1."""
        return bisect_right(self._breaks, position - 1) + 1

    def skip(self, position: int) -> int:
        """Next position that is no space."""
        found = _SPACES.match(self.text, position)
        return found.end() if found else position

    def value(self, position: int) -> tuple[object, int]:
        """The value at a position, and where it ends."""
        try:
            return self._decoder.raw_decode(self.text, position)
        except json.JSONDecodeError as error:
            raise self.source.error("syntax", self._near(error.pos), f"JSON ({error.msg})", error.lineno) from None
        except (RecursionError, ValueError) as error:
            raise self.source.error("syntax", self._near(position), f"JSON ({error})", self.line(position)) from None

    def expect(self, position: int, characters: str) -> str:
        """The character at a position, one of those allowed here."""
        found = self.text[position : position + 1]
        if not found or found not in characters:
            allowed = f"JSON {_SHAPE}: {' or '.join(characters)} here"
            raise self.source.error("syntax", self._near(position), allowed, self.line(position))
        return found

    def _near(self, position: int) -> str:
        return self.text[position : position + 20] or "end of file"

    def circuits(self) -> Iterator[tuple[str, int, object, int]]:
        """Each circuit_id with the position of its key, its value and the position of the value."""
        position = self.skip(0)
        self.expect(position, "{")
        position = self.skip(position + 1)
        if self.text[position : position + 1] == "}":
            return
        while True:
            self.expect(position, '"')
            key, end = self.value(position)
            colon = self.skip(end)
            self.expect(colon, ":")
            start = self.skip(colon + 1)
            value, end = self.value(start)
            yield str(key), position, value, start
            end = self.skip(end)
            if self.expect(end, ",}") == "}":
                break
            position = self.skip(end + 1)
        if self.skip(end + 1) != len(self.text):
            end = self.skip(end + 1)
            raise self.source.error("syntax", self._near(end), "nothing after the closing }", self.line(end))


def batches(source: Source, exact: bool) -> Iterator[Batch]:
    """The entries of a JSON file; lines are found when needed, so `exact` changes nothing.

    Raises:
        InputError: no JSON, another shape, a key given twice.
    """
    return joined(_circuit_batches(source))


def _circuit_batches(source: Source) -> Iterator[Batch]:
    document = _Document(source, _text(source))
    seen: set[str] = set()
    for circuit_id, position, value, start in document.circuits():
        if circuit_id in seen:
            raise source.error("circuit_id", circuit_id, "every circuit once", document.line(position))
        seen.add(circuit_id)
        if not isinstance(value, _Pairs):
            raise source.error(
                circuit_id, type(value).__name__, f"bitstrings with counts: {_SHAPE}", document.line(start)
            )
        keys = {key for key, _ in value}
        if len(keys) < len(value):
            twice = Counter(key for key, _ in value).most_common(1)[0][0]
            raise source.error(circuit_id, twice, "every bitstring once", document.line(start))
        yield _batch(document, circuit_id, value, start)


def _text(source: Source) -> str:
    source.check_text()
    try:
        with source.open() as file:
            data = file.read(LARGEST + 1)
    except BROKEN as error:
        raise source.error("compression", one_line(error), "a whole gzip file") from None
    if len(data) > LARGEST:
        raise source.error("size", f"more than {LARGEST >> 20} MiB", "a smaller JSON file, or CSV or Parquet")
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise source.error("content", data[error.start : error.start + 1], "text in UTF-8", line) from None


def _batch(document: _Document, circuit_id: str, pairs: _Pairs, start: int) -> Batch:
    strings = [key for key, _ in pairs]
    values = [value for _, value in pairs]
    lines: list[int] = []

    def place(row: int) -> Place:
        if not lines:
            lines.extend(_key_lines(document, values, start))
        return Place(lines[row], f"{document.source.name}:{lines[row]}: ")

    return Batch(
        ids=[circuit_id],
        circuit=np.zeros(len(pairs), dtype=np.int64),
        bits=Text.from_strings(strings),
        place=place,
        content=lambda row: f"{circuit_id},{strings[row]},{values[row]}",
        count=whole_counts([value if not isinstance(value, str) else None for value in values]),
        shown=lambda column, row: values[row] if column == "count" else strings[row],
    )


def _inner_keys(value: object) -> int:
    """Keys inside a value that should have been a number."""
    if isinstance(value, _Pairs):
        return len(value) + sum(_inner_keys(inner) for _, inner in value)
    return sum(map(_inner_keys, value)) if isinstance(value, list) else 0


def _key_lines(document: _Document, values: list[object], start: int) -> Iterator[int]:
    """The line of each key of the object at a position."""
    keys = (found.start() for found in _STRING.finditer(document.text, start) if found.group(1))
    for value in values:
        yield document.line(next(keys))
        for _ in range(_inner_keys(value)):
            next(keys)

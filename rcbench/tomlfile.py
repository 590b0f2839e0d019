"""TOML files with the line of every key, so that an error about a value can say where it stands."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from rcbench.errors import InputError, suggest
from rcbench.files import read_text

Key = str | int
MAX_BYTES = 8_000_000  # a campaign of hundreds of experiments has a few hundred kilobytes
_HEADER = re.compile(r"^\s*(\[\[?)\s*([^\]]+?)\s*\]\]?\s*(?:#.*)?$")
_ASSIGN = re.compile(r"""^\s*((?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*')(?:\s*\.\s*(?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*'))*)\s*=""")
_PART = re.compile(r"""[A-Za-z0-9_-]+|"[^"]*"|'[^']*'""")


@dataclass(frozen=True, slots=True)
class TomlFile:
    """A TOML file as data, with the line of each key. lines: key path to line, counted from 1."""

    name: str
    data: dict[str, Any]
    lines: Mapping[tuple[Key, ...], int] = field(default_factory=dict)

    def line(self, *keys: Key) -> int:
        """The line of a key, or of the nearest table around it; 1 where none is known."""
        for end in range(len(keys), 0, -1):
            if keys[:end] in self.lines:
                return self.lines[keys[:end]]
        return 1

    def where(self, *keys: Key) -> str:
        """The place of a key for a message: ``campaign.toml:31: ``."""
        return f"{self.name}:{self.line(*keys)}: "


def read_toml(path: Path, text: str | None = None) -> TomlFile:
    """Read a TOML file; InputError with the line where it cannot be parsed."""
    text = read_text(path) if text is None else text
    if len(text) > MAX_BYTES:
        raise InputError("file", f"{len(text)} characters", f"at most {MAX_BYTES}", f"{path.name}: ")
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        found = re.search(r"\(at line (\d+)", str(error))
        at_end = text.count("\n") + 1
        line = int(found.group(1)) if found else at_end
        shown = text.splitlines()[line - 1].strip() if line <= len(text.splitlines()) else "end of file"
        raise InputError("syntax", shown, f"TOML ({error})", f"{path.name}:{line}: ") from None
    except RecursionError:
        raise InputError("syntax", "tables nested too deep", "TOML of a few levels", f"{path.name}: ") from None
    return TomlFile(path.name, data, _scan(text))


def _scan(text: str) -> dict[tuple[Key, ...], int]:
    """Lines of tables and keys; strings over several lines are stepped over by counting their quotes."""
    lines: dict[tuple[Key, ...], int] = {}
    counts: dict[tuple[Key, ...], int] = {}
    table: tuple[Key, ...] = ()
    inside = ""
    for number, line in enumerate(text.splitlines(), start=1):
        if inside:
            if inside in line:
                inside = ""
            continue
        header = _HEADER.match(line)
        if header:
            parts: list[Key] = []
            names = [part.strip("\"'") for part in _PART.findall(header.group(2))]
            for place, name in enumerate(names):
                parts.append(name)
                last = place == len(names) - 1
                if last and header.group(1) == "[[":
                    counts[tuple(parts)] = counts.get(tuple(parts), -1) + 1
                if tuple(parts) in counts:
                    parts.append(counts[tuple(parts)])
            table = tuple(parts)
            lines.setdefault(table, number)
            continue
        assign = _ASSIGN.match(line)
        if assign:
            key = tuple(part.strip("\"'") for part in _PART.findall(assign.group(1)))
            lines.setdefault((*table, *key), number)
            for quotes in ('"""', "'''"):
                if line.count(quotes) % 2 == 1:
                    inside = quotes
    return lines


class Section:
    """One table of a TOML file while it is read: typed values, unknown keys found, all errors kept.

    Args:
        file: the file. path: where the table stands. data: the table. errors: where errors are collected.
    """

    def __init__(
        self, file: TomlFile, path: tuple[Key, ...], data: Mapping[str, Any], errors: list[InputError]
    ) -> None:
        self.file, self.path, self.data, self.errors = file, path, data, errors
        self._seen: set[str] = set()

    def error(self, key: str, found: object, allowed: str) -> None:
        """Keep an error about a key of this table."""
        self.errors.append(InputError(key, found, allowed, self.file.where(*self.path, key)))

    def catch(self, error: InputError) -> None:
        """Keep an error that an object raised about itself, with the place of its key."""
        key = error.key.split(".")[0]
        self.errors.append(error.at(self.file.where(*self.path, key)))

    def has(self, key: str) -> bool:
        """Whether the key is there."""
        return key in self.data

    def raw(self, key: str, default: Any = None) -> Any:
        """The value as it stands."""
        self._seen.add(key)
        return self.data.get(key, default)

    def _typed(self, key: str, kind: type, words: str, default: Any) -> Any:
        self._seen.add(key)
        if key not in self.data:
            if default is ...:
                self.error(key, "nothing", words)
                return None
            return default
        value = self.data[key]
        if kind is float and isinstance(value, int) and not isinstance(value, bool):
            value = float(value) if -(2**1000) < value < 2**1000 else float("inf")
        if not isinstance(value, kind) or (kind is not bool and isinstance(value, bool)):
            self.error(key, value, words)
            return None if default is ... else default
        if isinstance(value, float) and not abs(value) < float("inf"):
            self.error(key, value, "a finite number")
            return None if default is ... else default
        return value

    def text(self, key: str, default: Any = ...) -> Any:
        """A text."""
        return self._typed(key, str, "a text in quotes", default)

    def whole(self, key: str, default: Any = ..., low: int | None = None, high: int = 2**53) -> Any:
        """A whole number within limits."""
        value = self._typed(key, int, "a whole number", default)
        if isinstance(value, int) and key in self.data and ((low is not None and value < low) or value > high):
            self.error(key, value, f"a whole number from {low if low is not None else 'any'} to {high}")
            return None if default is ... else default
        return value

    def number(self, key: str, default: Any = ..., low: float | None = None) -> Any:
        """A number, not below a limit."""
        value = self._typed(key, float, "a number", default)
        if isinstance(value, float) and low is not None and value < low:
            self.error(key, value, f"a number from {low:g} up")
            return None if default is ... else default
        return value

    def flag(self, key: str, default: Any = ...) -> Any:
        """true or false."""
        return self._typed(key, bool, "true or false", default)

    def wholes(self, key: str, default: Any = ...) -> Any:
        """A list of whole numbers."""
        value = self._typed(key, list, "a list of whole numbers", default)
        if key in self.data and isinstance(value, list):
            for item in value:
                if not isinstance(item, int) or isinstance(item, bool) or not -(2**53) <= item <= 2**53:
                    self.error(key, item, "whole numbers only")
                    return None if default is ... else default
            return tuple(value)
        return value

    def texts(self, key: str, default: Any = ...) -> Any:
        """A list of texts."""
        value = self._typed(key, list, "a list of texts", default)
        if key in self.data and isinstance(value, list):
            for item in value:
                if not isinstance(item, str):
                    self.error(key, item, "texts in quotes only")
                    return None if default is ... else default
            return tuple(value)
        return value

    def choice(self, key: str, allowed: Iterable[str], default: Any = ...) -> Any:
        """One of a list of names."""
        value = self.text(key, default)
        names = list(allowed)
        if isinstance(value, str) and key in self.data and value not in names:
            self.error(key, value, suggest(value, names))
            return None if default is ... else default
        return value

    def section(self, key: str) -> Section | None:
        """A table inside this one; None where it is missing."""
        self._seen.add(key)
        if key not in self.data:
            return None
        value = self.data[key]
        if not isinstance(value, dict):
            self.error(key, value, f"a table [{'.'.join(str(part) for part in (*self.path, key))}]")
            return None
        return Section(self.file, (*self.path, key), value, self.errors)

    def sections(self, key: str) -> list[Section]:
        """The tables of an array of tables; empty where it is missing."""
        self._seen.add(key)
        value = self.data.get(key, [])
        if not isinstance(value, list) or not all(isinstance(item, dict) for item in value):
            self.error(key, value, f"tables headed [[{key}]]")
            return []
        return [Section(self.file, (*self.path, key, place), item, self.errors) for place, item in enumerate(value)]

    def close(self) -> None:
        """Every key that nobody asked for is an error."""
        for key in self.data:
            if key not in self._seen:
                self.error(key, self.data[key], suggest(key, sorted(self._seen)))

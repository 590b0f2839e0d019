"""The text of an OpenQASM program with its include files put in place, and the way back to file and line."""

from __future__ import annotations

import re
from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

from rcbench.errors import InputError
from rcbench.files import read_text

LIBRARIES = ("qelib1.inc", "stdgates.inc")
MAX_DEPTH = 32
MAX_FILES = 1000
MAX_CHARACTERS = 100_000_000

# comments first, so that an include inside one is none, and strings, so that // inside one is no comment
_MARK = re.compile(
    r"""//[^\n]*|/\*.*?(?:\*/|(?P<open>\Z))|(?<!\w)include\s*(?P<quote>["'])(?P<name>[^"'\n]*)(?P=quote)\s*;|"[^"\n]*\"""",
    re.DOTALL,
)
_LINE_MARK = re.compile(r"^[ \t]*(?:#[ \t]*pragma|pragma|@[^\W\d])[^\n]*", re.MULTILINE)


@dataclass(frozen=True, slots=True)
class Missing:
    """An include file that is not there."""

    name: str
    where: str


@dataclass(slots=True)
class Source:
    """A program as one text.

    code: for the reader: comments, includes and line marks (pragmas, annotations) blanked.
    text: for people and other programs: the same length, comments kept, includes in place.
    libraries: standard gate files asked for. missing: includes found nowhere. files: include files put in place.
    """

    code: str = ""
    text: str = ""
    libraries: set[str] = field(default_factory=set)
    missing: list[Missing] = field(default_factory=list)
    files: list[Path] = field(default_factory=list)
    _starts: list[int] = field(default_factory=list)  # where each piece starts in the code ...
    _pieces: list[tuple[str, str, int]] = field(default_factory=list)  # ... its file's name, text and place in it

    def place(self, offset: int) -> str:
        """`file:line: ` of a place in the code."""
        if not self._starts:
            return ""
        piece = max(bisect_right(self._starts, offset) - 1, 0)
        name, text, begin = self._pieces[piece]
        line = text.count("\n", 0, begin + offset - self._starts[piece]) + 1
        return f"{name}:{line}: "

    def add(self, text: str, code: str, name: str, whole: str, begin: int) -> None:
        """Append one piece of a file; kept as parts until `close`."""
        self._starts.append(self._length)
        self._pieces.append((name, whole, begin))
        self._texts.append(text)
        self._codes.append(code)
        self._length += len(text)
        if self._length > MAX_CHARACTERS:
            raise InputError("include", name, f"a program of at most {MAX_CHARACTERS} characters, includes put in place")

    _texts: list[str] = field(default_factory=list)
    _codes: list[str] = field(default_factory=list)
    _length: int = 0

    def close(self) -> None:
        """Join the pieces."""
        self.text, self.code = "".join(self._texts), "".join(self._codes)
        if "pragma" in self.code or "@" in self.code:
            self.code = _LINE_MARK.sub(_blank, self.code)


def read_source(text: str, name: str, include_dirs: Sequence[Path] = (), folder: Path | None = None) -> Source:
    """Put the include files of a program in place.

    Args:
        text: the program. name: what errors call it.
        include_dirs: folders searched for include files, in order, after the folder of the file that includes.
        folder: folder of the program itself, if it has one.
    Raises:
        InputError: an include that includes itself, leads outside the folders, or cannot be read; a comment left open.
    """
    source = Source()
    roots = [path.resolve() for path in ([folder] if folder else []) + list(include_dirs)]
    _splice(source, text.removeprefix("\ufeff"), name, folder.resolve() if folder else None, roots, ())
    source.close()
    return source


def _splice(source: Source, text: str, name: str, folder: Path | None, roots: list[Path], chain: tuple[Path, ...]) -> None:
    done = 0
    # marks end early in most programs: nothing is searched behind the last of them
    end = max(text.rfind("//"), text.rfind("*/"), text.rfind("/*"), text.rfind("include"))
    for match in _MARK.finditer(text) if end >= 0 else ():
        if match.start() > end:
            break
        where = f"{name}:{text.count(chr(10), 0, match.start()) + 1}: "
        if match.group("open") is not None:
            raise InputError("comment", "/*", "a comment that ends in */", where)
        if match.group("name") is None:
            if not match.group().startswith('"'):
                source.add(text[done : match.start()], text[done : match.start()], name, text, done)
                source.add(match.group(), _blank(match), name, text, match.start())
                done = match.end()
            continue
        source.add(text[done : match.start()], text[done : match.start()], name, text, done)
        _include(source, match, name, text, where, folder, roots, chain)
        done = match.end()
    source.add(text[done:], text[done:], name, text, done)


def _include(
    source: Source, match: re.Match[str], name: str, text: str, where: str, folder: Path | None, roots: list[Path], chain: tuple[Path, ...]
) -> None:
    wanted = match.group("name")
    path = _find(wanted, where, folder, roots)
    statement = match.group()
    if path is None:
        if wanted in LIBRARIES:
            source.libraries.add(wanted)
        else:
            source.missing.append(Missing(wanted, where))
        source.add(statement, _blank(match), name, text, match.start())
        return
    if path in chain:
        raise InputError("include", wanted, "a file that does not include itself, by no way round", where)
    if len(chain) >= MAX_DEPTH or len(source.files) >= MAX_FILES:
        raise InputError("include", wanted, f"at most {MAX_FILES} includes, {MAX_DEPTH} inside one another", where)
    source.files.append(path)
    try:
        content = read_text(path, "include")
    except InputError as error:
        raise error.at(where) from None
    inner = str(Path(wanted)) if not chain else path.name
    _mark(source, f"// {_printable(wanted)}, put in place:\n", name, text, match.start())
    _splice(source, content, inner, path.parent, roots, (*chain, path))
    _mark(source, f"\n// end of {_printable(wanted)}\n", name, text, match.start())


def _mark(source: Source, comment: str, name: str, text: str, begin: int) -> None:
    source.add(comment, "".join(" " if sign != "\n" else sign for sign in comment), name, text, begin)


def _find(wanted: str, where: str, folder: Path | None, roots: list[Path]) -> Path | None:
    """The include file, inside one of the folders; None where there is none."""
    outside = False
    for base in ([folder] if folder and folder not in roots else []) + roots:
        try:
            path = (base / wanted).resolve()
            found = path.is_file()
        except (OSError, ValueError, RuntimeError):
            continue
        if not found:
            continue
        if any(path.is_relative_to(root) for root in roots):
            return path
        outside = True
    if outside:
        raise InputError("include", wanted, "a file inside the program's own folder or a folder given by --include", where)
    return None


def _blank(match: re.Match[str]) -> str:
    """Spaces in place of what matched, its line breaks kept."""
    text = match.group()
    return " " * len(text) if "\n" not in text else "".join(sign if sign == "\n" else " " for sign in text)


def _printable(name: str) -> str:
    return "".join(sign if sign.isprintable() else "?" for sign in name)

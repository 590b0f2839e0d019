"""The text of an OpenQASM program with its include files put in place, and the way back to file and line."""

from __future__ import annotations

import re
from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from rcbench.errors import InputError
from rcbench.files import read_text

LIBRARIES = ("qelib1.inc", "stdgates.inc")
MAX_DEPTH = 32
MAX_FILES = 1000
MAX_CHARACTERS = 100_000_000

# comments first, so that an include inside one is none; strings too, so that // inside one is no comment
_MARK = re.compile(
    r"//[^\n]*|/\*.*?(?:\*/|(?P<open>\Z))"
    r"|(?<!\w)include\s*(?P<quote>[\"'])(?P<name>[^\"'\n]*)(?P=quote)\s*;|\"[^\"\n]*\"",
    re.DOTALL,
)
_LINE_MARK = re.compile(r"^[ \t]*(?:#[ \t]*pragma|pragma|@[^\W\d])[^\n]*", re.MULTILINE)


@dataclass(frozen=True, slots=True)
class Missing:
    """An include file that is not there."""

    name: str
    where: str


@dataclass(frozen=True, slots=True)
class Piece:
    """A stretch of the spliced text that comes from one file. start: place in the splice; begin: place in the file."""

    start: int
    name: str
    whole: str
    begin: int


@dataclass(frozen=True, slots=True)
class Source:
    """A program as one text.

    code: for the reader: comments, includes and line marks (pragmas, annotations) blanked.
    text: for people and other programs: the same length, comments kept, includes in place.
    libraries: standard gate files asked for. missing: includes found nowhere. files: include files put in place.
    """

    code: str
    text: str
    libraries: frozenset[str]
    missing: tuple[Missing, ...]
    files: tuple[Path, ...]
    pieces: tuple[Piece, ...]

    def place(self, offset: int) -> str:
        """`file:line: ` of a place in the code."""
        piece = self.pieces[max(bisect_right(self.pieces, offset, key=lambda one: one.start) - 1, 0)]
        return _where(piece.name, piece.whole, piece.begin + offset - piece.start)


def read_source(text: str, name: str, include_dirs: Sequence[Path] = (), folder: Path | None = None) -> Source:
    """Put the include files of a program in place.

    Args:
        text: the program. name: what errors call it.
        include_dirs: folders searched for include files, in order, after the folder of the file that includes.
        folder: folder of the program itself, if it has one.
    Raises:
        InputError: an include that includes itself, leads outside the folders, or cannot be read; a comment left open.
    """
    splicer = _Splicer([path.resolve() for path in ([folder] if folder else []) + list(include_dirs)])
    splicer.file(text.removeprefix("\ufeff"), name, folder.resolve() if folder else None, ())
    return splicer.source()


class _Splicer:
    """Collects the pieces of a program, file by file."""

    def __init__(self, roots: list[Path]) -> None:
        self.roots = roots
        self.libraries: set[str] = set()
        self.missing: list[Missing] = []
        self.files: list[Path] = []
        self.pieces: list[Piece] = []
        self.texts: list[str] = []
        self.codes: list[str] = []
        self.length = 0

    def source(self) -> Source:
        code = "".join(self.codes)
        if "pragma" in code or "@" in code:
            code = _LINE_MARK.sub(lambda match: _blank(match.group()), code)
        return Source(
            code,
            "".join(self.texts),
            frozenset(self.libraries),
            tuple(self.missing),
            tuple(self.files),
            tuple(self.pieces),
        )

    def add(self, text: str, code: str, name: str, whole: str, begin: int) -> None:
        if not text and self.pieces:
            return
        self.pieces.append(Piece(self.length, name, whole, begin))
        self.texts.append(text)
        self.codes.append(code)
        self.length += len(text)
        if self.length > MAX_CHARACTERS:
            raise InputError(
                "include",
                name,
                f"a program of at most {MAX_CHARACTERS} characters with its includes",
                _where(name, whole, begin),
            )

    def file(self, text: str, name: str, folder: Path | None, chain: tuple[Path, ...]) -> None:
        """One file; chain: the include files it stands in."""
        done = 0
        # most programs hold their comments and includes at the top: nothing is searched behind the last of them
        last = max(text.rfind("//"), text.rfind("*/"), text.rfind("/*"), text.rfind("include"))
        end = max(text.find("\n", last), text.find(";", last)) + 1 or len(text)
        for match in _MARK.finditer(text, 0, end) if last >= 0 else ():
            start, found = match.start(), match.group()
            if match.group("open") is not None:
                raise InputError("comment", "/*", "a comment that ends in */", _where(name, text, start))
            if found[0] == '"':
                continue
            self.add(text[done:start], text[done:start], name, text, done)
            done = match.end()
            if match.group("name") is None:
                self.add(found, _blank(found), name, text, start)
            else:
                self.include(match, text, name, folder, chain)
        self.add(text[done:], text[done:], name, text, done)

    def include(self, match: re.Match[str], text: str, name: str, folder: Path | None, chain: tuple[Path, ...]) -> None:
        """What an include statement stands for: a file, or nothing where it is a standard one or missing."""
        wanted, start = match.group("name"), match.start()
        where = _where(name, text, start)
        path = self.find(wanted, where, folder)
        if path is None:
            if wanted in LIBRARIES:
                self.libraries.add(wanted)
            else:
                self.missing.append(Missing(wanted, where))
            self.add(match.group(), _blank(match.group()), name, text, start)
            return
        if path in chain:
            raise InputError("include", wanted, "a file that does not include itself, by no way round", where)
        if len(chain) >= MAX_DEPTH or len(self.files) >= MAX_FILES:
            raise InputError("include", wanted, f"at most {MAX_FILES} includes, {MAX_DEPTH} inside one another", where)
        self.files.append(path)
        try:
            content = read_text(path, "include")
        except InputError as error:
            raise error.at(where) from None
        shown = "".join(sign if sign.isprintable() else "?" for sign in wanted)
        for mark in (f"// {shown}, put in place:\n", None, f"\n// end of {shown}\n"):
            if mark is None:
                self.file(content, wanted, path.parent, (*chain, path))
            else:
                self.add(mark, _blank(mark), name, text, start)

    def find(self, wanted: str, where: str, folder: Path | None) -> Path | None:
        """The include file, inside one of the folders; None where there is none."""
        outside = False
        for base in ([folder] if folder and folder not in self.roots else []) + self.roots:
            try:
                path = (base / wanted).resolve()
                found = path.is_file()
            except (OSError, ValueError, RuntimeError):  # a name no file can have, or links in a circle
                continue
            if found and any(path.is_relative_to(root) for root in self.roots):
                return path
            outside = outside or found
        if outside:
            raise InputError(
                "include", wanted, "a file inside the program's own folder or one given by --include", where
            )
        return None


def _where(name: str, text: str, offset: int) -> str:
    line = text.count("\n", 0, offset) + 1
    return f"{name}:{line}: "


def _blank(text: str) -> str:
    """Spaces, with the line breaks kept."""
    return " " * len(text) if "\n" not in text else "".join(sign if sign == "\n" else " " for sign in text)

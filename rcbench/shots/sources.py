"""The files that hold shots: which they are, how they are opened, and that none comes twice."""

from __future__ import annotations

import gzip
import hashlib
import zlib
from dataclasses import dataclass, field
from pathlib import Path
from typing import BinaryIO, cast

from rcbench.errors import InputError
from rcbench.shots.declarations import EXECUTION_FILE, SHOTS_FILE
from rcbench.shots.mended import MENDED_FILE

FORMATS = {".csv": "csv_file", ".json": "json_file", ".npz": "npz_file", ".parquet": "parquet_file"}
ENDINGS = ".csv, .csv.gz, .json, .json.gz, .npz, .parquet"
BROKEN = (OSError, EOFError, zlib.error)  # what reading a damaged archive raises
_PEEK = 1 << 16
_MAGIC = {b"PAR1": "Parquet", b"PK\x03\x04": "a zip archive or NPZ", b"\x1f\x8b": "gzip", b"\x89HDF": "HDF5"}


@dataclass(slots=True)
class Source:
    """One file of shots. notes: what its reader wants the user to know."""

    path: Path
    notes: list[str] = field(default_factory=list)

    @property
    def name(self) -> str:
        """Its name, as messages and tables give it."""
        return self.path.name

    @property
    def format(self) -> str:
        """Module that reads it; empty where the ending is not one of ENDINGS."""
        suffixes = [s.lower() for s in self.path.suffixes]
        if suffixes and suffixes[-1] == ".gz" and suffixes[-2:-1] in ([".csv"], [".json"]):
            return FORMATS[suffixes[-2]]
        return FORMATS.get(suffixes[-1], "") if suffixes else ""

    def open(self) -> BinaryIO:
        """Its content, decompressed."""
        try:
            if self.path.suffix.lower() == ".gz":
                return cast(BinaryIO, gzip.open(self.path, "rb"))
            return self.path.open("rb")
        except OSError as error:
            raise self.error("file", self.name, f"a file that can be read ({error.strerror})") from None

    def sha256(self) -> str:
        """SHA-256 of the file as it stands."""
        try:
            with self.path.open("rb") as file:
                return hashlib.file_digest(file, "sha256").hexdigest()
        except OSError as error:
            raise self.error("file", self.name, f"a file that can be read ({error.strerror})") from None

    def error(self, key: str, found: object, allowed: str, line: int | None = None) -> InputError:
        """An error about this file, at a line if one is known."""
        return InputError(key, found, allowed, f"{self.name}: " if line is None else f"{self.name}:{line}: ")

    def check_text(self) -> bytes:
        """The first bytes of a text file; InputError where they are not UTF-8 text."""
        try:
            with self.open() as file:
                head = file.read(_PEEK)
        except BROKEN as error:
            raise self.error("compression", one_line(error), "a whole gzip file") from None
        allowed = f"text in UTF-8 ({ENDINGS} are read by their endings)"
        for magic, kind in _MAGIC.items():
            if head.startswith(magic):
                raise self.error("content", f"a binary file ({kind})", allowed)
        if head.startswith((b"\xff\xfe", b"\xfe\xff")):
            raise self.error("content", "text in UTF-16", allowed)
        if b"\x00" in head:
            raise self.error("content", "a binary file", allowed)
        if not head.strip():
            raise self.error("content", "an empty file", allowed)
        return head


def one_line(error: BaseException) -> str:
    """What a library says about a file, on one line."""
    return " ".join(str(error).split())


def list_sources(path: Path, skip_bad: Path | None) -> tuple[list[Source], list[str]]:
    """Files of shots at a path, by name, and the names of what lies beside them and is not read."""
    if path.is_file():
        source = Source(path)
        if not source.format:
            raise InputError("shots", path.name, f"a file with one of the endings {ENDINGS}, or a folder of such files")
        return [source], []
    if not path.is_dir():
        raise InputError("shots", str(path), "a file or a folder that exists")
    if skip_bad is not None and skip_bad.absolute().parent == path.absolute():
        raise InputError("skip_bad", str(skip_bad), "a file outside the folder of shots, or it would be read as shots")
    sources, others = [], []
    for entry in sorted(path.iterdir(), key=lambda p: p.name):
        if entry.name.startswith(".") or entry.name in (SHOTS_FILE, EXECUTION_FILE, MENDED_FILE):
            continue
        source = Source(entry)
        if entry.is_file() and source.format:
            sources.append(source)
        else:
            others.append(entry.name + ("/" if entry.is_dir() else ""))
    if not sources:
        raise InputError("shots", str(path), f"a folder with files that end in {ENDINGS}")
    return sources, others

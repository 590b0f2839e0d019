"""Where the circuits of a kit lie: a file each in `circuits`, or numbered zip archives there where they are many."""

from __future__ import annotations

import io
import zipfile
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

from rcbench.errors import InputError
from rcbench.files import read_text, write_bytes

FOLDER = "circuits"
PACK_ABOVE = 20_000  # circuits; folders with more files are slow to copy and list
ARCHIVE_SIZE = 5_000  # circuits an archive
_LONG_AGO = (1980, 1, 1, 0, 0, 0)  # a fixed date, so that the same circuits give the same archive


def archive_name(number: int) -> str:
    """Name of an archive, numbered from 1."""
    return f"circuits-{number:04d}.zip"


def pack(texts: Mapping[str, str]) -> bytes:
    """A zip archive of files by name, the same for the same files."""
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w") as archive:
        for name, text in texts.items():
            entry = zipfile.ZipInfo(name, _LONG_AGO)
            entry.compress_type, entry.external_attr, entry.create_system = zipfile.ZIP_DEFLATED, 0o644 << 16, 3
            archive.writestr(entry, text)
    return out.getvalue()


def write_new(path: Path, data: bytes) -> None:
    """Write a file unless it holds these bytes already."""
    if not (path.is_file() and path.read_bytes() == data):
        write_bytes(path, data)


@dataclass(slots=True)
class Store:
    """Reads circuits of a kit folder by file name, packed or not."""

    folder: Path
    _archives: dict[str, Path] | None = field(default=None)
    _open: dict[Path, zipfile.ZipFile] = field(default_factory=dict)

    def read(self, name: str) -> str:
        """The text of a circuit's file; InputError names a file that is missing or damaged."""
        path = self.folder / FOLDER / name
        if path.is_file():
            return read_text(path, "circuit")
        archive = self._find(name)
        if archive is None:
            raise InputError("circuit", str(path), "a file of the kit, as rcbench wrote it")
        try:
            return self._opened(archive).read(name).decode()
        except (zipfile.BadZipFile, OSError, ValueError, KeyError) as error:
            raise InputError("circuit", f"{archive}: {name}", f"an archive as rcbench wrote it ({error})") from None

    def place(self, name: str) -> str:
        """Where a circuit lies, for a message."""
        path = self.folder / FOLDER / name
        archive = None if path.is_file() else self._find(name)
        return str(path) if archive is None else f"{archive}: {name}"

    def _find(self, name: str) -> Path | None:
        if self._archives is None:
            self._archives = {}
            for path in sorted((self.folder / FOLDER).glob("circuits-*.zip")):
                try:
                    with zipfile.ZipFile(path) as archive:
                        self._archives |= dict.fromkeys(archive.namelist(), path)
                except (zipfile.BadZipFile, OSError) as error:
                    raise InputError("circuits", str(path), f"an archive as rcbench wrote it ({error})") from None
        return self._archives.get(name)

    def _opened(self, path: Path) -> zipfile.ZipFile:
        """The archive, kept open: circuits are asked for in any order."""
        if path not in self._open:
            self._open[path] = zipfile.ZipFile(path)
        return self._open[path]

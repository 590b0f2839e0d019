"""Files in and out: atomic writes, one number format, hashes, provenance, and the state of an output folder."""

from __future__ import annotations

import hashlib
import json
import os
import tempfile
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

from rcbench.errors import InputError

if TYPE_CHECKING:
    import pandas as pd

PROVENANCE = "provenance.json"
_LOCK = ".rcbench-lock"
_PARTIAL = ".writing-"
NUMBER_FORMAT = ".10g"


def shipped(name: str) -> Path:
    """The folder of shipped `protocols` or `reports`: inside an installed package, or at the top of a checkout."""
    package = Path(__file__).resolve().parent
    for place in (package / "_shipped" / name, package.parent / name):
        if place.is_dir():
            return place
    raise InputError("installation", str(package), f"a package that carries its folder {name!r}")


def write_bytes(path: Path, data: bytes, *, durable: bool = False) -> None:
    """Write a whole file or nothing: a temporary file beside it, then a rename; durable waits for the disk."""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(dir=path.parent, prefix=_PARTIAL)
        try:
            with os.fdopen(handle, "wb") as file:
                file.write(data)
                if durable:
                    file.flush()
                    os.fsync(file.fileno())
            os.chmod(name, 0o644)
            os.replace(name, path)
        except BaseException:
            Path(name).unlink(missing_ok=True)
            raise
    except OSError as error:
        raise cannot_write(path, error) from error


def cannot_write(path: Path, error: OSError) -> InputError:
    """What the user is told when the file system refuses."""
    return InputError("output", str(path), f"a place that can be written ({error.strerror or error})")


def write_text(path: Path, text: str) -> None:
    """Write a whole UTF-8 text file or nothing."""
    write_bytes(path, text.encode("utf-8"))


def read_text(path: Path, what: str = "file") -> str:
    """A UTF-8 text file; InputError where it is missing, a folder, or no text."""
    try:
        return path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError(what, str(path), f"UTF-8 text (byte {error.start} is not)") from None
    except OSError as error:
        raise InputError(what, str(path), f"a file that can be read ({error.strerror})") from None


def format_number(value: object) -> str:
    """One cell of a table: empty for what is missing, NaN or infinite; text as it stands."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return value
    if hasattr(value, "__index__"):
        return str(int(value))
    try:
        number = float(value)  # type: ignore[arg-type]
    except TypeError:  # None and pandas' missing value
        return ""
    if number != number or number in (float("inf"), float("-inf")):
        return ""
    return str(int(number)) if number == int(number) and abs(number) < 1e15 else format(number, NUMBER_FORMAT)


def write_csv(path: Path, frame: pd.DataFrame, columns: Sequence[str]) -> None:
    """A frame as CSV with the given columns in the given order."""
    import csv
    import io

    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(
        zip(*([format_number(value) for value in frame[column].tolist()] for column in columns), strict=True)
    )
    write_text(path, out.getvalue())


def write_parquet(path: Path, frame: pd.DataFrame, columns: Sequence[str]) -> None:
    """A frame as Parquet with the given columns in the given order."""
    import io

    out = io.BytesIO()
    frame[list(columns)].to_parquet(out, index=False)
    write_bytes(path, out.getvalue())


def read_csv(path: Path, columns: Sequence[str], text: Sequence[str] = ()) -> pd.DataFrame:
    """A table that rcbench wrote; `text` columns stay text. InputError names a missing file or column."""
    import pandas as pd

    if not path.is_file():
        raise InputError("table", str(path), "a file that rcbench wrote")
    try:
        frame = pd.read_csv(path, dtype=dict.fromkeys(text, "str"), keep_default_na=False, na_values=[""])
    except (ValueError, pd.errors.ParserError) as error:
        raise InputError("table", str(path), f"a CSV table ({error})") from None
    for column in columns:
        if column not in frame.columns:
            raise InputError("column", ", ".join(frame.columns), f"a table with the column {column!r}", f"{path}: ")
    for column in text:
        frame[column] = frame[column].fillna("").astype(object)
    return frame


def sha256_bytes(data: bytes) -> str:
    """SHA-256 of bytes, in hexadecimal."""
    return hashlib.sha256(data).hexdigest()


def sha256_file(path: Path) -> str:
    """SHA-256 of a file, in hexadecimal."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def file_hashes(folder: Path, names: Sequence[str]) -> dict[str, str]:
    """SHA-256 of files by name, so that a later step can tell whether they were edited."""
    return {name: sha256_file(folder / name) for name in names if (folder / name).is_file()}


def check_files(folder: Path, facts: Mapping[str, object]) -> None:
    """Refuse files that are missing or were edited since the provenance recorded their hashes under `files`."""
    recorded = facts.get("files")
    for name, digest in recorded.items() if isinstance(recorded, dict) else ():
        path = folder / str(name)
        if not path.is_file():
            raise InputError("file", str(path), "the file that rcbench wrote; it is missing")
        if sha256_file(path) != digest:
            raise InputError("file", str(path), "the file as rcbench wrote it; this one was edited since")


def versions() -> dict[str, str]:
    """Versions of rcbench and of the libraries that numbers depend on."""
    from importlib.metadata import PackageNotFoundError, version

    out = {}
    for name in ("rcbench", "numpy", "cirq-core", "numba", "scipy"):
        try:
            out[name] = version(name)
        except PackageNotFoundError:
            out[name] = "not installed"
    return out


def read_provenance(folder: Path) -> dict[str, object]:
    """The provenance of a folder that rcbench wrote; empty where there is none."""
    path = folder / PROVENANCE
    if not path.is_file():
        return {}
    try:
        data = json.loads(path.read_text(encoding="utf-8"))
    except (ValueError, OSError) as error:
        raise InputError("provenance", str(path), f"JSON as rcbench wrote it ({error})") from None
    if not isinstance(data, dict):
        raise InputError("provenance", str(path), "a JSON object")
    return data


@dataclass(slots=True)
class OutputFolder:
    """An output folder while a command works on it. complete: it was finished before with the same inputs."""

    path: Path
    facts: dict[str, object]
    complete: bool

    def finish(self, **facts: object) -> None:
        """Record that the folder holds all it should, with facts about it."""
        self.facts |= facts | {"complete": True}
        self._write()

    def _write(self) -> None:
        text = json.dumps(self.facts, indent=1, sort_keys=True, default=str) + "\n"
        write_bytes(self.path / PROVENANCE, text.encode(), durable=True)


@contextmanager
def output_folder(path: Path, command: str, inputs: Mapping[str, object]) -> Iterator[OutputFolder]:
    """Work on an output folder: resume it if the inputs are the same, refuse it if they are others or it is in use.

    Args:
        path: the folder, made if missing.
        command: the command that fills it.
        inputs: what its content depends on (hashes, seed, options).
    """
    import fcntl

    wanted = json.loads(json.dumps(dict(inputs), default=str))
    if path.exists() and not path.is_dir():
        raise InputError("out", str(path), "a folder")
    found = read_provenance(path)
    if path.is_dir() and not found and any(not entry.name.startswith(".") for entry in path.iterdir()):
        raise InputError("out", str(path), "an empty folder, a new one, or one that rcbench wrote")
    before = found.get("inputs")
    held = before if isinstance(before, dict) else {}
    if found and found.get("command") != command:
        raise InputError("out", str(path), f"another folder; this one holds the output of `{found.get('command')}`")
    if found and held != wanted:
        changed = sorted(key for key in wanted.keys() | held.keys() if held.get(key) != wanted.get(key))
        raise InputError("out", str(path), f"another folder; this one is of other inputs ({', '.join(changed)} differ)")
    try:
        path.mkdir(parents=True, exist_ok=True)
        lock = os.open(path / _LOCK, os.O_CREAT | os.O_RDWR, 0o644)
    except OSError as error:
        raise cannot_write(path, error) from error
    try:
        try:
            fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            raise InputError("out", str(path), "a folder that no other rcbench is writing to") from None
        folder = OutputFolder(path, {}, bool(found.get("complete")))
        folder.facts = found or {
            "command": command,
            "inputs": wanted,
            "complete": False,
            "started": datetime.now(UTC).isoformat(timespec="seconds"),
            "versions": versions(),
        }
        if not folder.complete:
            for partial in path.rglob(f"{_PARTIAL}*"):  # what a killed run left half-written
                partial.unlink(missing_ok=True)
            folder._write()
        yield folder
    finally:
        os.close(lock)
        if (path / _LOCK).exists():
            (path / _LOCK).unlink(missing_ok=True)

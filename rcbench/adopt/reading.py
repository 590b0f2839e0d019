"""The circuits of a folder of OpenQASM files."""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import N_QUBITS
from rcbench.circuits.qasm import Program, read_program
from rcbench.circuits.relabel import restrict, used_qubits
from rcbench.errors import InputError, raise_all
from rcbench.files import read_text

ENDINGS = (".qasm", ".qasm2", ".qasm3")
MOST_ERRORS = 20  # reported one by one
_ID = re.compile(r"""[^\s.,;"'/\\](?:[^,;"'/\\\n\r\t]{0,198}[^\s,;"'/\\])?""")
Progress = Callable[[int, int, str], None]


@dataclass(frozen=True, slots=True)
class Adopted:
    """One circuit as read. qubits: of the program, those it acts on; circuit: on these only."""

    circuit_id: str
    program: Program
    qubits: tuple[int, ...]
    circuit: Circuit

    @property
    def depth(self) -> int:
        """Layers that hold a two-qubit gate."""
        return len(np.unique(self.circuit.layer[N_QUBITS[self.circuit.kind] == 2]))


def read_folder(folder: Path, include_dirs: Sequence[Path] = (), progress: Progress | None = None) -> list[Adopted]:
    """Every circuit of a folder, in the order of their names.

    Raises:
        InputError: no folder or no circuit; and the first error of each file, together.
    """
    if not folder.is_dir():
        raise InputError("circuits", str(folder), "a folder of OpenQASM files")
    for one in include_dirs:
        if not one.is_dir():
            raise InputError("include", str(one), "a folder")
    paths = sorted(
        path
        for path in folder.iterdir()
        if path.suffix.lower() in ENDINGS and path.is_file() and not path.name.startswith(".")
    )
    if not paths:
        raise InputError("circuits", str(folder), f"a folder with files that end in {', '.join(ENDINGS)}")
    _check_names(paths)
    found, errors = [], []
    for done, path in enumerate(paths, start=1):
        try:
            found.append(_read(path, include_dirs))
        except InputError as error:
            errors.append(error)
        if progress:
            progress(done, len(paths), "read")
    if len(errors) > MOST_ERRORS:
        more = len(errors) - MOST_ERRORS
        last = InputError("circuits", f"{more} more files with errors", "files that can be read", f"{folder}: ")
        errors = [*errors[:MOST_ERRORS], last]
    raise_all(errors)
    return found


def _check_names(paths: Sequence[Path]) -> None:
    seen: dict[str, str] = {}
    for path in paths:
        if not _ID.fullmatch(path.stem):
            raise InputError(
                "circuit_id", path.stem, "a file name without commas, quotes or line breaks", f"{path.name}: "
            )
        other = seen.setdefault(path.stem.lower(), path.name)
        if other != path.name:
            raise InputError("circuit_id", path.name, f"one file of that name ({other} is there too)")


def _read(path: Path, include_dirs: Sequence[Path]) -> Adopted:
    program = read_program(read_text(path, "circuit"), name=path.name, include_dirs=include_dirs, folder=path.parent)
    if not program.bits:
        raise InputError("measure", "no measurement", "measurements into classical bits, at the end", f"{path.name}: ")
    qubits = used_qubits(program.circuit)
    return Adopted(path.stem, program, qubits, restrict(program.circuit, qubits))

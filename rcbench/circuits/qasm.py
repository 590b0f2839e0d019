"""Circuits from OpenQASM 2.0 and 3, ours and others', and from Cirq JSON.

`read_qasm` gives the circuit, `read_program` what an adopted program needs besides: its text with the include files in
place, and the names of its qubits and bits.

What is read: gates from the standard files, from include files and from the program's own definitions, under the
modifiers inv, pow, ctrl and negctrl; registers, broadcasts, barriers, constants; measurements at the end. What makes
a circuit depend on outcomes or inputs is refused. One call is one row, so one native gate for the error budget:

    a standard gate           the kind of `gates.KINDS` that it is
    any other, one qubit      rz where it is diagonal (a virtual gate), else u
    any other, two qubits     cz, cx, iswap, sqrt_iswap, zz or fsim where it is that up to a phase, else matrix2
    from three qubits on      the calls of its body

Rows are put in layers as soon as their qubits are free, between barriers; measurements come in one last layer.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from rcbench.circuits.circuit import Circuit
from rcbench.circuits.qasm_outline import outline
from rcbench.circuits.qasm_reader import Reader
from rcbench.circuits.qasm_source import read_source
from rcbench.errors import InputError, suggest
from rcbench.files import read_text

FORMATS = ("qasm3", "qasm2", "cirq-json")


@dataclass(frozen=True, slots=True)
class Program:
    """A program and its circuit.

    Args:
        circuit: its rows; classical bits are numbered in the order of the program's, leaving out those never measured.
        text: the program with its include files in place (the standard ones stay includes), so that it stands alone.
        version: 2 or 3.
        qubits: name of each qubit, as `q[0]`.
        bits: name of each measured bit, as `c[0]`, in the order of the circuit's classical bits.
        declared_bits: number of classical bits that the program declares, measured or not.
        files: include files that went into it.
    """

    circuit: Circuit
    text: str
    version: int
    qubits: tuple[str, ...]
    bits: tuple[str, ...]
    declared_bits: int
    files: tuple[Path, ...]


def read_program(text: str, *, name: str, include_dirs: Sequence[Path] = (), folder: Path | None = None) -> Program:
    """Read an OpenQASM program.

    Args:
        text: the program. name: what errors call it.
        include_dirs: folders searched for include files. folder: the program's own folder, searched first.
    Raises:
        InputError: with file and line, for whatever is not read.
    """
    source = read_source(text, name, include_dirs, folder)
    program = outline(source)
    reader = Reader(program)
    reader.read()
    if not len(reader.qubits):
        raise InputError("program", "no qubits", "a program that declares qubits", source.place(0))
    bits = sorted(reader.rows.measured.values())
    return Program(
        circuit=reader.rows.circuit(len(reader.qubits), program.where),
        text=source.text,
        version=program.version,
        qubits=tuple(reader.qubits.names),
        bits=tuple(reader.bits.names[bit] for bit in bits),
        declared_bits=len(reader.bits),
        files=source.files,
    )


def read_qasm(text: str, *, name: str, include_dirs: Sequence[Path] = ()) -> Circuit:
    """The circuit of an OpenQASM 2.0 or 3 program; see `read_program`."""
    return read_program(text, name=name, include_dirs=include_dirs).circuit


def read_cirq_json(text: str, *, name: str) -> Circuit:
    """The circuit that Cirq wrote as JSON: its moments are our layers.

    Raises:
        InputError: no such file, or a gate without a matrix on one or two qubits.
    """
    from rcbench.circuits.cirq_import import from_cirq_json  # Cirq takes two seconds to load

    return from_cirq_json(text, name)


def read_circuit(text: str, format: str, name: str) -> Circuit:
    """A circuit in one of FORMATS."""
    if format not in FORMATS:
        raise InputError("format", format, suggest(format, FORMATS))
    return read_cirq_json(text, name=name) if format == "cirq-json" else read_qasm(text, name=name)


def read_circuit_file(path: Path) -> Circuit:
    """A circuit from a file: Cirq JSON where it ends in .json, else OpenQASM; includes are searched beside it."""
    text = read_text(path, "circuit")
    if path.suffix == ".json":
        return read_cirq_json(text, name=path.name)
    return read_program(text, name=path.name, folder=path.parent).circuit

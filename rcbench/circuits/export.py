"""Circuits as text for a device team: OpenQASM 3, OpenQASM 2.0 and Cirq JSON, all with the same rows.

OpenQASM. One register q and, where something is measured, one register c; one statement a line; angles with every
digit, so that reading them back gives the same numbers. Gates outside the format's standard file are defined at the
top, by standard gates, up to a global phase: r, iswap, sqrt_iswap, fsim, zz and sxdg, and sx in 2.0 only. The gate u is
U in OpenQASM 3 and u3 in 2.0. Every barrier row is a line `barrier q;`. Where a gate could start in an earlier layer,
a barrier on its qubits and on one that is busy till then holds it back. So each gate as early as its qubits are free
gives back the layers, where virtual gates take no time, and barriers on single qubits are no rows.

Cirq. One moment a layer; Cirq has no barrier, so an empty moment stands for one. u is PhasedXZGate and r
PhasedXPowGate, in half turns, so that their angles agree to rounding, and the gates up to a global phase. Where all
measurements are in one layer they are one operation with the key c, classical bit 0 first; else each has the key c[j]
of its bit j.

Gates that are stored as matrices come from imported circuits and have no OpenQASM text here.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import cache
from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import IntArray
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import CODE, KINDS
from rcbench.circuits.qasm_layers import waits
from rcbench.errors import InputError, suggest

if TYPE_CHECKING:
    import cirq

SUFFIX = {"qasm3": ".qasm", "qasm2": ".qasm", "cirq-json": ".json"}

# parameters in alphabetical order: qiskit's OpenQASM 3 reader fills them in that order, not in the order written
_BODIES = {
    "sx": "a { sdg a; h a; sdg a; }",
    "sxdg": "a { s a; h a; s a; }",
    "r": "(alpha, beta) a { U(alpha, beta - pi/2, pi/2 - beta) a; }",
    "iswap": "a, b { s a; s b; h a; cx a, b; cx b, a; h b; }",
    # a rotation of |01> and |10> is one controlled by b and turned about X, between two cx
    "sqrt_iswap": "a, b { cx a, b; h a; rz(-pi/4) a; cx b, a; rz(pi/4) a; cx b, a; h a; cx a, b; }",
    "fsim": "(alpha, beta) a, b { cx a, b; h a; rz(alpha) a; cx b, a; rz(-alpha) a; cx b, a; h a; cx a, b; "
    "rz(-beta/2) a; rz(-beta/2) b; cx a, b; rz(beta/2) b; cx a, b; }",
    "zz": "(alpha) a, b { cx a, b; rz(alpha) b; cx a, b; }",
}


def write_circuit(circuit: Circuit, circuit_format: str) -> str:
    """The text of a circuit in one of the formats of `SUFFIX`.

    Raises:
        InputError: an unknown format, or a gate that the format cannot hold.
    """
    if circuit_format not in _WRITERS:
        raise InputError("circuit_format", circuit_format, suggest(circuit_format, _WRITERS))
    return _WRITERS[circuit_format](circuit)


def to_qasm3(circuit: Circuit) -> str:
    """OpenQASM 3.0.

    Raises:
        InputError: a gate that is stored as a matrix.
    """
    bits = _bits(circuit)
    header = ["OPENQASM 3.0;", 'include "stdgates.inc";', *_definitions(circuit, standard=("sx",), u="U")]
    header += [f"qubit[{circuit.n_qubits}] q;", *([f"bit[{bits}] c;"] if bits else [])]
    return _qasm(circuit, header, "U", "c[{bit}] = measure q[{qubit}];")


def to_qasm2(circuit: Circuit) -> str:
    """OpenQASM 2.0.

    Raises:
        InputError: a gate that is stored as a matrix.
    """
    bits = _bits(circuit)
    header = ["OPENQASM 2.0;", 'include "qelib1.inc";', *_definitions(circuit, standard=(), u="u3")]
    header += [f"qreg q[{circuit.n_qubits}];", *([f"creg c[{bits}];"] if bits else [])]
    return _qasm(circuit, header, "u3", "measure q[{qubit}] -> c[{bit}];")


def to_cirq(circuit: Circuit) -> cirq.Circuit:
    """A Cirq circuit on LineQubit(0) to LineQubit(n_qubits - 1), one moment a layer, empty where there is a barrier."""
    import cirq

    out = cirq.read_json(json_text=to_cirq_json(circuit))
    assert isinstance(out, cirq.Circuit)
    return out


def to_cirq_json(circuit: Circuit) -> str:
    """The same circuit as Cirq's JSON, one moment a line; read by cirq.read_json."""
    from rcbench.circuits.export_cirq import operations

    moments: dict[int, list[str]] = {}
    for layer, text in zip(circuit.layer.tolist(), operations(circuit), strict=True):
        moment = moments.setdefault(layer, [])
        if text:
            moment.append(text)
    lines = ['{"cirq_type":"Moment","operations":[' + ",".join(moment) + "]}" for moment in moments.values()]
    return '{"cirq_type":"Circuit","moments":[\n' + ",\n".join(lines) + "\n]}\n"


def angle_text(values: Sequence[float]) -> list[str]:
    """Each number in the shortest decimal that gives the same float, with a point, as OpenQASM 2.0 asks."""
    texts = [repr(value) for value in values]
    return [text.replace("e", ".0e") if "e" in text and "." not in text else text for text in texts]


def _qasm(circuit: Circuit, header: list[str], u: str, measure: str) -> str:
    numbers = angle_text(circuit.parameters.tolist())
    lines = [""] * len(circuit)
    for code in np.unique(circuit.kind).tolist():
        rows = np.flatnonzero(circuit.kind == code)
        name, one, two = KINDS[code].name, circuit.qubits[rows, 0].tolist(), circuit.qubits[rows, 1].tolist()
        if name == "barrier":
            texts = ["barrier q;"] * len(rows)
        elif name == "measure":
            texts = [measure.format(qubit=qubit, bit=bit) for qubit, bit in zip(one, two, strict=True)]
        else:
            calls = _calls(u if name == "u" else name, KINDS[code].n_parameters, circuit.first[rows], numbers)
            places = [f" q[{qubit}];" for qubit in one]
            if KINDS[code].n_qubits == 2:
                places = [f" q[{first}], q[{second}];" for first, second in zip(one, two, strict=True)]
            texts = [call + place for call, place in zip(calls, places, strict=True)]
        for row, text in zip(rows.tolist(), texts, strict=True):
            lines[row] = text
    for row, qubits in waits(circuit).items():
        lines[row] = f"barrier {', '.join(f'q[{qubit}]' for qubit in qubits)};\n{lines[row]}"
    return "\n".join([*header, *lines, ""])


def _calls(name: str, n_parameters: int, first: IntArray, numbers: list[str]) -> list[str]:
    """Gate names with their angles in brackets."""
    starts = first.tolist()
    if n_parameters == 0:
        return [name] * len(starts)
    if n_parameters == 1:
        return [f"{name}({numbers[start]})" for start in starts]
    return [f"{name}({', '.join(numbers[start : start + n_parameters])})" for start in starts]


def _bits(circuit: Circuit) -> int:
    return int(circuit.qubits[circuit.kind == CODE["measure"], 1].max(initial=-1)) + 1


def _definitions(circuit: Circuit, standard: tuple[str, ...], u: str) -> list[str]:
    """The definitions of the gates used that the standard file lacks."""
    used = [KINDS[code].name for code in np.unique(circuit.kind).tolist()]
    for name in used:
        if name.startswith("matrix"):
            raise InputError("gate", name, "gates with a name; a gate stored as a matrix has no OpenQASM text")
    if not np.isfinite(circuit.parameters).all():
        raise InputError("angle", "not a finite number", "finite angles")
    return [_definition(name, u) for name in used if name in _BODIES and name not in standard]


@cache
def _definition(name: str, u: str) -> str:
    body = _BODIES[name].replace("U(", f"{u}(")
    return f"gate {name}{body}" if body.startswith("(") else f"gate {name} {body}"


_WRITERS: dict[str, Callable[[Circuit], str]] = {"qasm3": to_qasm3, "qasm2": to_qasm2, "cirq-json": to_cirq_json}

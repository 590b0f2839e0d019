"""The rows of a circuit as operations in Cirq's JSON, written directly: building Cirq's objects takes much longer."""

from __future__ import annotations

import json

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import KINDS, gate_matrices
from rcbench.errors import InputError

# gates without parameters: the type in Cirq and its exponent
_POWERS = {
    "x": ("XPowGate", 1.0),
    "y": ("YPowGate", 1.0),
    "z": ("ZPowGate", 1.0),
    "h": ("HPowGate", 1.0),
    "s": ("ZPowGate", 0.5),
    "sdg": ("ZPowGate", -0.5),
    "sx": ("XPowGate", 0.5),
    "sxdg": ("XPowGate", -0.5),
    "cz": ("CZPowGate", 1.0),
    "cx": ("CXPowGate", 1.0),
    "iswap": ("ISwapPowGate", 1.0),
    "sqrt_iswap": ("ISwapPowGate", 0.5),
}
# gates with parameters: fixed keys, and the keys of the numbers that `_numbers` gives
_FAMILIES: dict[str, tuple[str, str, tuple[str, ...]]] = {
    "rz": ("Rz", "", ("rads",)),
    "r": ("PhasedXPowGate", ',"global_shift":-0.5', ("exponent", "phase_exponent")),
    "u": ("PhasedXZGate", "", ("x_exponent", "z_exponent", "axis_phase_exponent")),
    "fsim": ("FSimGate", "", ("theta", "phi")),
    "zz": ("ZZPowGate", ',"global_shift":-0.5', ("exponent",)),
}


def operations(circuit: Circuit) -> list[str]:
    """The JSON of each row's operation; empty for barriers and for what an earlier row measures too.

    Raises:
        InputError: an angle that is not finite.
    """
    if not np.isfinite(circuit.parameters).all():
        raise InputError("angle", "not a finite number", "finite angles")
    places = [f'{{"cirq_type":"LineQubit","x":{qubit}}}' for qubit in range(circuit.n_qubits)]
    out = [""] * len(circuit)
    for code in np.unique(circuit.kind).tolist():
        rows = np.flatnonzero(circuit.kind == code)
        if KINDS[code].name == "barrier":
            continue
        write = _measurements if KINDS[code].name == "measure" else _gates
        for row, text in zip(rows.tolist(), write(circuit, rows, places), strict=True):
            out[row] = text
    return out


def _gates(circuit: Circuit, rows: IntArray, places: list[str]) -> list[str]:
    """All rows of one kind."""
    kind = KINDS[int(circuit.kind[rows[0]])]
    qubits = circuit.qubits[rows, : kind.n_qubits].tolist()
    if not kind.n_parameters:
        gate = _fixed_gate(kind.name)
        known = {pair: _operation(gate, [places[qubit] for qubit in pair]) for pair in set(map(tuple, qubits))}
        return [known[tuple(pair)] for pair in qubits]
    parameters = circuit.parameters[circuit.first[rows][:, None] + np.arange(kind.n_parameters)]
    if kind.name in _FAMILIES:
        type_, fixed, keys = _FAMILIES[kind.name]
        template = f'{{{{"cirq_type":"{type_}"{fixed}' + "".join(f',"{key}":{{!r}}' for key in keys) + "}}"
        gates = [template.format(*values) for values in _numbers(kind.name, parameters).tolist()]
    else:
        gates = [_matrix_gate(matrix) for matrix in gate_matrices(kind.name, parameters)]
    return [_operation(gate, [places[qubit] for qubit in pair]) for gate, pair in zip(gates, qubits, strict=True)]


def _fixed_gate(name: str) -> str:
    if name == "reset":
        return '{"cirq_type":"ResetChannel","dimension":2}'
    type_, exponent = _POWERS[name]
    return f'{{"cirq_type":"{type_}","exponent":{exponent},"global_shift":0.0}}'


def _numbers(name: str, parameters: FloatArray) -> FloatArray:
    """The numbers of Cirq's gate: half turns instead of radians, where Cirq counts so."""
    if name in ("rz", "fsim"):
        return parameters
    turns = parameters / np.pi
    if name == "u":  # Z^z after a turn about an axis of the equator, as in native.py
        t, p, l = turns.T
        return np.stack([t, p + l, 0.5 - l], axis=1)
    return np.asarray(turns)


def _measurements(circuit: Circuit, rows: IntArray, places: list[str]) -> list[str]:
    """One joint measurement at the first row where that says it all; else one a row."""
    qubits, bits = circuit.qubits[rows].T.tolist()
    if len(set(circuit.layer[rows].tolist())) == 1 and sorted(bits) == list(range(len(bits))):
        joint = _operation(_measure(len(bits), "c"), [places[qubits[row]] for row in np.argsort(bits).tolist()])
        return [joint, *[""] * (len(bits) - 1)]
    return [_operation(_measure(1, f"c[{bit}]"), [places[qubit]]) for qubit, bit in zip(qubits, bits, strict=True)]


def _measure(n_qubits: int, key: str) -> str:
    return f'{{"cirq_type":"MeasurementGate","num_qubits":{n_qubits},"key":"{key}","invert_mask":[]}}'


def _operation(gate: str, places: list[str]) -> str:
    return f'{{"cirq_type":"GateOperation","gate":{gate},"qubits":[{",".join(places)}]}}'


def _matrix_gate(matrix: ComplexArray) -> str:
    entries = [
        [{"cirq_type": "complex", "real": value.real, "imag": value.imag} for value in row] for row in matrix.tolist()
    ]
    shape = [2] * (len(matrix).bit_length() - 1)
    return json.dumps({"cirq_type": "MatrixGate", "matrix": entries, "qid_shape": shape}, separators=(",", ":"))

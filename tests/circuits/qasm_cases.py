"""Helpers that the tests of reading OpenQASM share: unitaries by qiskit in our qubit order, rows as plain tuples."""

from __future__ import annotations

import numpy as np
import qiskit.qasm2
import qiskit.qasm3
from qiskit.quantum_info import Operator

from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import KINDS
from rcbench.circuits.qasm import read_qasm

HEAD2 = 'OPENQASM 2.0;\ninclude "qelib1.inc";\n'
HEAD3 = 'OPENQASM 3.0;\ninclude "stdgates.inc";\n'


def qiskit_unitary(text: str) -> np.ndarray:
    """The unitary as qiskit reads the text, first qubit most significant; measurements left out."""
    if text.lstrip().startswith("OPENQASM 2"):
        circuit = qiskit.qasm2.loads(text, custom_instructions=qiskit.qasm2.LEGACY_CUSTOM_INSTRUCTIONS)
    else:
        circuit = qiskit.qasm3.loads(text)
    circuit.remove_final_measurements()
    return Operator(circuit.reverse_bits()).data


def rows(text: str) -> list[tuple]:
    """(kind, qubits, parameters) of each row but barriers and measurements."""
    return [row[1:] for row in layered_rows(read_qasm(text, name="t.qasm")) if row[1] not in ("barrier", "measure")]


def layered_rows(circuit: Circuit) -> list[tuple]:
    """(layer, kind, qubits, parameters) of every row; the second number of a measurement is its bit."""
    return [
        (layer, KINDS[kind].name, tuple(q for q in pair if q >= 0), circuit.row_parameters(place))
        for place, (layer, kind, pair) in enumerate(
            zip(circuit.layer.tolist(), circuit.kind.tolist(), circuit.qubits.tolist(), strict=True)
        )
    ]

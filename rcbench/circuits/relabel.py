"""Circuits on fewer qubits: registers of imported circuits are often larger than what a circuit acts on."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import CODE
from rcbench.errors import InputError


def used_qubits(circuit: Circuit) -> tuple[int, ...]:
    """The qubits that a gate, a reset or a measurement acts on, in order."""
    second = np.where(circuit.kind == CODE["measure"], -1, circuit.qubits[:, 1])
    found = np.unique(np.concatenate((circuit.qubits[:, 0], second)))
    return tuple(found[found >= 0].tolist())


def restrict(circuit: Circuit, qubits: Sequence[int]) -> Circuit:
    """The same rows on some of the qubits; the circuit's qubits[j] becomes qubit j.

    Raises:
        InputError: a qubit that is used and not among them.
    """
    left = sorted(set(used_qubits(circuit)) - set(qubits))
    if left:
        raise InputError("qubits", list(qubits)[:20], f"all qubits that are used; {left[:20]} too")
    label = np.full(circuit.n_qubits + 1, -1, dtype=np.int32)  # the last place serves the -1 of rows without a qubit
    label[list(qubits)] = np.arange(len(qubits))
    pairs = label[circuit.qubits]
    measured = circuit.kind == CODE["measure"]
    pairs[measured, 1] = circuit.qubits[measured, 1]
    pairs.flags.writeable = False
    return Circuit(len(qubits), circuit.layer, circuit.kind, pairs, circuit.first, circuit.parameters)

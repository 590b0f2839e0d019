"""The slow and obvious path: numpy contractions, the reference that the compiled kernels are tested against."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.arrays import ComplexArray
from rcbench.circuits.circuit import Circuit


def apply_reference(states: ComplexArray, gate: ComplexArray, qubits: Sequence[int]) -> ComplexArray:
    """A gate on a batch of states, as a new array; states: (batch, 2**n), gate: (2**k, 2**k) on k qubits."""
    batch, size = states.shape
    n, k = size.bit_length() - 1, len(qubits)
    axes = [1 + qubit for qubit in qubits]
    tensor = np.tensordot(gate.reshape((2,) * (2 * k)), states.reshape(batch, *(2,) * n), axes=(range(k, 2 * k), axes))
    return np.moveaxis(tensor, range(k), axes).reshape(batch, size)


def final_state_reference(circuit: Circuit) -> ComplexArray:
    """(2**n,) complex128 final state of a circuit, row by row."""
    state = np.zeros((1, 2**circuit.n_qubits), dtype=np.complex128)
    state[0, 0] = 1
    for matrix, pair in zip(circuit.row_matrices(), circuit.qubits.tolist(), strict=True):
        if matrix is not None:
            state = apply_reference(state, matrix, pair[: len(matrix).bit_length() - 1])
    final: ComplexArray = state[0]
    return final

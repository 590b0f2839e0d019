"""One circuit to its final state."""

from __future__ import annotations

import numpy as np

from rcbench.arrays import ComplexArray
from rcbench.circuits.circuit import Circuit
from rcbench.engine import memory
from rcbench.engine.program import Program, check_order, fuse, gate_rows
from rcbench.engine.reference import apply_reference


def zero_state(n_qubits: int, dtype: str = "complex64") -> ComplexArray:
    """(2**n,) the state |0...0>."""
    state = np.zeros(2**n_qubits, dtype=memory.state_dtype(dtype))
    state[0] = 1
    return state


def evolve(state: ComplexArray, program: Program) -> None:
    """Apply a program to a state, in place."""
    for pair, matrix in zip(program.qubits.tolist(), program.matrices, strict=True):
        qubits = pair[:1] if pair[1] < 0 else pair
        gate = matrix[: 2 ** len(qubits), : 2 ** len(qubits)].astype(state.dtype)
        state[:] = apply_reference(state[None], gate, qubits)[0]


def final_state(
    circuit: Circuit, dtype: str = "complex64", *, memory_limit: int | None = None, threads: int | None = None
) -> ComplexArray:
    """The state that a circuit makes from |0...0>, its measurements left out.

    Args:
        circuit: resets only before the first gate of their qubit, measurements last.
        dtype: "complex64" or "complex128".
        memory_limit: bytes that may be taken; the free memory where None.
        threads: cores to use; all that this process may use where None.
    Returns:
        (2**n,) amplitudes, qubit 0 the most significant bit of the index.
    Raises:
        InputError: a reset or a gate after the qubit's measurement, or too little memory.
    """
    check_order(circuit)
    memory.require(memory.bytes_needed(circuit.n_qubits, dtype), memory_limit, f"a state of {circuit.n_qubits} qubits")
    state = zero_state(circuit.n_qubits, dtype)
    evolve(state, fuse(gate_rows(circuit)))
    return state

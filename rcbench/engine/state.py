"""One circuit to its final state."""

from __future__ import annotations

from rcbench.arrays import ComplexArray
from rcbench.circuits.circuit import Circuit
from rcbench.engine import memory
from rcbench.engine.blocks import aligned, apply_plan, plan
from rcbench.engine.operators import encode
from rcbench.engine.program import Program, check_order, fuse, gate_rows
from rcbench.engine.threads import Pool


def zero_state(n_qubits: int, dtype: str = "complex64") -> ComplexArray:
    """(2**n,) the state |0...0>."""
    state: ComplexArray = aligned(2**n_qubits, memory.state_dtype(dtype))
    state[:] = 0
    state[0] = 1
    return state


def evolve(state: ComplexArray, program: Program, pool: Pool) -> None:
    """Apply a program to a state, in place."""
    if len(program):
        apply_plan(state, plan(encode(program, state.dtype)), pool)


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
    with Pool(threads) as pool:
        evolve(state, fuse(gate_rows(circuit)), pool)
    return state

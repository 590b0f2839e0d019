"""One circuit to its final state."""

from __future__ import annotations

from collections.abc import Sequence

from rcbench.arrays import ComplexArray
from rcbench.circuits.circuit import Circuit
from rcbench.engine import memory
from rcbench.engine.blocks import Plan, aligned, apply_plan, plan
from rcbench.engine.operators import encode
from rcbench.engine.program import check_order, fuse, gate_rows
from rcbench.engine.threads import Pool
from rcbench.engine.turns import split_turns


def zero_state(n_qubits: int, dtype: str = "complex64") -> ComplexArray:
    """(2**n,) the state |0...0>."""
    state: ComplexArray = aligned(2**n_qubits, memory.state_dtype(dtype))
    state[:] = 0
    state[0] = 1
    return state


def compile_circuit(circuit: Circuit, dtype: str, cuts: Sequence[int] | None = None) -> Plan:
    """A circuit as the kernels run it, in one stretch or with cuts as in `program.gate_rows`."""
    program = fuse(split_turns(gate_rows(circuit, cuts)))
    return plan(encode(program, memory.state_dtype(dtype)), program.start)


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
        apply_plan(state, compile_circuit(circuit, dtype), pool)
    return state

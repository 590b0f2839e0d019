"""States, unitaries and operators from circuits, for the quantities that the other modules work out.

All of them are states of a larger register, so that the engine's walk makes them, shared beginnings once:

    unitaries   U of each circuit, from half of n Bell pairs           2n qubits
    operators   U V U^dag of each circuit, V a Pauli at one qubit      2n qubits
    twins       U|x> and U|y> of each circuit                          n + 1 qubits

`Evolution` takes a single circuit, and its inverse, to any state.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

import numpy as np

from rcbench.arrays import ComplexArray, IntArray
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.gates import CODE, N_PARAMETERS, N_QUBITS
from rcbench.engine import memory
from rcbench.engine.blocks import aligned, apply_plan
from rcbench.engine.state import compile_circuit
from rcbench.engine.threads import Pool
from rcbench.engine.tree import walk
from rcbench.errors import InputError

MOST_OPERATOR_QUBITS = 12  # 2n = 24 qubits: 128 MiB in single precision, and matrices of side 4096
LETTERS = "XYZ"


def check_operator_size(n_qubits: int) -> None:
    """Refuse registers whose unitary is too large a matrix."""
    if n_qubits > MOST_OPERATOR_QUBITS:
        raise InputError(
            "qubits",
            n_qubits,
            f"at most {MOST_OPERATOR_QUBITS} for quantities of the unitary or of an operator; choose a smaller patch, "
            "or a quantity of the state",
        )


def gates_only(circuit: Circuit) -> Circuit:
    """The circuit without measurements.

    Raises:
        InputError: a reset, which is no unitary.
    """
    if np.any(circuit.kind == CODE["reset"]):
        raise InputError("circuit", "a reset", "gates only, for quantities of the unitary")
    keep = circuit.kind != CODE["measure"]
    if keep.all():
        return circuit
    return Circuit(
        circuit.n_qubits,
        circuit.layer[keep],
        circuit.kind[keep],
        circuit.qubits[keep],
        circuit.first[keep],
        circuit.parameters,
    )


def _stored(circuit: Circuit, rows: np.ndarray, change: Callable[[ComplexArray], ComplexArray]) -> Circuit:
    """Some gate rows of a circuit, in that order, each as a changed matrix; the layers are those of the rows."""
    matrices = circuit.row_matrices()
    changed = [change(matrix) for row in rows if (matrix := matrices[row]) is not None]
    parameters = [np.ascontiguousarray(matrix, dtype=np.complex128).view(np.float64).ravel() for matrix in changed]
    two = N_QUBITS[circuit.kind[rows]] == 2
    kind = np.where(two, CODE["matrix2"], CODE["matrix1"]).astype(np.int32)
    count = N_PARAMETERS[kind]
    return Circuit(
        circuit.n_qubits,
        circuit.layer[rows],
        kind,
        circuit.qubits[rows],
        (np.cumsum(count) - count).astype(np.int32),
        np.concatenate(parameters) if parameters else np.zeros(0),
    )


def adjoint(circuit: Circuit) -> Circuit:
    """The exact inverse, gate by gate as matrices: to simulate, not to run on a device."""
    plain = gates_only(circuit)
    rows = np.flatnonzero(plain.gate_rows)[::-1]
    back = _stored(plain, rows, lambda matrix: matrix.conj().T)
    top = int(back.layer[0]) if len(rows) else 0
    return Circuit(back.n_qubits, top - back.layer, back.kind, back.qubits, back.first, back.parameters)


def _doubled(circuit: Circuit) -> Circuit:
    """U on qubits 0 to n - 1 and its complex conjugate on n to 2n - 1, layer by layer, so that prefixes stay such."""
    n = circuit.n_qubits
    rows = np.flatnonzero(circuit.gate_rows)
    copy = _stored(circuit, rows, np.conj)
    moved = np.where(copy.qubits >= 0, copy.qubits + n, -1)
    offset = len(circuit.parameters)
    order = np.argsort(np.concatenate([circuit.layer[rows], copy.layer]), kind="stable")

    def join(of_circuit: IntArray, of_copy: IntArray) -> IntArray:
        return np.concatenate([of_circuit, of_copy])[order]

    return Circuit(
        2 * n,
        join(circuit.layer[rows], copy.layer),
        join(circuit.kind[rows], copy.kind),
        join(circuit.qubits[rows], moved),
        join(circuit.first[rows], copy.first + offset),
        np.concatenate([circuit.parameters, copy.parameters]),
    )


def _after(prepare: Callable[[CircuitBuilder], None], circuit: Circuit, n_qubits: int) -> Circuit:
    builder = CircuitBuilder(n_qubits)
    prepare(builder)
    builder.append(circuit, range(circuit.n_qubits))
    return builder.build()


def _bell_pairs(builder: CircuitBuilder) -> None:
    n = builder.n_qubits // 2
    for j in range(n):
        builder.add("h", [n + j])
    builder.next_layer()
    for j in range(n):
        builder.add("cx", [n + j, j])
    builder.next_layer()


def _same_size(circuits: Sequence[Circuit]) -> int:
    sizes = {circuit.n_qubits for circuit in circuits}
    if len(sizes) != 1:
        raise InputError("circuits", sorted(sizes), "one or more circuits of the same number of qubits")
    return sizes.pop()


def choi_states(
    circuits: Sequence[Circuit],
    *,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
) -> Iterator[tuple[int, ComplexArray]]:
    """Choi state of the unitary of every circuit: outputs are qubits 0 to n - 1, inputs n to 2n - 1.

    Args:
        circuits: of one size, at most 12 qubits; dtype, memory_limit, threads: as `engine.tree.walk`.
    Yields:
        (index of the circuit, (4**n,) state D^-1/2 sum_i U|i>|i>), in no particular order; the array is used again.
    Raises:
        InputError: sizes that differ or are too large, a reset, or too little memory.
    """
    n = _same_size(circuits)
    check_operator_size(n)
    larger = [_after(_bell_pairs, gates_only(circuit), 2 * n) for circuit in circuits]
    yield from walk(larger, dtype=dtype, memory_limit=memory_limit, threads=threads)


def unitaries(
    circuits: Sequence[Circuit],
    *,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
) -> Iterator[tuple[int, ComplexArray]]:
    """Unitary (D, D) of every circuit; arguments and errors as `choi_states`. Each array is the caller's own."""
    for place, state in choi_states(circuits, dtype=dtype, memory_limit=memory_limit, threads=threads):
        side = 2 ** (len(state).bit_length() // 2)
        yield place, state.reshape(side, side) * np.sqrt(state.real.dtype.type(side))


def operators(
    circuits: Sequence[Circuit],
    site: int,
    pauli: str,
    *,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
) -> Iterator[tuple[int, ComplexArray]]:
    """U V U^dag for every circuit, V a Pauli at one qubit: the operator that layer 1 meets first.

    For a pair of Paulis the OTOC of U V U^dag with W equals that of V with U^dag W U.

    Args:
        circuits: of one size, at most 12 qubits. site: qubit of V. pauli: X, Y or Z.
        dtype, memory_limit, threads: as `engine.tree.walk`.
    Yields:
        (index of the circuit, (D, D) matrix), in no particular order. Each array is the caller's own.
    Raises:
        InputError: sizes that differ or are too large, a site outside, a letter other than X, Y, Z, too little memory.
    """
    n = _same_size(circuits)
    check_operator_size(n)
    letter = check_pauli(site, pauli, n)

    def prepare(builder: CircuitBuilder) -> None:
        _bell_pairs(builder)
        builder.add(letter.lower(), [site])
        builder.next_layer()

    larger = [_after(prepare, _doubled(gates_only(circuit)), 2 * n) for circuit in circuits]
    for place, state in walk(larger, dtype=dtype, memory_limit=memory_limit, threads=threads):
        side = 2**n
        yield place, state.reshape(side, side) * np.sqrt(state.real.dtype.type(side))


def check_pauli(site: int, pauli: str, n_qubits: int) -> str:
    """The letter of a Pauli at a site, checked."""
    if pauli not in LETTERS or len(pauli) != 1:
        raise InputError("pauli", pauli, "X, Y or Z")
    if not 0 <= site < n_qubits:
        raise InputError("site", site, f"a qubit from 0 to {n_qubits - 1}")
    return pauli


def read_bits(name: str, bits: str, n_qubits: int) -> str:
    """A bit string of an input state, checked."""
    if len(bits) != n_qubits or set(bits) - {"0", "1"}:
        raise InputError(name, bits, f"a string of {n_qubits} bits 0 and 1, qubit 0 first")
    return bits


def twins(
    circuits: Sequence[Circuit],
    first: str = "",
    second: str = "",
    *,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
) -> Iterator[tuple[int, ComplexArray]]:
    """Both final states of every circuit from two orthogonal basis states.

    One more qubit holds which of the two inputs a branch began with, so one walk serves both.

    Args:
        circuits: of one size. first, second: input bit strings, qubit 0 first; all zeros, and the same with the
            middle qubit flipped, where empty.
        dtype, memory_limit, threads: as `engine.tree.walk`.
    Yields:
        (index of the circuit, (2, D) states), in no particular order. Each array is the caller's own.
    Raises:
        InputError: equal inputs, strings of another length, sizes that differ, or too little memory.
    """
    n = _same_size(circuits)
    one = read_bits("first", first or "0" * n, n)
    flipped = "".join("10"[int(bit)] if place == n // 2 else bit for place, bit in enumerate(one))
    two = read_bits("second", second or flipped, n)
    if one == two:
        raise InputError("second", two, "a bit string that differs from the first")

    def prepare(builder: CircuitBuilder) -> None:
        builder.add("h", [n])
        for qubit in range(n):
            if one[qubit] == "1":
                builder.add("x", [qubit])
        builder.next_layer()
        for qubit in range(n):
            if one[qubit] != two[qubit]:
                builder.add("cx", [n, qubit])
                builder.next_layer()

    larger = [_after(prepare, gates_only(circuit), n + 1) for circuit in circuits]
    for place, state in walk(larger, dtype=dtype, memory_limit=memory_limit, threads=threads):
        yield place, np.ascontiguousarray(state.reshape(-1, 2).T) * np.sqrt(state.real.dtype.type(2))


class Evolution:
    """One circuit and its exact inverse, compiled once, applied to any state.

    Args:
        circuit: gates, barriers and measurements; measurements are left out.
        dtype: "complex64" or "complex128". memory_limit: bytes for four states, the free memory where None.
        threads: cores to use, all that the process may use where None.
    Raises:
        InputError: a reset, or too little memory.
    """

    def __init__(
        self,
        circuit: Circuit,
        *,
        dtype: str = "complex64",
        memory_limit: int | None = None,
        threads: int | None = None,
    ) -> None:
        self.n_qubits, self._dtype, self._threads = circuit.n_qubits, memory.state_dtype(dtype), threads
        needed = memory.bytes_needed(circuit.n_qubits, dtype, states=4)
        memory.require(needed, memory_limit, f"four states of {circuit.n_qubits} qubits")
        plain = gates_only(circuit)
        self._plans = compile_circuit(plain, dtype), compile_circuit(adjoint(plain), dtype)

    def forward(self, state: ComplexArray) -> ComplexArray:
        """U on a state (D,), as a new array."""
        return self._applied(state, 0)

    def backward(self, state: ComplexArray) -> ComplexArray:
        """U^dag on a state (D,), as a new array."""
        return self._applied(state, 1)

    def _applied(self, state: ComplexArray, which: int) -> ComplexArray:
        if state.shape != (2**self.n_qubits,):
            raise InputError("state", state.shape, f"({2**self.n_qubits},) amplitudes")
        out: ComplexArray = aligned(len(state), self._dtype)
        out[:] = state
        with Pool(self._threads) as pool:
            apply_plan(out, self._plans[which], pool)
        return out

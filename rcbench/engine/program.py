"""A program: the rows of a circuit, or of a stretch of one, fused into few operators on one or two qubits.

One-qubit gates go into the two-qubit gate before them (the first ones into the gate after them), and gates that follow
each other on the same pair become one operator. An operator knows its rows, so that an error inside it changes its
matrix and nothing else.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rcbench.arrays import ComplexArray, IntArray
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import CODE, KINDS, N_QUBITS
from rcbench.engine.compiled import kernel
from rcbench.errors import InputError


@dataclass(frozen=True, slots=True, eq=False)
class GateRows:
    """The unitary rows of a circuit as matrices.

    Args:
        n_qubits: size of the register.
        layer: (m,) native layer of each gate.
        kind: (m,) index into `gates.KINDS`.
        qubits: (m, 2) int32 qubits of each gate, the second -1 for one-qubit gates.
        matrices: (m, 4, 4) complex128; a one-qubit gate fills [:2, :2].
    """

    n_qubits: int
    layer: IntArray
    kind: IntArray
    qubits: IntArray
    matrices: ComplexArray

    def __len__(self) -> int:
        return len(self.layer)


def check_order(circuit: Circuit) -> None:
    """Refuse what a pure state cannot follow: a reset or a gate after something else happened to the qubit."""
    touched: set[int] = set()
    measured: set[int] = set()
    special = {CODE["barrier"]: "barrier", CODE["measure"]: "measure", CODE["reset"]: "reset"}
    if not np.any(circuit.kind == CODE["reset"]):
        last = {int(q): row for row, q in enumerate(circuit.qubits[:, 0]) if circuit.kind[row] == CODE["measure"]}
        rows = np.flatnonzero(circuit.kind == CODE["measure"])
        if len(last) == len(rows) and (not len(rows) or not np.any(circuit.gate_rows[rows[0] :])):
            return  # the usual case: all measurements at the end, each qubit at most once
    for kind, pair in zip(circuit.kind.tolist(), circuit.qubits.tolist(), strict=True):
        name = special.get(kind, "")
        if name == "barrier":
            continue
        qubits = [q for q in (pair[:1] if name else pair) if q >= 0]
        if measured.intersection(qubits):
            raise InputError("circuit", f"{KINDS[kind].name} on qubit {qubits[0]} after its measurement", "measurements last")
        if name == "reset" and touched.intersection(qubits):
            raise InputError("circuit", f"reset of qubit {qubits[0]} after a gate", "resets before the first gate only")
        (measured if name == "measure" else touched).update(qubits)


def gate_rows(circuit: Circuit, start: int = 0, stop: int | None = None) -> GateRows:
    """The gates of a circuit as matrices, all or those from place start up to stop; `check_order` comes first."""
    rows = np.flatnonzero(circuit.gate_rows)[start:stop]
    kinds = circuit.kind[rows]
    matrices = np.zeros((len(rows), 4, 4), dtype=np.complex128)
    for code in np.unique(kinds):
        gate = KINDS[code]
        here = np.flatnonzero(kinds == code)
        columns = circuit.first[rows[here]][:, None] + np.arange(gate.n_parameters)
        assert gate.matrices is not None
        side = 2**gate.n_qubits
        matrices[here, :side, :side] = gate.matrices(circuit.parameters[columns])
    qubits = np.ascontiguousarray(circuit.qubits[rows], dtype=np.int32)
    qubits[N_QUBITS[kinds] == 1, 1] = -1
    return GateRows(circuit.n_qubits, circuit.layer[rows], kinds, qubits, matrices)


@dataclass(frozen=True, slots=True, eq=False)
class Program:
    """Operators in the order they are applied.

    Args:
        n_qubits: size of the register.
        qubits: (m, 2) int32, the lower label first; the second -1 for a one-qubit operator.
        matrices: (m, 4, 4) complex128, the lower label the more significant bit; a one-qubit operator fills [:2, :2].
        op_of_row: (gates,) the operator that holds each gate.
    """

    n_qubits: int
    qubits: IntArray
    matrices: ComplexArray
    op_of_row: IntArray

    def __len__(self) -> int:
        return len(self.qubits)

    @property
    def one_qubit(self) -> IntArray:
        """(k,) places of the one-qubit operators."""
        return np.flatnonzero(self.qubits[:, 1] < 0)


def fuse(rows: GateRows) -> Program:
    """The program of a stretch of gates."""
    count, qubits, matrices, op_of_row = _fuse(rows.n_qubits, rows.qubits, rows.matrices)
    return Program(rows.n_qubits, qubits[:count], matrices[:count], op_of_row)


@kernel
def multiply(left, right, size):  # type: ignore[no-untyped-def]
    """left @ right of the leading (size, size) corners, into `right`."""
    out = np.zeros((4, 4), dtype=np.complex128)
    for i in range(size):
        for j in range(size):
            total = 0j
            for k in range(size):
                total += left[i, k] * right[k, j]
            out[i, j] = total
    right[:, :] = out


@kernel
def embed(gate, second):  # type: ignore[no-untyped-def]
    """A one-qubit gate as a (4, 4) matrix on the first (more significant) or the second qubit of a pair."""
    out = np.zeros((4, 4), dtype=np.complex128)
    for i in range(2):
        for j in range(2):
            for k in range(2):
                if second:
                    out[2 * k + i, 2 * k + j] = gate[i, j]
                else:
                    out[2 * i + k, 2 * j + k] = gate[i, j]
    return out


@kernel
def exchange(gate):  # type: ignore[no-untyped-def]
    """The (4, 4) matrix with the two qubits in the other order."""
    order = (0, 2, 1, 3)
    out = np.empty((4, 4), dtype=np.complex128)
    for i in range(4):
        for j in range(4):
            out[i, j] = gate[order[i], order[j]]
    return out


@kernel
def apply_row(operator, first, second, gate, a, b):  # type: ignore[no-untyped-def]
    """Multiply an operator on qubits first < second (or on `first` alone) by one gate on (a, b) from the left."""
    if second < 0:
        multiply(gate, operator, 2)
    elif b < 0:
        multiply(embed(gate, a == second), operator, 4)
    elif a > b:
        multiply(exchange(gate), operator, 4)
    else:
        multiply(gate, operator, 4)


@kernel
def _fuse(n_qubits, qubits, gates):  # type: ignore[no-untyped-def]
    rows = len(qubits)
    op_qubits = np.full((rows, 2), -1, dtype=np.int32)
    matrices = np.zeros((rows, 4, 4), dtype=np.complex128)
    absorbed = np.full(rows, -1, dtype=np.int64)  # the operator that took this one in
    op_of_row = np.empty(rows, dtype=np.int64)
    last = np.full(n_qubits, -1, dtype=np.int64)  # the last operator on each qubit
    count = 0
    for row in range(rows):
        a, b = qubits[row, 0], qubits[row, 1]
        here = last[a]
        if here >= 0 and (b < 0 or here == last[b]):
            apply_row(matrices[here], op_qubits[here, 0], op_qubits[here, 1], gates[row], a, b)
            op_of_row[row] = here
            continue
        new = count
        count += 1
        op_of_row[row] = new
        if b < 0:
            op_qubits[new, 0] = a
            matrices[new] = gates[row]
            last[a] = new
            continue
        low, high = min(a, b), max(a, b)
        op_qubits[new, 0], op_qubits[new, 1] = low, high
        matrices[new] = np.eye(4)
        for qubit in (low, high):
            before = last[qubit]
            if before >= 0 and op_qubits[before, 1] < 0:
                multiply(embed(matrices[before], qubit == high), matrices[new], 4)
                absorbed[before] = new
            last[qubit] = new
        apply_row(matrices[new], low, high, gates[row], a, b)
    # close the gaps that absorbed operators left
    place = np.empty(count, dtype=np.int64)
    kept = 0
    for op in range(count):
        if absorbed[op] < 0:
            place[op] = kept
            op_qubits[kept] = op_qubits[op]
            matrices[kept] = matrices[op]
            kept += 1
    for row in range(rows):
        op = op_of_row[row]
        if absorbed[op] >= 0:
            op = absorbed[op]
        op_of_row[row] = place[op]
    return kept, op_qubits, matrices, op_of_row

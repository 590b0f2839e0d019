"""A program: the rows of a circuit, or of a stretch of one, fused into few operators on one or two qubits.

One-qubit gates go into the two-qubit gate before them (the first ones into the gate after them), and gates that follow
each other on the same pair become one operator. An operator knows its rows, so that an error inside it changes its
matrix and nothing else.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, IntArray
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import CODE, KINDS, N_QUBITS
from rcbench.engine.compiled import kernel, part
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
        held: (m,) true where a one-qubit gate must join the operator after it, not the one before.
    """

    n_qubits: int
    layer: IntArray
    kind: IntArray
    qubits: IntArray
    matrices: ComplexArray
    held: BoolArray

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
    return GateRows(circuit.n_qubits, circuit.layer[rows], kinds, qubits, matrices, np.zeros(len(rows), dtype=bool))


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

    def reordered(self, order: IntArray) -> Program:
        """The same operators in another order that leaves those on a common qubit as they are."""
        place = np.empty(len(order), dtype=np.int64)
        place[order] = np.arange(len(order))
        return Program(self.n_qubits, self.qubits[order], self.matrices[order], place[self.op_of_row])


def fuse(rows: GateRows) -> Program:
    """The program of a stretch of gates."""
    count, qubits, matrices, op_of_row = _fuse(rows.n_qubits, rows.qubits, rows.matrices, rows.held)
    return Program(rows.n_qubits, qubits[:count], matrices[:count], op_of_row)


@part
def _multiply(left, right, size):  # type: ignore[no-untyped-def]
    """left @ right of the leading (size, size) corners, into `right`."""
    column = (right[0, 0], right[0, 0], right[0, 0], right[0, 0])
    for j in range(size):
        if size == 2:
            column = (right[0, j], right[1, j], 0j, 0j)
        else:
            column = (right[0, j], right[1, j], right[2, j], right[3, j])
        for i in range(size):
            total = left[i, 0] * column[0] + left[i, 1] * column[1]
            if size == 4:
                total += left[i, 2] * column[2] + left[i, 3] * column[3]
            right[i, j] = total


@part
def _multiply_one(gate, operator, stride):  # type: ignore[no-untyped-def]
    """A one-qubit gate times a (4, 4) operator, into the operator; stride 2 is the first qubit, 1 the second."""
    for j in range(4):
        for k in range(2):
            i = k * (3 - stride)
            x, y = operator[i, j], operator[i + stride, j]
            operator[i, j] = gate[0, 0] * x + gate[0, 1] * y
            operator[i + stride, j] = gate[1, 0] * x + gate[1, 1] * y


@part
def apply_row(operator, first, second, gate, a, b):  # type: ignore[no-untyped-def]
    """Multiply an operator on qubits first < second (or on `first` alone) by one gate on (a, b) from the left."""
    if second < 0:
        _multiply(gate, operator, 2)
    elif b < 0:
        _multiply_one(gate, operator, 1 if a == second else 2)
    elif a > b:
        # the gate's first qubit is the operator's second: exchange rows and columns |01> and |10> of the gate
        other = np.empty((4, 4), dtype=np.complex128)
        for i in range(4):
            for j in range(4):
                other[(i & 1) << 1 | i >> 1, (j & 1) << 1 | j >> 1] = gate[i, j]
        _multiply(other, operator, 4)
    else:
        _multiply(gate, operator, 4)


@kernel
def _fuse(n_qubits, qubits, gates, held):  # type: ignore[no-untyped-def]
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
        joins = here >= 0 and (b < 0 or here == last[b])
        if joins and held[row] and op_qubits[here, 1] >= 0:
            joins = False
        if joins:
            apply_row(matrices[here], op_qubits[here, 0], op_qubits[here, 1], gates[row], a, b)
            op_of_row[row] = here
            continue
        new = count
        count += 1
        op_of_row[row] = new
        for i in range(4):
            matrices[new, i, i] = 1
        if b < 0:
            op_qubits[new, 0] = a
            matrices[new, 2, 2] = matrices[new, 3, 3] = 0
            apply_row(matrices[new], a, -1, gates[row], a, -1)
            last[a] = new
            continue
        low, high = min(a, b), max(a, b)
        op_qubits[new, 0], op_qubits[new, 1] = low, high
        for qubit in (low, high):
            before = last[qubit]
            if before >= 0 and op_qubits[before, 1] < 0:
                apply_row(matrices[new], low, high, matrices[before], qubit, -1)
                absorbed[before] = new
            last[qubit] = new
        apply_row(matrices[new], low, high, gates[row], a, b)
    # close the gaps that absorbed operators left
    place = np.empty(count, dtype=np.int64)
    kept = 0
    for op in range(count):
        if absorbed[op] < 0:
            place[op] = kept
            op_qubits[kept, 0], op_qubits[kept, 1] = op_qubits[op, 0], op_qubits[op, 1]
            for i in range(4):
                for j in range(4):
                    matrices[kept, i, j] = matrices[op, i, j]
            kept += 1
    for row in range(rows):
        op = op_of_row[row]
        op_of_row[row] = place[absorbed[op] if absorbed[op] >= 0 else op]
    return kept, op_qubits, matrices, op_of_row

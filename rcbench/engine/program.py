"""A program: the rows of a circuit, or of a stretch of one, fused into few operators on one or two qubits.

One-qubit gates go into the two-qubit gate before them (the first ones into the gate after them), and gates that follow
each other on the same pair become one operator. An operator knows its rows, so that an error inside it changes its
matrix and nothing else.
"""

from __future__ import annotations

from collections.abc import Sequence
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
        start: (stretches + 1,) where stretches begin whose states are asked for one by one.
    """

    n_qubits: int
    layer: IntArray
    kind: IntArray
    qubits: IntArray
    matrices: ComplexArray
    held: BoolArray
    start: IntArray

    def __len__(self) -> int:
        return len(self.layer)


def check_order(circuit: Circuit) -> None:
    """Refuse what a pure state cannot follow: a reset or a gate after something else happened to the qubit."""
    rows = np.flatnonzero(circuit.kind == CODE["measure"])
    if not np.any(circuit.kind == CODE["reset"]):
        once = len(set(circuit.qubits[rows, 0].tolist())) == len(rows)
        if once and not (len(rows) and np.any(circuit.gate_rows[rows[0] :])):
            return  # the usual case: all measurements at the end, each qubit at most once
    touched: set[int] = set()
    measured: set[int] = set()
    special = {CODE["barrier"]: "barrier", CODE["measure"]: "measure", CODE["reset"]: "reset"}
    for kind, pair in zip(circuit.kind.tolist(), circuit.qubits.tolist(), strict=True):
        name = special.get(kind, "")
        if name == "barrier":
            continue
        qubits = [q for q in (pair[:1] if name else pair) if q >= 0]
        if measured.intersection(qubits):
            raise InputError(
                "circuit", f"{KINDS[kind].name} on qubit {qubits[0]} after its measurement", "measurements last"
            )
        if name == "reset" and touched.intersection(qubits):
            raise InputError("circuit", f"reset of qubit {qubits[0]} after a gate", "resets before the first gate only")
        (measured if name == "measure" else touched).update(qubits)


def gate_rows(circuit: Circuit, cuts: Sequence[int] | None = None) -> GateRows:
    """The gates of a circuit as matrices; `check_order` comes first.

    cuts: the gate that each stretch begins with, and the end; one stretch of all gates where None.
    """
    rows = np.flatnonzero(circuit.gate_rows)
    start = np.array([0, len(rows)] if cuts is None else cuts, dtype=np.int64)
    rows, start = rows[start[0] : start[-1]], start - start[0]
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
    return GateRows(
        circuit.n_qubits, circuit.layer[rows], kinds, qubits, matrices, np.zeros(len(rows), dtype=bool), start
    )


@dataclass(frozen=True, slots=True, eq=False)
class Program:
    """Operators in the order they are applied.

    Args:
        n_qubits: size of the register.
        qubits: (m, 2) int32, the lower label first; the second -1 for a one-qubit operator.
        matrices: (m, 4, 4) complex128, the lower label the more significant bit; a one-qubit operator fills [:2, :2].
        op_of_row: (gates,) the operator that holds each gate.
        start: (stretches + 1,) where the operators of each stretch begin.
    """

    n_qubits: int
    qubits: IntArray
    matrices: ComplexArray
    op_of_row: IntArray
    start: IntArray

    def __len__(self) -> int:
        return len(self.qubits)

    def reordered(self, order: IntArray) -> Program:
        """The same operators in another order that leaves those on a common qubit as they are."""
        place = np.empty(len(order), dtype=np.int64)
        place[order] = np.arange(len(order))
        return Program(self.n_qubits, self.qubits[order], self.matrices[order], place[self.op_of_row], self.start)


def fuse(rows: GateRows) -> Program:
    """The program of a circuit's gates; nothing is fused from one stretch to the next."""
    m = len(rows)
    qubits, matrices = np.empty((m, 2), dtype=np.int32), np.zeros((m, 4, 4), dtype=np.complex128)
    op_of_row, start = np.empty(m, dtype=np.int64), np.empty(len(rows.start), dtype=np.int64)
    absorbed, last = np.empty(m, dtype=np.int64), np.empty(rows.n_qubits, dtype=np.int64)
    _fuse(rows.qubits, rows.matrices, rows.held, rows.start, qubits, matrices, op_of_row, start, absorbed, last)
    return Program(rows.n_qubits, qubits[: start[-1]], matrices[: start[-1]], op_of_row, start)


@part
def _multiply(left, right, size, exchanged):  # type: ignore[no-untyped-def]
    """left @ right of the leading (size, size) corners, into `right`; exchanged: `left` has its qubits swapped."""
    for j in range(size):
        x0, x1 = right[0, j], right[1, j]
        if size == 2:
            right[0, j] = left[0, 0] * x0 + left[0, 1] * x1
            right[1, j] = left[1, 0] * x0 + left[1, 1] * x1
            continue
        x2, x3 = right[2, j], right[3, j]
        if exchanged:
            x1, x2 = x2, x1
        for i in range(4):
            place = (i & 1) << 1 | i >> 1 if exchanged else i
            right[place, j] = left[i, 0] * x0 + left[i, 1] * x1 + left[i, 2] * x2 + left[i, 3] * x3


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
    if b < 0 <= second:
        _multiply_one(gate, operator, 1 if a == second else 2)
    else:
        _multiply(gate, operator, 2 if second < 0 else 4, a > b >= 0)


@kernel
def _fuse(qubits, gates, held, starts, op_qubits, matrices, op_of_row, op_starts, absorbed, last):  # type: ignore[no-untyped-def]
    """Fill in the operators (op_qubits, matrices, op_of_row, op_starts).

    absorbed: for each operator the one that took it in, -1 where none did. last: the last operator on each qubit in
    this stretch, -1 where there is none. Both are there to work in.
    """
    count, kept = 0, 0
    for stretch in range(len(starts) - 1):
        first = count
        for qubit in range(len(last)):
            last[qubit] = -1
        for row in range(starts[stretch], starts[stretch + 1]):
            a, b = qubits[row, 0], qubits[row, 1]
            here = last[a]
            joins = here >= 0 and (b < 0 or here == last[b])
            if joins and not (held[row] and op_qubits[here, 1] >= 0):
                apply_row(matrices[here], op_qubits[here, 0], op_qubits[here, 1], gates[row], a, b)
                op_of_row[row] = here
                continue
            op_of_row[row] = new = count
            count += 1
            absorbed[new] = -1
            for i in range(2 if b < 0 else 4):
                matrices[new, i, i] = 1
            if b < 0:
                op_qubits[new, 0], op_qubits[new, 1] = a, -1
                apply_row(matrices[new], a, -1, gates[row], a, -1)
                last[a] = new
                continue
            op_qubits[new, 0], op_qubits[new, 1] = min(a, b), max(a, b)
            for side in range(2):
                qubit = op_qubits[new, side]
                before = last[qubit]
                if before >= 0 and op_qubits[before, 1] < 0:
                    apply_row(matrices[new], op_qubits[new, 0], op_qubits[new, 1], matrices[before], qubit, -1)
                    absorbed[before] = new
                last[qubit] = new
            apply_row(matrices[new], op_qubits[new, 0], op_qubits[new, 1], gates[row], a, b)
        # close the gaps that absorbed operators left; `absorbed` of those kept becomes their new place
        op_starts[stretch] = kept
        for op in range(first, count):
            if absorbed[op] < 0:
                op_qubits[kept, 0], op_qubits[kept, 1] = op_qubits[op, 0], op_qubits[op, 1]
                for i in range(4):
                    for j in range(4):
                        matrices[kept, i, j] = matrices[op, i, j]
                absorbed[op] = -1 - kept - 1
                kept += 1
        for row in range(starts[stretch], starts[stretch + 1]):
            op = op_of_row[row]
            if absorbed[op] >= 0:
                op = absorbed[op]
            op_of_row[row] = -2 - absorbed[op]
    op_starts[len(starts) - 1] = kept

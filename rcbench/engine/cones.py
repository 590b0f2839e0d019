"""Light cones: the part of a circuit that what is measured depends on, on as few qubits as that takes.

    simplified   gates that meet their inverse taken out, as beside the turning point of an echo
    cone         the gates that some qubits depend on at the end, relabelled to the qubits these act on
    clusters     sets of qubits that no gate connects: their outcomes are independent

Gates on different qubits commute, so a gate cancels against the last one on its pair once nothing is left between
them. An echo with a perturbation in its middle loses all gates outside the perturbation's light cone, one without
loses all. That is exact for pure states; under a noise model, only gates outside the cone of the measured qubits go.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.arrays import BoolArray, FloatArray, IntArray
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import CODE, N_PARAMETERS, N_QUBITS, VIRTUAL
from rcbench.circuits.relabel import restrict
from rcbench.engine.compiled import kernel, part
from rcbench.engine.program import check_order, gate_rows

SAME = 1e-12  # entries this close are equal: rounding of gate products is a thousand times smaller


def simplified(circuit: Circuit) -> Circuit:
    """The circuit with one-qubit gates in a row as one, and without two-qubit gates that cancel up to one-qubit gates.

    Args:
        circuit: as for `state.final_state`.
    Returns:
        A circuit of `matrix1` and `matrix2` rows with the same measurements; its final state is the same up to a phase.
    Raises:
        InputError: a reset or a gate after the qubit's measurement.
    """
    check_order(circuit)
    rows = gate_rows(circuit)
    room = 2 * len(rows) + 2  # a two-qubit gate that cancels can leave two one-qubit gates
    qubits, matrices = np.full((room, 2), -1, dtype=np.int32), np.zeros((room, 4, 4), dtype=np.complex128)
    layer, below, alive = np.zeros(room, dtype=np.int64), np.full((room, 2), -1), np.zeros(room, dtype=np.bool_)
    count = _cancel(
        rows.qubits, rows.matrices, rows.layer.astype(np.int64), qubits, matrices, layer, below, alive,
        np.full(circuit.n_qubits, -1), np.zeros((3, 4, 4), dtype=np.complex128),
    )  # fmt: skip
    left = np.flatnonzero(alive[:count])
    return _with_gates(circuit, layer[left], qubits[left], matrices[left])


def _with_gates(circuit: Circuit, layer: IntArray, qubits: IntArray, matrices: np.ndarray) -> Circuit:
    """Gates as matrices, then the measurements of a circuit."""
    two = qubits[:, 1] >= 0
    kind = np.where(two, CODE["matrix2"], CODE["matrix1"])
    count = N_PARAMETERS[kind]
    first = np.cumsum(count) - count
    parameters = np.zeros(int(count.sum()))
    for size, chosen in ((2, np.flatnonzero(~two)), (4, np.flatnonzero(two))):
        entries = np.ascontiguousarray(matrices[chosen, :size, :size]).reshape(len(chosen), size * size)
        parameters[first[chosen][:, None] + np.arange(2 * size * size)] = entries.view(np.float64)
    measures = np.flatnonzero(circuit.kind == CODE["measure"])
    return Circuit(
        circuit.n_qubits,
        np.concatenate([layer, circuit.layer[measures]]).astype(np.int32),
        np.concatenate([kind, circuit.kind[measures]]).astype(np.int32),
        np.concatenate([qubits, circuit.qubits[measures]]).astype(np.int32),
        np.concatenate([first, np.full(len(measures), -1)]).astype(np.int32),
        parameters,
    )


def cone_rows(circuit: Circuit, qubits: Sequence[int]) -> tuple[BoolArray, tuple[int, ...]]:
    """The gates that the state of some qubits depends on at the end.

    Returns:
        (rows,) true for those gates, and the qubits they act on together with the given ones, in order.
    """
    live, keep = set(qubits), np.zeros(len(circuit), dtype=np.bool_)
    rows = np.flatnonzero(circuit.gate_rows)[::-1]
    two = N_QUBITS[circuit.kind[rows]] == 2
    for row, is_two, (a, b) in zip(rows.tolist(), two.tolist(), circuit.qubits[rows].tolist(), strict=True):
        if a in live or (is_two and b in live):
            keep[row] = True
            live.add(a)
            if is_two:
                live.add(b)
    return keep, tuple(sorted(live))


def cone(circuit: Circuit, qubits: Sequence[int]) -> tuple[Circuit, tuple[int, ...]]:
    """The cone of some qubits as a circuit that measures these, in their order, into bits 0, 1, ...

    Returns:
        The circuit, and the qubit of the given circuit behind each of its qubits. Layers keep their numbers.
    """
    keep, used = cone_rows(circuit, qubits)
    rows = np.flatnonzero(keep)
    last = int(circuit.layer[-1]) + 1 if len(circuit) else 0
    measures = np.column_stack([list(qubits), np.arange(len(qubits))])
    count = len(qubits)
    whole = Circuit(
        circuit.n_qubits,
        np.concatenate([circuit.layer[rows], np.full(count, last)]).astype(np.int32),
        np.concatenate([circuit.kind[rows], np.full(count, CODE["measure"])]).astype(np.int32),
        np.concatenate([circuit.qubits[rows], measures]).astype(np.int32),
        np.concatenate([circuit.first[rows], np.full(count, -1)]).astype(np.int32),
        circuit.parameters,
    )
    return restrict(whole, used), used


def clusters(circuit: Circuit) -> list[tuple[int, ...]]:
    """The qubits parted into sets that no gate connects, each in order."""
    root = list(range(circuit.n_qubits))

    def find(qubit: int) -> int:
        while root[qubit] != qubit:
            root[qubit] = root[root[qubit]]
            qubit = root[qubit]
        return qubit

    two = circuit.gate_rows & (N_QUBITS[circuit.kind] == 2)
    for a, b in np.unique(circuit.qubits[two], axis=0).tolist():
        root[find(a)] = find(b)
    members: dict[int, list[int]] = {}
    for qubit in range(circuit.n_qubits):
        members.setdefault(find(qubit), []).append(qubit)
    return [tuple(group) for group in members.values()]


def layer_times(circuit: Circuit, gate_times: tuple[float, float]) -> FloatArray:
    """(layers,) how long each native layer lasts, by its number; gate_times: of one- and two-qubit gates."""
    times = np.zeros(int(circuit.layer[-1]) + 1 if len(circuit) else 0)
    rows = np.flatnonzero(circuit.gate_rows & ~VIRTUAL[circuit.kind])
    np.maximum.at(times, circuit.layer[rows], np.array([0.0, *gate_times])[N_QUBITS[circuit.kind[rows]]])
    return times


@part
def _product(left, right, out):  # type: ignore[no-untyped-def]
    for i in range(4):
        for j in range(4):
            total = 0j
            for k in range(4):
                total += left[i, k] * right[k, j]
            out[i, j] = total


@part
def _factor(matrix, first, second):  # type: ignore[no-untyped-def]
    """Whether a unitary (4, 4) is a product of two one-qubit gates, which go into `first` and `second`."""
    best, bi, bj, bk, bl = -1.0, 0, 0, 0, 0
    for i in range(4):
        for j in range(4):
            if abs(matrix[i, j]) > best:
                best, bi, bk, bj, bl = abs(matrix[i, j]), i >> 1, j >> 1, i & 1, j & 1
    norm = 0.0
    for i in range(2):
        for k in range(2):
            first[i, k] = matrix[2 * i + bj, 2 * k + bl]
            norm += abs(first[i, k]) ** 2
    norm = (norm / 2) ** 0.5
    for i in range(2):
        for k in range(2):
            first[i, k] /= norm
    pivot = first[bi, bk]
    for j in range(2):
        for q in range(2):
            second[j, q] = matrix[2 * bi + j, 2 * bk + q] / pivot
    for i in range(4):
        for j in range(4):
            if abs(first[i >> 1, j >> 1] * second[i & 1, j & 1] - matrix[i, j]) > SAME:
                return False
    return True


@part
def _push_one(gate, qubit, at, count, qubits, matrices, layer, below, alive, top):  # type: ignore[no-untyped-def]
    """Put a one-qubit gate on top of its qubit: joined to one that is there, both gone where they cancel."""
    here = top[qubit]
    if here >= 0 and qubits[here, 1] < 0:
        old = matrices[here]
        for j in range(2):
            x, y = old[0, j], old[1, j]
            old[0, j] = gate[0, 0] * x + gate[0, 1] * y
            old[1, j] = gate[1, 0] * x + gate[1, 1] * y
    else:
        here = count
        count += 1
        qubits[here, 0], qubits[here, 1], layer[here], below[here, 0], alive[here] = qubit, -1, at, top[qubit], True
        for i in range(2):
            for j in range(2):
                matrices[here, i, j] = gate[i, j]
        top[qubit] = here
    new = matrices[here]
    if abs(new[0, 1]) < SAME and abs(new[1, 0]) < SAME and abs(new[0, 0] - new[1, 1]) < SAME:
        alive[here] = False
        top[qubit] = below[here, 0]
    return count


@part
def _between(matrices, a_turn, b_turn, out):  # type: ignore[no-untyped-def]
    """The one-qubit gates on top of a pair as one (4, 4) matrix; -1 where there is none."""
    for i in range(4):
        for j in range(4):
            left = matrices[a_turn, i >> 1, j >> 1] if a_turn >= 0 else (1.0 + 0j if i >> 1 == j >> 1 else 0j)
            right = matrices[b_turn, i & 1, j & 1] if b_turn >= 0 else (1.0 + 0j if i & 1 == j & 1 else 0j)
            out[i, j] = left * right


@kernel
def _cancel(rows_qubits, gates, rows_layer, qubits, matrices, layer, below, alive, top, work):  # type: ignore[no-untyped-def]
    """Gates put one on the other, each taken away again by its inverse; returns how many places were used.

    Fills `qubits`, `matrices`, `layer` and `alive` (the gates that are left). below: the gate under each one, by side;
    top: the uppermost gate of each qubit; work: three matrices to work in.
    """
    count = 0
    for row in range(len(rows_qubits)):
        a, b, at = rows_qubits[row, 0], rows_qubits[row, 1], rows_layer[row]
        gate = gates[row]
        if b < 0:
            count = _push_one(gate, a, at, count, qubits, matrices, layer, below, alive, top)
            continue
        a_turn, b_turn = -1, -1
        under_a, under_b = top[a], top[b]
        if under_a >= 0 and qubits[under_a, 1] < 0:
            a_turn, under_a = under_a, below[under_a, 0]
        if under_b >= 0 and qubits[under_b, 1] < 0:
            b_turn, under_b = under_b, below[under_b, 0]
        if under_a >= 0 and under_a == under_b:
            old, product, other = matrices[under_a], work[0], work[1]
            exchanged = qubits[under_a, 0] != a
            for i in range(4):
                for j in range(4):
                    p = (i & 1) << 1 | i >> 1 if exchanged else i
                    q = (j & 1) << 1 | j >> 1 if exchanged else j
                    other[i, j] = old[p, q]
            _between(matrices, a_turn, b_turn, product)
            _product(product, other, work[2])
            _product(gate, work[2], product)
            if _factor(product, work[1], work[2]):
                alive[under_a] = False
                side = 1 if exchanged else 0
                top[a], top[b] = below[under_a, side], below[under_a, 1 - side]
                if a_turn >= 0:
                    alive[a_turn] = False
                if b_turn >= 0:
                    alive[b_turn] = False
                count = _push_one(work[1], a, at, count, qubits, matrices, layer, below, alive, top)
                count = _push_one(work[2], b, at, count, qubits, matrices, layer, below, alive, top)
                continue
        qubits[count, 0], qubits[count, 1], layer[count], alive[count] = a, b, at, True
        below[count, 0], below[count, 1] = top[a], top[b]
        for i in range(4):
            for j in range(4):
                matrices[count, i, j] = gate[i, j]
        top[a] = top[b] = count
        count += 1
    return count

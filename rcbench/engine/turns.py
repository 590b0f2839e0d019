"""Quarter turns between diagonal gates, split so that the cheapest kernel serves.

A one-qubit gate whose four entries have equal magnitude (a quarter turn about any equatorial axis, Hadamard) is phases,
then [[1, -1], [1, 1]] / sqrt(2), then phases. The first phases commute with a diagonal two-qubit gate before it, the
last ones join the one after it: what is left is additions only. The circuit is not changed; two rows that cancel each
other are put in, of which one joins the operator before and the other the operator after.
"""

from __future__ import annotations

import numpy as np

from rcbench.circuits.gates import CODE
from rcbench.engine.compiled import kernel
from rcbench.engine.program import GateRows

EQUAL = 1e-12  # magnitudes this close count as equal; the kernel is chosen later on the product itself


def split_turns(rows: GateRows) -> GateRows:
    """The gates with cancelling phases put in before quarter turns between diagonal gates of different pairs."""
    if not np.any(rows.qubits[:, 1] >= 0):
        return rows
    m = len(rows)
    before, phases, held = np.empty(m, dtype=np.int64), np.empty(m, dtype=np.complex128), np.zeros(m, dtype=np.bool_)
    partner, first = np.empty((2, rows.n_qubits), dtype=np.int64)
    product = np.zeros((rows.n_qubits, 4), dtype=np.complex128)
    count = _find(rows.qubits, rows.matrices, rows.start, before, phases, held, partner, first, product)
    if not count:
        return rows
    before, phases = before[:count], phases[:count]
    order = np.argsort(before, kind="stable")
    place = np.repeat(before[order], 2)
    pair = np.column_stack([rows.qubits[before[order], 0], np.full(count, -1)]).astype(np.int32)
    matrices = np.zeros((2 * count, 4, 4), dtype=np.complex128)
    matrices[:, 0, 0] = 1
    matrices[0::2, 1, 1], matrices[1::2, 1, 1] = phases[order], phases[order].conj()
    return GateRows(
        rows.n_qubits,
        np.insert(rows.layer, place, rows.layer[place]),
        np.insert(rows.kind, place, CODE["rz"]),  # virtual: takes no time and makes no error
        np.insert(rows.qubits, place, np.repeat(pair, 2, axis=0), axis=0),
        np.insert(rows.matrices, place, matrices, axis=0),
        np.insert(held, place, np.tile([False, True], count)),
        rows.start + 2 * np.searchsorted(before[order], rows.start, side="left"),
    )


@kernel
def _find(qubits, gates, starts, before, phases, held, partner, first, product):  # type: ignore[no-untyped-def]
    """For each run of one-qubit gates to split its first gate and the phase of |1> to put before; the gates held.

    Fills `before`, `phases` and `held` and returns the number of runs. To work in, by qubit: the partner of the
    diagonal gate before the run (-1 where there is none), the run's first gate (-1 where it is empty) and product.
    """
    count, stretch = 0, 0
    for row in range(len(qubits)):
        if row == starts[stretch]:
            while stretch < len(starts) - 1 and row == starts[stretch]:
                stretch += 1
            for qubit in range(len(first)):
                partner[qubit] = first[qubit] = -1
        a, b = qubits[row, 0], qubits[row, 1]
        gate = gates[row]
        if b < 0:
            if first[a] < 0:
                first[a] = row
                product[a, 0], product[a, 1], product[a, 2], product[a, 3] = 1, 0, 0, 1
            for column in range(2):
                x, y = product[a, column], product[a, 2 + column]
                product[a, column] = gate[0, 0] * x + gate[0, 1] * y
                product[a, 2 + column] = gate[1, 0] * x + gate[1, 1] * y
            continue
        diagonal = True
        for i in range(4):
            for j in range(4):
                diagonal = diagonal and (i == j or abs(gate[i, j]) == 0)
        same_pair = partner[a] == b and partner[b] == a
        for side in range(2):
            qubit, other = qubits[row, side], qubits[row, 1 - side]
            size = abs(product[qubit, 0])
            if (
                diagonal
                and not same_pair
                and partner[qubit] >= 0
                and first[qubit] >= 0
                and abs(size * size - 0.5) < EQUAL
            ):
                before[count] = first[qubit]
                phases[count] = -product[qubit, 1] / product[qubit, 0]
                phases[count] /= abs(phases[count])
                count += 1
                for place in range(first[qubit], row):
                    if qubits[place, 0] == qubit and qubits[place, 1] < 0:
                        held[place] = True
            partner[qubit] = other if diagonal else -1
            first[qubit] = -1
    return count

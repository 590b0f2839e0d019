"""Random Pauli frames: the same circuit run under fresh random Paulis between all its layers, the result known.

Construction. Before every native two-qubit layer each qubit carries a random Pauli, its frame: the device holds
c |ideal>, c a product of one-qubit gates. Nothing is added to the circuit for it: the Paulis are compiled into the
one-qubit layers, which a layer of ideal gates L turns into P_new L c^-1, so that the frame after it is P_new, drawn
afresh. A two-qubit gate T takes the frame P to T P T^-1. For cz and iswap that is a Pauli again, for every P. For the
other native gates it is a product of one-qubit gates for some Paulis only (the next one-qubit layer undoes it), and the
frame before such a gate is drawn from these:

    sqrt_iswap, fsim                   II XX YY ZZ
    zz, fsim where theta = pi/2        II IZ ZI ZZ XX XY YX YY

Where there is no one-qubit layer in which a frame could change, a layer of Paulis is put in, in native gates.
At the end a random Pauli is left, which is known: it flips the bits of the outcome, or is undone in the last layer.

Why it removes coherent cancellation. An error E that follows T acts on the ideal state as c^-1 E c. Averaged over all
Paulis c that is a Pauli channel, whose effects add up and never cancel. The two halves of an echo have independent
frames, so that an error which a true time reversal would undo is seen (Proctor et al., Nature Physics 18, 75 (2022)).
What the restricted sets cannot see: an error whose generator commutes with every Pauli of the set, as a wrong angle of
zz (generator ZZ) or of the exchange of sqrt_iswap (XX + YY). `unseen` names them, and each circuit carries the list.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Literal

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, IntArray
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.gates import CODE, KINDS, N_QUBITS, UNITARY, VIRTUAL, gate_matrix
from rcbench.circuits.joining import add_layer
from rcbench.circuits.native import add_pulses, euler_angles, pulses
from rcbench.errors import InputError
from rcbench.randomness import Draw

LETTERS = "IXYZ"
PAULIS: ComplexArray = np.stack([np.eye(2, dtype=np.complex128), *(gate_matrix(name) for name in "xyz")])
_PAULI_ROWS = PAULIS.conj().reshape(4, 4).T
FLIPS = np.array([0, 1, 1, 0])  # whether each Pauli turns a bit over
_LOCAL = 1e-9  # second Schmidt coefficient below which an operator counts as a product


@dataclass(frozen=True, slots=True, eq=False)
class Passage:
    """How Paulis pass one two-qubit gate T.

    Args:
        allowed: (k, 2) pairs of Paulis, as indices into LETTERS, for which T P T^-1 is a product.
        known: (4, 4) true for those pairs.
        after: (4, 4, 2, 2, 2) the two factors of T P T^-1; zero where it is no product.
    """

    allowed: IntArray
    known: BoolArray
    after: ComplexArray

    @property
    def commuting(self) -> tuple[str, ...]:
        """The two-qubit Paulis that commute with every pair allowed: generators of errors that no frame turns over."""
        differ = [[int(a != b and a * b > 0) for b in range(4)] for a in range(4)]
        pairs = [(a, b) for a in range(4) for b in range(4) if (a, b) != (0, 0)]
        kept = [p for p in pairs if all((differ[p[0]][a] + differ[p[1]][b]) % 2 == 0 for a, b in self.allowed)]
        return tuple(LETTERS[a] + LETTERS[b] for a, b in kept)


@lru_cache(maxsize=4096)
def passage(name: str, parameters: tuple[float, ...] = ()) -> Passage:
    """How Paulis pass a native two-qubit gate."""
    gate = gate_matrix(name, *parameters)
    known = np.zeros((4, 4), dtype=np.bool_)
    after = np.zeros((4, 4, 2, 2, 2), dtype=np.complex128)
    for a in range(4):
        for b in range(4):
            factors = product_factors(gate @ np.kron(PAULIS[a], PAULIS[b]) @ gate.conj().T)
            if factors is not None:
                known[a, b], after[a, b] = True, np.stack(factors)
    return Passage(np.argwhere(known), known, after)


def product_factors(operator: ComplexArray) -> tuple[ComplexArray, ComplexArray] | None:
    """Unitaries a and b with (4, 4) operator = a x b up to phase, Paulis exact; None where there are none."""
    split = operator.reshape(2, 2, 2, 2).transpose(0, 2, 1, 3).reshape(4, 4)
    left, size, right = np.linalg.svd(split)
    if size[1] > _LOCAL * size[0]:
        return None
    return _clean(left[:, 0].reshape(2, 2)), _clean(right[0].reshape(2, 2))


def _clean(matrix: ComplexArray) -> ComplexArray:
    """A matrix of Frobenius norm 1 as a unitary; exactly a Pauli where it is one up to phase."""
    unitary = matrix * np.sqrt(2)
    overlap = np.abs(np.einsum("pij,ij->p", PAULIS.conj(), unitary)) / 2
    best = int(overlap.argmax())
    return np.asarray(PAULIS[best] if overlap[best] > 1 - _LOCAL else unitary)


def unseen(circuit: Circuit) -> tuple[str, ...]:
    """Generators of two-qubit errors of this circuit's gates that no Pauli frame turns over; empty for cz and iswap."""
    rows = np.flatnonzero(UNITARY[circuit.kind] & (N_QUBITS[circuit.kind] == 2))
    gates = {(KINDS[circuit.kind[row]].name, circuit.row_parameters(int(row))) for row in rows}
    return tuple(sorted({pauli for name, parameters in gates for pauli in passage(name, parameters).commuting}))


@dataclass(slots=True)
class _Item:
    """A part of a circuit. slab: one-qubit gates, gates (n, 2, 2); fixed: virtual ones, kept as they stand."""

    what: Literal["slab", "fixed", "two", "barrier"]
    rows: IntArray
    gates: ComplexArray | None = None
    real: bool = False


def _split(circuit: Circuit) -> list[_Item]:
    """The circuit as layers of one-qubit gates between two-qubit layers and barriers."""
    fence = circuit.kind == CODE["barrier"]
    double = N_QUBITS[circuit.kind] == 2
    single = UNITARY[circuit.kind] & ~double
    other = ~UNITARY[circuit.kind] & ~fence
    if other.any():
        name = KINDS[circuit.kind[np.flatnonzero(other)[0]]].name
        raise InputError("pauli_layers", name, "a circuit of gates only, where Pauli layers go inside")
    if not len(circuit):
        return []
    matrices = _one_qubit_matrices(circuit, single)
    starts = np.flatnonzero(np.diff(circuit.layer, prepend=-1))
    ends = np.append(starts[1:], len(circuit)).tolist()
    ones = np.add.reduceat(single, starts, dtype=np.int64).tolist()
    twos = np.add.reduceat(double, starts, dtype=np.int64).tolist()
    real = np.logical_or.reduceat(single & ~VIRTUAL[circuit.kind], starts).tolist()
    qubits = circuit.qubits[:, 0]
    items: list[_Item] = []
    for start, end, n_ones, n_twos, pulsed in zip(starts.tolist(), ends, ones, twos, real, strict=True):
        rows = np.arange(start, end)
        if n_ones:
            mine = rows[single[start:end]] if n_twos else rows
            if not items or items[-1].what != "slab":
                eye = np.broadcast_to(np.eye(2, dtype=np.complex128), (circuit.n_qubits, 2, 2)).copy()
                items.append(_Item("slab", rows[:0], eye))
            slab, where = items[-1], qubits[mine]
            assert slab.gates is not None
            slab.gates[where] = matrices[mine] @ slab.gates[where]
            slab.rows = np.concatenate([slab.rows, mine])
            slab.real |= pulsed
        if n_twos:
            items.append(_Item("two", rows[double[start:end]] if n_ones else rows))
        elif not n_ones:
            items.append(_Item("barrier", rows))
    return _fold(items)


def _one_qubit_matrices(circuit: Circuit, single: BoolArray) -> ComplexArray:
    out = np.zeros((len(circuit), 2, 2), dtype=np.complex128)
    for code in np.unique(circuit.kind[single]):
        rows = np.flatnonzero(circuit.kind == code)
        matrices = KINDS[code].matrices
        assert matrices is not None
        out[rows] = matrices(circuit.parameters[circuit.first[rows][:, None] + np.arange(KINDS[code].n_parameters)])
    return out


def _fold(items: list[_Item]) -> list[_Item]:
    """Virtual gates go into the one-qubit layer next to them, so that no frame of their own makes them real."""
    kept: list[_Item] = []
    carried: ComplexArray | None = None
    for place, item in enumerate(items):
        if item.what != "slab":
            kept.append(item)
            continue
        assert item.gates is not None
        if carried is not None:
            item.gates, carried = item.gates @ carried, None
        if item.real:
            kept.append(item)
            continue
        before = next((other for other in reversed(kept) if other.what != "barrier"), None)
        after = next((other for other in items[place + 1 :] if other.what != "barrier"), None)
        if before is not None and before.what == "slab":
            assert before.gates is not None
            before.gates = item.gates @ before.gates
        elif after is not None and after.what == "slab":
            carried = item.gates
        else:
            kept.append(_Item("fixed", item.rows, item.gates))
    return kept


def randomised(
    circuit: Circuit, device_one_qubit: str, frame: IntArray, draw: Draw, *, corrected: bool = False
) -> tuple[Circuit, IntArray]:
    """The circuit under random Pauli frames, in native gates, and the Paulis left at its end.

    Args:
        circuit: gates and barriers only, each two-qubit gate in a layer of two-qubit gates.
        device_one_qubit: native one-qubit set, one of `device.NATIVE_ONE_QUBIT`.
        frame: (n,) Paulis that the qubits carry at the start, as indices into LETTERS.
        draw: where the Paulis come from.
        corrected: undo the last frame in the last one-qubit layer, so that the circuit is the ideal one.
    Returns:
        The circuit, equal to (Paulis left) circuit (frame)^-1 up to phase, and (n,) the Paulis left.
    """
    items = _framed_ends(_split(circuit), circuit.n_qubits)
    emitted: list[_Item] = []
    carried = PAULIS[frame].copy()  # (n, 2, 2) the device's state is this times the ideal one
    last = max(place for place, item in enumerate(items) if item.what == "slab")
    new = np.asarray(frame)
    for place, item in enumerate(items):
        if item.what == "slab":
            assert item.gates is not None
            new = _draw_frame(circuit, items[place + 1 :], draw)
            if corrected and place == last:
                new = np.zeros_like(new)
            emitted.append(_Item("slab", item.rows, PAULIS[new] @ item.gates @ _dagger(carried)))
            carried = PAULIS[new].copy()
            continue
        if item.what == "fixed":
            assert item.gates is not None
            carried = item.gates @ carried @ _dagger(item.gates)
        elif item.what == "two":
            carried = _pass(circuit, item.rows, carried, draw, emitted)
        emitted.append(item)
    return _write(circuit, emitted, device_one_qubit), new


def _framed_ends(items: list[_Item], n_qubits: int) -> list[_Item]:
    """The items with a one-qubit layer before the first and after the last two-qubit layer."""
    eye = np.broadcast_to(np.eye(2, dtype=np.complex128), (n_qubits, 2, 2))
    own = _Item("slab", np.arange(0), eye)
    kinds = [item.what for item in items]
    if "slab" not in kinds or "two" in kinds[: kinds.index("slab")]:
        items = [own, *items]
    kinds = [item.what for item in items]
    if "two" in kinds and "slab" not in kinds[len(kinds) - kinds[::-1].index("two") :]:
        items = [*items, own]
    return items


def _draw_frame(circuit: Circuit, following: Sequence[_Item], draw: Draw) -> IntArray:
    """(n,) random Paulis, those before a two-qubit gate from the pairs that pass it."""
    frame = draw.integers(4, circuit.n_qubits)
    bound: set[int] = set()
    for item in following:
        if item.what == "slab":
            break
        if item.what != "two":
            continue
        for rows, gate in _gates(circuit, item.rows):
            pairs = circuit.qubits[rows]
            if len(gate.allowed) < 16:
                for a, b in pairs.tolist():
                    if a not in bound and b not in bound:
                        frame[[a, b]] = gate.allowed[int(draw.integers(len(gate.allowed), 1)[0])]
            bound |= set(pairs.ravel().tolist())
    return frame


def _gates(circuit: Circuit, rows: IntArray) -> list[tuple[IntArray, Passage]]:
    """The rows of a two-qubit layer by gate."""
    if circuit.first[rows[0]] < 0 and (circuit.kind[rows] == circuit.kind[rows[0]]).all():
        return [(rows, passage(KINDS[circuit.kind[rows[0]]].name))]
    groups: dict[tuple[str, tuple[float, ...]], list[int]] = {}
    for row in rows.tolist():
        groups.setdefault((KINDS[circuit.kind[row]].name, circuit.row_parameters(row)), []).append(row)
    return [(np.array(members), passage(*gate)) for gate, members in groups.items()]


def _pass(circuit: Circuit, rows: IntArray, carried: ComplexArray, draw: Draw, emitted: list[_Item]) -> ComplexArray:
    """What the qubits carry after a two-qubit layer; a layer of Paulis is put before it where something cannot pass."""
    index = _pauli_index(carried)
    gates = [(circuit.qubits[members], gate) for members, gate in _gates(circuit, rows)]
    fresh: dict[int, int] = {}
    for pairs, gate in gates:
        one, two = index[pairs[:, 0]], index[pairs[:, 1]]
        for a, b in pairs[(one < 0) | (two < 0) | ~gate.known[one, two]].tolist():
            choice = gate.allowed[int(draw.integers(len(gate.allowed), 1)[0])]
            fresh[a], fresh[b] = int(choice[0]), int(choice[1])
    if fresh:
        qubits, paulis = list(fresh), list(fresh.values())
        layer = np.broadcast_to(np.eye(2, dtype=np.complex128), carried.shape).copy()
        layer[qubits] = PAULIS[paulis] @ _dagger(carried[qubits])
        emitted.append(_Item("slab", rows[:0], layer))
        index[qubits] = paulis
    after = carried.copy()
    for pairs, gate in gates:
        after[pairs] = gate.after[index[pairs[:, 0]], index[pairs[:, 1]]]
    return after


def _pauli_index(matrices: ComplexArray) -> IntArray:
    """(n,) which Pauli each (n, 2, 2) unitary is up to phase, -1 where it is none."""
    overlap = np.abs(matrices.reshape(-1, 4) @ _PAULI_ROWS) / 2
    best = overlap.argmax(axis=1)
    return np.where(overlap.max(axis=1) > 1 - _LOCAL, best, -1)


def _write(circuit: Circuit, items: Sequence[_Item], one_qubit: str) -> Circuit:
    """The items as native rows; the pulses of all one-qubit layers are worked out at once."""
    slabs = np.stack([item.gates for item in items if item.what == "slab" and item.gates is not None])
    layers = pulses(one_qubit, euler_angles(slabs))
    builder, everyone = CircuitBuilder(circuit.n_qubits), np.arange(circuit.n_qubits)
    slab = 0
    for item in items:
        if item.what == "slab":
            add_pulses(builder, everyone, [layer[slab] for layer in layers])
            slab += 1
        elif item.what == "barrier":
            builder.barrier()
        else:
            for layer in np.unique(circuit.layer[item.rows]):
                add_layer(builder, circuit, item.rows[circuit.layer[item.rows] == layer])
                builder.next_layer()
    return builder.build()


def _dagger(matrices: ComplexArray) -> ComplexArray:
    return matrices.conj().swapaxes(-1, -2)

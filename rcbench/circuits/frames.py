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
zz (generator ZZ) or of the exchange of sqrt_iswap (XX + YY). `passage.unseen` names them, and the roster lists them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, IntArray
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.gates import CODE, KINDS, N_QUBITS, UNITARY, VIRTUAL
from rcbench.circuits.joining import add_layer
from rcbench.circuits.native import add_pulses, euler_angles, pulses
from rcbench.circuits.passage import PAULIS, Passage, passage, pauli_index
from rcbench.errors import InputError
from rcbench.randomness import Draw


@dataclass(slots=True)
class _Item:
    """A part of a circuit.

    slab: one-qubit gates, (n, 2, 2) in `gates`, `real` where they take time; fixed: virtual ones, kept as they stand;
    two: two-qubit gates, their pairs of qubits by gate in `groups`.
    """

    what: Literal["slab", "fixed", "two", "barrier"]
    rows: IntArray
    gates: ComplexArray | None = None
    real: bool = False
    groups: list[tuple[IntArray, Passage]] | None = None


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
                items.append(_Item("slab", rows[:0], _identities(circuit.n_qubits)))
            slab, where = items[-1], qubits[mine]
            assert slab.gates is not None
            slab.gates[where] = matrices[mine] @ slab.gates[where]
            slab.rows = np.concatenate([slab.rows, mine])
            slab.real |= pulsed
        if n_twos:
            mine = rows[double[start:end]] if n_ones else rows
            items.append(_Item("two", mine, groups=_groups(circuit, mine)))
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
    circuit: Circuit, one_qubit: str, frame: IntArray, draw: Draw, *, corrected: bool = False
) -> tuple[Circuit, IntArray]:
    """The circuit under random Pauli frames, in native gates, and the Paulis left at its end.

    Args:
        circuit: gates and barriers only, each two-qubit gate in a layer of two-qubit gates.
        one_qubit: native one-qubit set, one of `device.NATIVE_ONE_QUBIT`.
        frame: (n,) Paulis that the qubits carry at the start, as indices into LETTERS.
        draw: where the Paulis come from.
        corrected: undo the last frame in the last one-qubit layer, so that the circuit is the ideal one.
    Returns:
        The circuit, equal to (Paulis left) circuit (frame)^-1 up to phase, and (n,) the Paulis left.
    Raises:
        InputError: a measurement or reset in the circuit.
    """
    items = _framed_ends(_split(circuit), circuit.n_qubits)
    walk = _Walk(circuit, np.array(frame), draw)
    last = max(place for place, item in enumerate(items) if item.what == "slab")
    for place, item in enumerate(items):
        if item.what == "slab":
            walk.slab(item, items[place + 1 :], undo=corrected and place == last)
        elif item.what == "two":
            walk.two(item)
        else:
            walk.keep(item)
    return _write(circuit, walk.emitted, one_qubit), walk.index


def _framed_ends(items: list[_Item], n_qubits: int) -> list[_Item]:
    """The items with a one-qubit layer before the first and after the last two-qubit layer."""
    own = _Item("slab", np.arange(0), _identities(n_qubits))
    kinds = [item.what for item in items]
    if "slab" not in kinds or "two" in kinds[: kinds.index("slab")]:
        items = [own, *items]
    kinds = [item.what for item in items]
    if "two" in kinds and "slab" not in kinds[len(kinds) - kinds[::-1].index("two") :]:
        items = [*items, own]
    return items


@dataclass(slots=True)
class _Walk:
    """One pass through the items of a circuit.

    The device's state is `carried` (n, 2, 2) times the ideal one; `index` (n,) says which Pauli that is, -1 for none.
    """

    circuit: Circuit
    index: IntArray
    draw: Draw
    carried: ComplexArray = field(init=False)
    emitted: list[_Item] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.carried = PAULIS[self.index]

    def slab(self, item: _Item, following: Sequence[_Item], *, undo: bool) -> None:
        """A one-qubit layer: the old frame is undone and a new one put on."""
        assert item.gates is not None
        new = np.zeros_like(self.index) if undo else self._fresh(following)
        self.emitted.append(_Item("slab", item.rows, PAULIS[new] @ item.gates @ _dagger(self.carried)))
        self.index, self.carried = new, PAULIS[new]

    def keep(self, item: _Item) -> None:
        """A barrier, or virtual gates that stay as they are: the frame is carried through them."""
        if item.gates is not None:
            self.carried = item.gates @ self.carried @ _dagger(item.gates)
            self.index = pauli_index(self.carried)
        self.emitted.append(item)

    def two(self, item: _Item) -> None:
        """A two-qubit layer; a layer of Paulis is put before it where something that is carried cannot pass."""
        assert item.groups is not None
        chosen: dict[int, int] = {}
        for pairs, gate in item.groups:
            one, two = self.index[pairs[:, 0]], self.index[pairs[:, 1]]
            stuck = (one < 0) | (two < 0) | ~gate.known[one, two]
            for a, b in pairs[stuck].tolist() if stuck.any() else ():
                chosen[a], chosen[b] = self._pick(gate)
        if chosen:
            qubits, paulis = list(chosen), list(chosen.values())
            layer = _identities(self.circuit.n_qubits)
            layer[qubits] = PAULIS[paulis] @ _dagger(self.carried[qubits])
            self.emitted.append(_Item("slab", item.rows[:0], layer))
            self.index[qubits] = paulis
        for pairs, gate in item.groups:
            one, two = self.index[pairs[:, 0]], self.index[pairs[:, 1]]
            self.carried[pairs], self.index[pairs] = gate.after[one, two], gate.paulis[one, two]
        self.emitted.append(item)

    def _fresh(self, following: Sequence[_Item]) -> IntArray:
        """(n,) random Paulis, those before a two-qubit gate from the pairs that pass it."""
        frame = self.draw.integers(4, self.circuit.n_qubits)
        bound: set[int] = set()
        for item in following:
            if item.what == "slab":
                break
            for pairs, gate in item.groups or ():
                for a, b in pairs.tolist() if not gate.known.all() else ():
                    if a not in bound and b not in bound:
                        frame[a], frame[b] = self._pick(gate)
                bound |= set(pairs.ravel().tolist())
        return frame

    def _pick(self, gate: Passage) -> tuple[int, int]:
        """A random pair of Paulis that passes a gate."""
        a, b = gate.allowed[int(self.draw.integers(len(gate.allowed), 1)[0])].tolist()
        return a, b


def _groups(circuit: Circuit, rows: IntArray) -> list[tuple[IntArray, Passage]]:
    """The pairs of qubits of a two-qubit layer by gate."""
    if circuit.first[rows[0]] < 0 and (circuit.kind[rows] == circuit.kind[rows[0]]).all():
        return [(circuit.qubits[rows], passage(KINDS[circuit.kind[rows[0]]].name))]
    groups: dict[tuple[str, tuple[float, ...]], list[int]] = {}
    for row in rows.tolist():
        groups.setdefault((KINDS[circuit.kind[row]].name, circuit.row_parameters(row)), []).append(row)
    return [(circuit.qubits[members], passage(*gate)) for gate, members in groups.items()]


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


def _identities(n_qubits: int) -> ComplexArray:
    return np.broadcast_to(np.eye(2, dtype=np.complex128), (n_qubits, 2, 2)).copy()


def _dagger(matrices: ComplexArray) -> ComplexArray:
    return matrices.conj().swapaxes(-1, -2)

"""Layers for rows that come as a sequence: each gate as soon as its qubits are free, between barriers."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import pairwise

import numpy as np

from rcbench.arrays import IntArray
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import CODE, VIRTUAL

PARTIAL = -4  # code of a row that stands for a barrier on some qubits; no row of the circuit comes of it
_WIDTH = 1 << 22  # places inside one slot of time, more than a program may have rows
_PULSE = _WIDTH - 1
_BARRIER = CODE["barrier"]


def time_keys(n_qubits: int, rows: Sequence[Sequence[int]], partial: Mapping[int, Sequence[int]]) -> IntArray:
    """(m,) keys: rows of one layer have the same key, those of a later layer a larger one.

    Virtual gates take no time: each stands right before the next gate or barrier on its qubit, so that gates which do
    take time start together where they can.

    Args:
        rows: (code, first qubit, second qubit or -1) of each row.
        partial: the qubits of each row that is a barrier on some qubits, by place.
    """
    virtual = VIRTUAL.tolist()
    virtual[_BARRIER] = False
    free = [0] * n_qubits  # first free slot of each qubit
    waiting: dict[int, list[int]] = {}  # virtual gates since the last pulse on each qubit
    floor = top = 0  # first slot behind the last barrier; first slot that is free on all qubits
    keys = [0] * len(rows)

    def settle(places: list[int], slot: int) -> None:
        start = slot * _WIDTH + _PULSE - len(places)
        for count, place in enumerate(places):
            keys[place] = start + count

    for place, (code, one, two) in enumerate(rows):
        if code == PARTIAL:
            together = max(floor, *(free[qubit] for qubit in partial[place]))
            for qubit in partial[place]:
                free[qubit] = together
                if qubit in waiting:
                    settle(waiting.pop(qubit), together)
        elif code == _BARRIER:
            for places in waiting.values():
                settle(places, top)
            waiting.clear()
            keys[place] = top * _WIDTH + _PULSE
            floor = top = top + 1
        elif virtual[code]:
            waiting.setdefault(one, []).append(place)
        else:
            slot = max(floor, free[one], free[two]) if two >= 0 else max(floor, free[one])
            if waiting:
                for qubit in (one, two):
                    if qubit in waiting:
                        settle(waiting.pop(qubit), slot)
            keys[place] = slot * _WIDTH + _PULSE
            free[one] = slot + 1
            if two >= 0:
                free[two] = slot + 1
            if slot >= top:
                top = slot + 1
    for places in waiting.values():
        settle(places, top)
    return np.array(keys, dtype=np.int64)


def layers_of(keys: IntArray) -> tuple[IntArray, IntArray]:
    """The order in which rows come by layer, as they stood inside one, and the layer of each in that order."""
    order = np.argsort(keys, kind="stable")
    ordered = keys[order]
    return order, np.cumsum(np.diff(ordered, prepend=ordered[:1]) != 0)


def waits(circuit: Circuit) -> dict[int, list[int]]:
    """Barriers on some qubits that keep the layers of a circuit where gates would otherwise start earlier.

    With them between the statements, `time_keys` gives back the layers of the circuit.

    Returns:
        The qubits of each such barrier, by the row that it stands before.
    """
    out: dict[int, list[int]] = {}
    virtual = VIRTUAL.tolist()
    timeless = [*virtual]
    timeless[CODE["measure"]] = True
    free = [0] * circuit.n_qubits
    pending: set[int] = set()  # qubits with virtual gates since the last layer that takes time
    slot, latest = 0, -1  # slot of the layer at hand; a qubit that becomes free right there
    starts = np.flatnonzero(np.diff(circuit.layer, prepend=-1, append=-1))
    codes, pairs = circuit.kind.tolist(), circuit.qubits.tolist()
    for begin, end in pairwise(starts.tolist()):
        if codes[begin] == _BARRIER:
            slot, latest = slot + 1, -1
            free = [slot] * circuit.n_qubits
            pending.clear()
            continue
        layer = range(begin, end)
        acting = [[q for q in pairs[row] if q >= 0] for row in layer if not timeless[codes[row]]]
        late = {pairs[row][0] for row in layer if virtual[codes[row]]}
        if not acting:
            pending |= late
            continue
        busy = {qubit for qubits in acting for qubit in qubits}
        held = {qubit for qubits in acting if max(free[one] for one in qubits) < slot for qubit in qubits}
        held |= pending - busy
        if held:
            out[begin] = sorted(held | ({latest} if latest >= 0 else set()))
        slot += 1
        for qubit in busy | held:
            free[qubit] = slot if qubit in busy else slot - 1
        latest = acting[0][0]
        pending = late
    return out

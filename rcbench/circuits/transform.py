"""The inverse, complex conjugate and transpose of a circuit, written in the same native gates.

Layers and barriers keep their order, or are mirrored; one-qubit gates stay in the device's native set; two-qubit gates
are turned round by the rules of `inverses`. The one-qubit gates that those rules put around a gate are taken into the
one-qubit layers next to it, so that the circuit takes no longer than the one it was made from.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.circuits import native
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.gates import CODE, KINDS, N_QUBITS, UNITARY
from rcbench.circuits.inverses import (
    Change,
    between_half_turns,
    changed_matrices,
    pulse_parameters,
    two_qubit_gate,
    z_angles,
)
from rcbench.device import Device
from rcbench.errors import InputError


def inverse(circuit: Circuit, device: Device, qubits: Sequence[int]) -> Circuit:
    """U^-1: the circuit that undoes this one, up to a global phase.

    Args:
        circuit: gates and barriers only.
        device: gives the native one-qubit set, and which angles its two-qubit gates offer.
        qubits: device qubit of each qubit of the circuit.
    Raises:
        InputError: a measurement or reset; fsim gates with angles that have no inverse in native gates.
    """
    return _changed(circuit, device, qubits, "inverse")


def conjugate(circuit: Circuit, device: Device, qubits: Sequence[int]) -> Circuit:
    """U*: the complex conjugate in the computational basis, in the same order; arguments and errors as `inverse`."""
    return _changed(circuit, device, qubits, "conjugate")


def transpose(circuit: Circuit, device: Device, qubits: Sequence[int]) -> Circuit:
    """U^T: the transpose in the computational basis, in mirrored order; arguments and errors as `inverse`.

    No angle is refused, since every native two-qubit gate is its own transpose.
    """
    return _changed(circuit, device, qubits, "transpose")


@dataclass(slots=True)
class _Turns:
    """A stretch of one-qubit layers, their rows in the order of the old circuit; and gates to add by qubit."""

    layers: list[IntArray] = field(default_factory=list)
    first: dict[int, ComplexArray] = field(default_factory=dict)
    last: dict[int, ComplexArray] = field(default_factory=dict)


@dataclass(slots=True)
class _Gates:
    """One layer of two-qubit gates: rows of the old circuit, new parameters, and one-qubit gates around by qubit."""

    rows: IntArray
    touches: frozenset[int]
    parameters: list[tuple[float, ...]] = field(default_factory=list)
    before: dict[int, ComplexArray] = field(default_factory=dict)
    after: dict[int, ComplexArray] = field(default_factory=dict)


_Block = _Turns | _Gates | None  # None: a barrier


def _changed(circuit: Circuit, device: Device, qubits: Sequence[int], change: Change) -> Circuit:
    blocks = list(_blocks(circuit))
    if change != "conjugate":
        blocks.reverse()
    for block in blocks:
        if isinstance(block, _Gates):
            _turn_round(block, circuit, device, change)
    _settle(blocks)
    builder = CircuitBuilder(circuit.n_qubits)
    for block in blocks:
        if block is None:
            builder.barrier()
        elif isinstance(block, _Gates):
            _add_turns(builder, device, block.before)
            _add_gates(builder, circuit, block)
            _add_turns(builder, device, block.after)
        elif block.first or block.last:
            _add_turns(builder, device, _merged(circuit, block, change))
        else:
            _add_layers(builder, circuit, block, change)
    return builder.build()


def _blocks(circuit: Circuit) -> Iterator[_Block]:
    """Barriers, stretches of one-qubit layers and single two-qubit layers, in order."""
    barrier = CODE["barrier"]
    refused = circuit.kind[~UNITARY[circuit.kind] & (circuit.kind != barrier)]
    if refused.size:
        raise InputError("circuit", f"a {KINDS[refused[0]].name}", "gates and barriers only, where it is turned round")
    width = np.where(circuit.kind == barrier, 0, N_QUBITS[circuit.kind])
    edges = [0, *(np.flatnonzero(np.diff(circuit.layer)) + 1).tolist(), len(circuit)]
    turns = _Turns()
    for start, stop in pairwise(edges):
        rows, wide = np.arange(start, stop), width[start:stop]
        widest = int(wide.max(initial=0))
        single = rows[wide == 1]
        if single.size:
            turns.layers.append(single)
        if widest != 1 and turns.layers:
            yield turns
            turns = _Turns()
        if widest == 2:
            gates = rows[wide == 2]
            yield _Gates(gates, frozenset(circuit.qubits[gates].ravel().tolist()))
        elif widest == 0 and rows.size:
            yield None
    if turns.layers:
        yield turns


def _turn_round(block: _Gates, circuit: Circuit, device: Device, change: Change) -> None:
    """Set the new parameters, and the one-qubit gates around each gate."""
    natives = {gate.name.replace("-", "_"): gate for gate in device.two_qubit}
    for row in block.rows.tolist():
        name = KINDS[circuit.kind[row]].name
        found = two_qubit_gate(name, circuit.row_parameters(row), change, natives.get(name))
        pair = circuit.qubits[row].tolist()
        block.parameters.append(found.parameters)
        block.before |= {pair[leg]: matrix for leg, matrix in found.before.items()}
        block.after |= {pair[leg]: matrix for leg, matrix in found.after.items()}


def _settle(blocks: list[_Block]) -> None:
    """Take the one-qubit gates around two-qubit gates into the next one-qubit layers of their qubits, over barriers."""
    for index, block in enumerate(blocks):
        if not isinstance(block, _Gates):
            continue
        for qubit in list(block.after):
            home = _nearest(blocks, range(index + 1, len(blocks)), qubit)
            if isinstance(home, _Turns):
                home.first[qubit] = block.after.pop(qubit)
            elif home is not None:
                home.before[qubit] = home.before.get(qubit, np.eye(2)) @ block.after.pop(qubit)
    for index, block in enumerate(blocks):
        if not isinstance(block, _Gates):
            continue
        for qubit in list(block.before):
            home = _nearest(blocks, range(index - 1, -1, -1), qubit)
            if isinstance(home, _Turns):
                home.last[qubit] = block.before.pop(qubit)


def _nearest(blocks: list[_Block], order: range, qubit: int) -> _Block:
    """The first block in that order which is a stretch of one-qubit layers, or holds a gate on the qubit."""
    for index in order:
        block = blocks[index]
        if isinstance(block, _Turns) or (block is not None and qubit in block.touches):
            return block
    return None


def _merged(circuit: Circuit, block: _Turns, change: Change) -> dict[int, ComplexArray]:
    """The whole one-qubit unitary of each qubit of a stretch: its changed rows with the gates added."""
    whole: dict[int, ComplexArray] = {}
    for rows in block.layers:
        for name, group in _by_kind(circuit, rows):
            matrices = KINDS[CODE[name]].matrices
            assert matrices is not None
            for qubit, matrix in zip(
                circuit.qubits[group, 0].tolist(), matrices(_parameters(circuit, group)), strict=True
            ):
                whole[qubit] = matrix @ whole[qubit] if qubit in whole else matrix
    out: dict[int, ComplexArray] = {}
    one = np.eye(2, dtype=np.complex128)
    for qubit in sorted({*whole, *block.first, *block.last}):
        old = changed_matrices(whole[qubit], change) if qubit in whole else one
        out[qubit] = block.last.get(qubit, one) @ old @ block.first.get(qubit, one)
    return out


def _add_turns(builder: CircuitBuilder, device: Device, turns: dict[int, ComplexArray]) -> None:
    if turns:
        native.add_one_qubit(builder, device.one_qubit, list(turns), np.array(list(turns.values())))


def _add_gates(builder: CircuitBuilder, circuit: Circuit, block: _Gates) -> None:
    new = dict(zip(block.rows.tolist(), block.parameters, strict=True))
    for name, group in _by_kind(circuit, block.rows):
        builder.add_rows(name, circuit.qubits[group], np.array([new[row] for row in group.tolist()]))
    builder.next_layer()


def _add_layers(builder: CircuitBuilder, circuit: Circuit, block: _Turns, change: Change) -> None:
    """The rows of a stretch one by one, virtual turns about Z gathered until the next pulse on their qubit."""
    waiting = np.zeros(circuit.n_qubits)
    for rows in block.layers if change == "conjugate" else reversed(block.layers):
        pulses: list[tuple[str, IntArray, FloatArray]] = []
        half: FloatArray | None = None
        for name, group in _by_kind(circuit, rows):
            parameters, where = _parameters(circuit, group), circuit.qubits[group, 0]
            about_z = z_angles(name, parameters, change)
            if about_z is not None:
                waiting[where] += about_z
                continue
            pulses.append((name, where, pulse_parameters(name, parameters, change)))
            if between_half_turns(name, change):
                half = np.zeros(circuit.n_qubits) if half is None else half
                half[where] = np.pi
        if pulses:
            pulsed = np.concatenate([where for _, where, _ in pulses])
            _add_waiting(builder, waiting if half is None else waiting + half, pulsed, waiting)
            for name, where, parameters in pulses:
                builder.add_rows(name, where, parameters)
            builder.next_layer()
            if half is not None:
                waiting += half
    _add_waiting(builder, waiting, np.arange(circuit.n_qubits), waiting)


def _add_waiting(builder: CircuitBuilder, angles: FloatArray, qubits: IntArray, waiting: FloatArray) -> None:
    """One layer of rz on those of the qubits that need it; they wait for nothing afterwards."""
    turned = angles[qubits]
    waiting[qubits] = 0
    if not turned.any():
        return
    turned = native.snap(turned)
    needed = turned != 0
    if needed.any():
        builder.add_rows("rz", qubits[needed], turned[needed, None])
        builder.next_layer()


def _by_kind(circuit: Circuit, rows: IntArray) -> Iterator[tuple[str, IntArray]]:
    """The rows by gate kind, in the order of the kinds."""
    kinds = circuit.kind[rows]
    if (kinds == kinds[0]).all():  # nearly every layer
        yield KINDS[kinds[0]].name, rows
        return
    for code in np.unique(kinds):
        yield KINDS[code].name, rows[kinds == code]


def _parameters(circuit: Circuit, rows: IntArray) -> FloatArray:
    """(m, k) parameters of rows of one kind."""
    count = KINDS[circuit.kind[rows[0]]].n_parameters
    return circuit.parameters[circuit.first[rows][:, None] + np.arange(count)] if count else np.empty((len(rows), 0))

"""Circuits put together: on other labels, one after the other, or side by side on different qubits."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.arrays import IntArray
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.gates import CODE, KINDS, N_QUBITS
from rcbench.device import Limits


def relabelled(circuit: Circuit, labels: Sequence[int] | IntArray, n_qubits: int) -> Circuit:
    """A circuit of gates and barriers on a register of n_qubits; its qubit j is labels[j]."""
    moved = np.append(np.asarray(labels), -1)[circuit.qubits].astype(circuit.qubits.dtype)  # -1, no qubit, stays -1
    return Circuit(n_qubits, circuit.layer, circuit.kind, moved, circuit.first, circuit.parameters)


def joined(circuits: Sequence[Circuit]) -> Circuit:
    """Circuits on the same qubits, one after the other; each starts in a layer of its own."""
    layer, first, layers, angles = [], [], 0, 0
    for circuit in circuits:
        layer.append(circuit.layer + layers)
        first.append(np.where(circuit.first >= 0, circuit.first + angles, -1))
        layers += int(circuit.layer[-1]) + 1 if len(circuit) else 0
        angles += len(circuit.parameters)
    arrays = (
        np.concatenate(layer).astype(np.int32),
        np.concatenate([circuit.kind for circuit in circuits]),
        np.concatenate([circuit.qubits for circuit in circuits]),
        np.concatenate(first).astype(np.int32),
        np.concatenate([circuit.parameters for circuit in circuits]),
    )
    for array in arrays:
        array.flags.writeable = False
    return Circuit(circuits[0].n_qubits, *arrays)


def add_layer(builder: CircuitBuilder, circuit: Circuit, rows: IntArray, labels: IntArray | None = None) -> None:
    """Add gates of one layer of another circuit to the current layer; labels: our label of each of its qubits."""
    for code in np.unique(circuit.kind[rows]):
        same = rows[circuit.kind[rows] == code]
        count = KINDS[code].n_parameters
        parameters = circuit.parameters[circuit.first[same][:, None] + np.arange(count)] if count else None
        qubits = circuit.qubits[same] if N_QUBITS[code] == 2 else circuit.qubits[same, 0]
        builder.add_rows(KINDS[code].name, qubits if labels is None else labels[qubits], parameters)


def side_by_side(parts: Sequence[tuple[Circuit, IntArray]], n_qubits: int, limits: Limits) -> Circuit:
    """Circuits on different qubits at the same time: block by block, layer by layer.

    One-qubit layers go first where only some of the circuits have them, so that the two-qubit layers meet. On a device
    that limits how many or which gates run at once the two-qubit layers follow each other instead.

    Args:
        parts: each circuit, gates and barriers only, with our label of each of its qubits.
    """
    together = limits.parallel_gates is None and not limits.exclusive
    builder = CircuitBuilder(n_qubits)
    blocks = [_blocks(circuit) for circuit, _ in parts]
    for index in range(max(len(layers) for layers in blocks)):
        if index:
            builder.barrier()
        queues = [
            (circuit, labels, list(layers[index]) if index < len(layers) else [])
            for (circuit, labels), layers in zip(parts, blocks, strict=True)
        ]
        while heads := [queue for queue in queues if queue[2]]:
            singles = [head for head in heads if not (N_QUBITS[head[0].kind[head[2][0]]] == 2).any()]
            for circuit, labels, queue in singles or heads:
                add_layer(builder, circuit, queue.pop(0), labels)
                if not singles and not together:
                    builder.next_layer()
            builder.next_layer()
    return builder.build()


def _blocks(circuit: Circuit) -> list[list[IntArray]]:
    """The rows of each layer, between barriers."""
    blocks: list[list[IntArray]] = [[]]
    cuts = np.flatnonzero(np.diff(circuit.layer)) + 1
    for rows in np.split(np.arange(len(circuit)), cuts):
        if len(rows) and circuit.kind[rows[0]] == CODE["barrier"]:
            blocks.append([])
        elif len(rows):
            blocks[-1].append(rows)
    return blocks

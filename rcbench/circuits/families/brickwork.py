"""Brickworks of the device's own gates, and of Haar and Clifford gates: fresh draws in every layer.

One-qubit layers stand between the two-qubit layers, before the first and after the last; without them (`none`) the
two-qubit layers stand alone, since Haar and Clifford gates end in one-qubit gates.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.circuits import native
from rcbench.circuits.cliffords import ORDER, decompose_cliffords
from rcbench.circuits.ensembles import LAYERS, haar_unitaries, one_qubit_layer
from rcbench.circuits.families.family import (
    RANDOM,
    Block,
    Blocks,
    Family,
    Fixed,
    Gates,
    Task,
    Turns,
    compiled,
    layered,
    native_for,
)
from rcbench.circuits.schedule import Layer
from rcbench.device import Device
from rcbench.errors import InputError

if TYPE_CHECKING:
    from rcbench.campaign import Experiment


def blocks(task: Task) -> Blocks:
    """One-qubit and two-qubit layers in turn."""
    circuits, schedule = task.experiment.circuits, task.schedule()
    name = circuits.one_qubit
    if name == "none" and not task.entangles:
        name = circuits.two_qubit  # the product of one-qubit gates of the same ensemble
    turns = None if name == "none" else one_qubit_layers(task, name)
    return interleaved(turns, _gates(task, schedule) if task.entangles else None, task.depth)


def interleaved(turns: FloatArray | None, gates: list[Gates] | None, depth: int) -> Blocks:
    """Blocks of (depth + 1, n, 3) one-qubit layers with two-qubit layers between, either of which may be lacking."""
    if turns is None:
        return Blocks(gates or [], range(depth + 1))
    out: list[Block] = [Turns(turns[0])]
    for layer in range(depth):
        out += [gates[layer], Turns(turns[layer + 1])] if gates is not None else [Turns(turns[layer + 1])]
    step = 1 if gates is None else 2
    return Blocks(out, range(1, step * depth + 2, step))


def one_qubit_layers(task: Task, name: str) -> FloatArray:
    """(depth + 1, n, 3) angles of the gate u of every one-qubit layer."""
    matrices, previous = [], None
    draw = task.draw("one-qubit")
    for _ in range(task.depth + 1):
        layer, previous = one_qubit_layer(name, task.n_qubits, draw, previous)
        matrices.append(layer)
    return native.euler_angles(np.array(matrices))


def _gates(task: Task, schedule: list[Layer]) -> list[Gates]:
    """The two-qubit layers; random gates are compiled all at once."""
    circuits, counts = task.experiment.circuits, [len(pairs) for pairs in schedule]
    if circuits.two_qubit not in RANDOM or not any(counts):
        return [Gates(pairs, Fixed(circuits.two_qubit, circuits.angle)) for pairs in schedule]
    draw = task.draw("two-qubit")
    # one draw a layer: the words that a layer takes must not depend on how many layers follow
    if circuits.two_qubit == "clifford":
        gate = native_for("clifford", task.device)
        return layered(
            schedule, decompose_cliffords(np.concatenate([draw.integers(ORDER, count) for count in counts]), gate)
        )
    return layered(schedule, compiled(task, np.concatenate([haar_unitaries(draw, count, 4) for count in counts])))


def check(experiment: Experiment, device: Device) -> None:
    """A native gate that the device has, with an angle where it takes any."""
    circuits = experiment.circuits
    if circuits.two_qubit in RANDOM:
        return
    gate = device.native(circuits.two_qubit)
    if circuits.two_qubit == "zz" and not gate.parameters and not gate.by_coupler and circuits.angle is None:
        raise InputError("angle", None, f"an angle for zz, since {device.name} offers any")


FAMILY = Family(
    about="layers of the device's schedule",
    one_qubit=("none", *LAYERS),
    plain="quarter-turns",
    blocks=blocks,
    check=check,
)

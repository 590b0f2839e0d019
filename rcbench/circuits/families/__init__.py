"""Circuit families: the random circuits of an experiment, compiled to the device's native gates.

    brickwork          one-qubit layers between two-qubit layers of the device's schedule
    kicked-ising       self-dual kicked Ising: the fastest entanglement there is, one kick a period
    dual-unitary       gates that are unitary in space too: everything moves at the speed of the light cone
    charge-conserving  Haar gates that keep the number of ones: charge diffuses
    matchgate          free fermions on a line: operators spread and do not scramble
    trotter            spin models in Trotter steps: depth means time
    product            control: the same one-qubit layers and no other gate: no spreading, and only one-qubit loss
    dimers             control: the same gates, count and duration, but every qubit keeps one fixed partner: the same
                       loss, no spreading

A module a family, a row each in MODELS; `family` holds what they share. The controls serve every family: they take the
gates of the experiment that they control. Rows of a brickwork of depth d, with a barrier between all blocks:

    one-qubit layer 0, two-qubit layer 1, one-qubit layer 1, two-qubit layer 2, ..., one-qubit layer d

Without one-qubit layers (`none`) the two-qubit layers stand alone: Haar and Clifford gates end in one-qubit gates. A
family that repeats has one start layer, and then in each period the two-qubit and one-qubit layers that its module
names. A block takes several native layers where its gates are compiled or may not all run at once. Qubits without a
coupler in a layer stay idle. Circuits have no measurement.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from rcbench.circuits.circuit import Circuit
from rcbench.circuits.families import brickwork, charge_conserving, dual_unitary, kicked_ising, matchgate, trotter
from rcbench.circuits.families.family import RANDOM, Blocks, Family, Period, Task, Value, native_for, served
from rcbench.circuits.gates import CODE
from rcbench.circuits.schedule import couplers_among, layers
from rcbench.device import Device
from rcbench.errors import InputError
from rcbench.randomness import Draw

if TYPE_CHECKING:  # the campaign asks this table for names and parameters
    from rcbench.campaign import Experiment

__all__ = [
    "ADOPTED", "CONTROLS", "FAMILIES", "MODELS", "RANDOM", "Family", "Period", "Task", "Value", "check",
    "draw_circuits", "family_of", "first_rows", "period", "served", "task", "time_of",
]  # fmt: skip

MODELS: dict[str, Family] = {
    "kicked-ising": kicked_ising.FAMILY,
    "dual-unitary": dual_unitary.FAMILY,
    "charge-conserving": charge_conserving.FAMILY,
    "matchgate": matchgate.FAMILY,
    "trotter": trotter.FAMILY,
}
CONTROLS = ("product", "dimers")  # the gates of another experiment, with no spreading
FAMILIES = ("brickwork", *CONTROLS, *MODELS)
ADOPTED = "adopted"  # circuits that were not drawn but imported, by `rcbench adopt`


def family_of(two_qubit: str) -> Family:
    """Whose gates they are: a family of MODELS has gates of its own name, all others belong to brickworks."""
    return MODELS.get(two_qubit, brickwork.FAMILY)


def draw_circuits(experiment: Experiment, device: Device, seed: int, instance: int) -> dict[int, Circuit]:
    """The circuits of one instance, by depth.

    Nested depths are cut from the deepest circuit: its first rows, up to the one-qubit layer after the last two-qubit
    layer, with the same parameters. Draws are made layer by layer, so a circuit does not depend on what deeper ones are
    asked for. The family is no part of the key: controls share the one-qubit layers and gates of their experiment when
    `same_circuits_as` names it.

    Args:
        experiment: family, depths and qubits.
        device: where the circuits run.
        seed: the campaign's seed.
        instance: number of the instance.
    Raises:
        InputError: qubits that are broken, unknown or not coupled, a gate that the device lacks, or a depth inside a
            period.
    """
    check(experiment, device)
    family = family_of(experiment.circuits.two_qubit)
    if not experiment.nested:
        made = {depth: task(experiment, device, seed, instance, depth) for depth in experiment.depths}
        return {depth: family.blocks(one).build(one) for depth, one in made.items()}
    deepest = task(experiment, device, seed, instance)
    blocks = family.blocks(deepest)
    circuit = blocks.build(deepest)
    return {depth: _prefix(circuit, blocks, depth) for depth in experiment.depths}


def task(experiment: Experiment, device: Device, seed: int, instance: int, depth: int | None = None) -> Task:
    """One circuit to make: the deepest one, or the one of a depth where depths are drawn apart."""
    apart = () if experiment.nested or depth is None else (depth,)

    def draw(purpose: str) -> Draw:
        return Draw(seed, experiment.circuit_source, instance, purpose, *apart)

    return Task(experiment, device, experiment.depths[-1] if depth is None else depth, draw)


def period(experiment: Experiment, device: Device) -> Period | None:
    """One period of circuits that repeat; None where every layer is drawn afresh.

    Raises:
        InputError: qubits that are broken or unknown, or an all-to-all device, where nothing repeats.
    """
    if experiment.circuits.family == ADOPTED:
        return None
    return family_of(experiment.circuits.two_qubit).period(experiment, device)


def time_of(experiment: Experiment, device: Device, depth: int) -> float | None:
    """The time that a depth stands for, in the unit of its period; None where circuits do not repeat."""
    one = period(experiment, device)
    return None if one is None else depth / one.layers * one.time


def check(experiment: Experiment, device: Device) -> None:
    """Refuse, by name, what the device cannot run.

    Raises:
        InputError: qubits that are broken, unknown or not coupled; a two-qubit gate that is neither native nor compiled
            to a native gate; an angle where none is taken, or none where one is needed; a depth inside a period.
    """
    circuits, qubits = experiment.circuits, experiment.qubits
    name, angle = circuits.two_qubit, circuits.angle
    if circuits.family == ADOPTED:
        raise InputError("family", ADOPTED, f"{', '.join(FAMILIES)}; adopted circuits come from `rcbench adopt` only")
    if angle is not None and name != "zz":
        raise InputError("angle", angle, f"no angle; only zz takes one, not {name}")
    couplers = couplers_among(device, qubits)
    repeats = period(experiment, device)
    if repeats is not None:
        repeats.check(experiment.depths)
    if circuits.family == "product":
        return
    layers(device, qubits, 1, Draw(0))  # refuses qubits with no coupler among them
    if not couplers and circuits.one_qubit == "none":
        raise InputError("one_qubit", "none", "a one-qubit layer, since a single qubit has no other gates")
    if name in RANDOM or name in MODELS:
        native_for(name, device)
    family_of(name).check(experiment, device)


def _prefix(circuit: Circuit, blocks: Blocks, depth: int) -> Circuit:
    """The blocks of one depth of a nested circuit."""
    count = blocks.counts[depth]
    assert count >= 0, "a depth inside a period"
    if count == len(blocks.blocks):
        return circuit
    barriers = np.flatnonzero(circuit.kind == CODE["barrier"])
    return first_rows(circuit, int(barriers[count - 1]) if count else 0)


def first_rows(circuit: Circuit, count: int) -> Circuit:
    """The first rows of a circuit, with their parameters; the arrays are views."""
    later = circuit.first[count:]
    later = later[later >= 0]
    stop = int(later[0]) if later.size else len(circuit.parameters)
    arrays = circuit.layer[:count], circuit.kind[:count], circuit.qubits[:count], circuit.first[:count]
    return Circuit(circuit.n_qubits, *arrays, circuit.parameters[:stop])

"""Circuit families: the random circuits of an experiment, compiled to the device's native gates.

    brickwork   one-qubit layers between two-qubit layers of the device's schedule
    product     the same one-qubit layers and no other gate: no spreading, and only one-qubit loss
    dimers      the same gates, count and duration, but every qubit keeps one fixed partner: the same loss, no spreading

Rows of a circuit of depth d, with a barrier between all blocks:

    one-qubit layer 0, two-qubit layer 1, one-qubit layer 1, two-qubit layer 2, ..., one-qubit layer d

Without one-qubit layers (`none`) the two-qubit layers stand alone: Haar and Clifford gates end in one-qubit gates.
A block takes several native layers where its gates are compiled or may not all run at once. Qubits without a coupler in
a layer stay idle. Circuits have no measurement.
"""

from __future__ import annotations

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.campaign import ADOPTED, FAMILIES, Experiment
from rcbench.circuits import compile as compiler
from rcbench.circuits import native
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.cliffords import ORDER, decompose_cliffords
from rcbench.circuits.ensembles import haar_unitaries, one_qubit_layer
from rcbench.circuits.gates import CODE
from rcbench.circuits.schedule import Layer, couplers_among, dimer_layers, layers
from rcbench.device import Device, NativeGate
from rcbench.errors import InputError
from rcbench.randomness import Draw

RANDOM = ("haar", "clifford")  # two-qubit ensembles; all other two-qubit gates are the native gates themselves


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
        InputError: qubits that are broken, unknown or not coupled, or a gate that the device lacks.
    """
    check(experiment, device)
    if experiment.nested:
        circuit = _build(experiment, device, experiment.depths[-1], (seed, instance))
        return {depth: _prefix(experiment, circuit, depth) for depth in experiment.depths}
    return {depth: _build(experiment, device, depth, (seed, instance, depth)) for depth in experiment.depths}


def served(device: Device) -> list[tuple[str, str]]:
    """The (two-qubit gate, native gate) pairs that the device can run, its own gates first.

    A random gate that several native gates serve is compiled to the one the device lists first.
    """
    pairs = [(gate.name, gate.name) for gate in device.two_qubit]
    return pairs + [(name, gate.name) for name in RANDOM for gate in device.two_qubit if _compiles(gate)]


def check(experiment: Experiment, device: Device) -> None:
    """Refuse, by name, what the device cannot run.

    Raises:
        InputError: qubits that are broken, unknown or not coupled; a two-qubit gate that is neither native nor compiled
            to a native gate; an angle where none is taken, or none where one is needed.
    """
    circuits, qubits = experiment.circuits, experiment.qubits
    name, angle = circuits.two_qubit, circuits.angle
    if circuits.family == ADOPTED:
        raise InputError("family", ADOPTED, f"{', '.join(FAMILIES)}; adopted circuits come from `rcbench adopt` only")
    if angle is not None and name != "zz":
        raise InputError("angle", angle, f"no angle; only zz takes one, not {name}")
    couplers = couplers_among(device, qubits)
    if circuits.family == "product":
        return
    layers(device, qubits, 1, Draw(0))  # refuses qubits with no coupler among them
    if not couplers and circuits.one_qubit == "none":
        raise InputError("one_qubit", "none", "a one-qubit layer, since a single qubit has no other gates")
    if name in RANDOM:
        _native_for(name, device)
        return
    gate = device.native(name)
    if name == "zz" and not gate.parameters and not gate.by_coupler and angle is None:
        raise InputError("angle", None, f"an angle for zz, since {device.name} offers any")


def _native_for(name: str, device: Device) -> NativeGate:
    """The native gate that a random two-qubit gate is compiled to."""
    for gate in device.two_qubit:
        if _compiles(gate):
            return gate
    listed = ", ".join(f"{one} on {two}" if one != two else one for one, two in served(device)) or "no two-qubit gate"
    raise InputError("two_qubit", name, f"what {device.name} serves: {listed}")


def _compiles(gate: NativeGate) -> bool:
    """True where every two-qubit unitary can be compiled to the native gate as the device has it."""
    if ("haar", gate.name) not in native.SERVED:
        return False
    try:
        compiler.decompose(np.eye(4, dtype=np.complex128)[None], gate.name, native.served_parameters(gate))
    except InputError:
        return False
    return True


def _build(experiment: Experiment, device: Device, depth: int, key: tuple[int, ...]) -> Circuit:
    """One circuit; key: seed, instance, and the depth where depths are drawn apart."""
    circuits, qubits = experiment.circuits, experiment.qubits

    def draw(purpose: str) -> Draw:
        return Draw(key[0], experiment.circuit_source, key[1], purpose, *key[2:])

    if circuits.family == "product":
        schedule: list[Layer] = [()] * depth
    else:
        schedule = (dimer_layers if circuits.family == "dimers" else layers)(device, qubits, depth, draw("schedule"))
    turns = _one_qubit_angles(experiment, depth, draw("one-qubit"))
    gates = _random_gates(experiment, device, schedule, draw("two-qubit"))
    builder = CircuitBuilder(len(qubits))
    start = 0
    for index, pairs in enumerate(schedule):
        if turns is not None:
            native.add_euler(builder, device.one_qubit, range(len(qubits)), turns[index])
            builder.barrier()
        if circuits.family == "product":
            continue
        if gates is None and pairs:
            compiler.add_native(builder, device, qubits, pairs, circuits.two_qubit, circuits.angle)
        elif gates is not None:
            stop = start + len(pairs)
            compiler.add_two_qubit(builder, device, qubits, pairs, gates[start:stop], gates.native)
            start = stop
        if turns is not None or index < depth - 1:
            builder.barrier()
    if turns is not None:
        native.add_euler(builder, device.one_qubit, range(len(qubits)), turns[depth])
    return builder.build()


def _one_qubit_angles(experiment: Experiment, depth: int, draw: Draw) -> FloatArray | None:
    """(depth + 1, n, 3) angles of the gate u of every one-qubit layer; None where there are none."""
    name = experiment.circuits.one_qubit
    if name == "none":
        if experiment.circuits.family != "product":
            return None
        name = experiment.circuits.two_qubit  # the product of one-qubit gates of the same ensemble
    matrices, previous = [], None
    for _ in range(depth + 1):
        layer, previous = one_qubit_layer(name, experiment.n_qubits, draw, previous)
        matrices.append(layer)
    return native.euler_angles(np.array(matrices))


def _random_gates(
    experiment: Experiment, device: Device, schedule: list[Layer], draw: Draw
) -> compiler.Decomposition | None:
    """All random two-qubit gates, compiled at once, layer after layer; None where the gates are the native ones."""
    name, counts = experiment.circuits.two_qubit, [len(pairs) for pairs in schedule]
    if name not in RANDOM or not any(counts):
        return None
    gate = _native_for(name, device)
    # one draw a layer: the words that a layer takes must not depend on how many layers follow
    if name == "clifford":
        return decompose_cliffords(np.concatenate([draw.integers(ORDER, count) for count in counts]), gate)
    unitaries = np.concatenate([haar_unitaries(draw, count, 4) for count in counts])
    return compiler.decompose(unitaries, gate.name, native.served_parameters(gate))


def _prefix(experiment: Experiment, circuit: Circuit, depth: int) -> Circuit:
    """The first `depth` two-qubit layers of a nested circuit and the one-qubit layer after them."""
    if depth == experiment.depths[-1]:
        return circuit
    barriers = np.flatnonzero(circuit.kind == CODE["barrier"])
    if experiment.circuits.family == "product":
        barrier = depth
    elif experiment.circuits.one_qubit == "none":
        barrier = depth - 1
    else:
        barrier = 2 * depth
    return first_rows(circuit, int(barriers[barrier]) if barrier >= 0 else 0)


def first_rows(circuit: Circuit, count: int) -> Circuit:
    """The first rows of a circuit, with their parameters; the arrays are views."""
    later = circuit.first[count:]
    later = later[later >= 0]
    stop = int(later[0]) if later.size else len(circuit.parameters)
    arrays = circuit.layer[:count], circuit.kind[:count], circuit.qubits[:count], circuit.first[:count]
    return Circuit(circuit.n_qubits, *arrays, circuit.parameters[:stop])

"""What a circuit family is: its parameters, what it needs of a device, and the blocks its circuits are made of.

A circuit is a row of blocks with a barrier between: one-qubit layers (`Turns`) and layers of two-qubit gates (`Gates`).
A family gives the blocks of its deepest circuit, and says how many of them each depth has; everything else is the same
for all families.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.circuits import compile as compiler
from rcbench.circuits import native
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.compile import Decomposition
from rcbench.circuits.ensembles import LAYERS, one_qubit_layer
from rcbench.circuits.gates import gate_matrices, gate_matrix
from rcbench.circuits.schedule import Layer, couplers_among, dimer_layers, layers, patterns
from rcbench.device import Device, NativeGate, Pair
from rcbench.errors import InputError, suggest
from rcbench.randomness import Draw

if TYPE_CHECKING:  # the campaign asks the families for their parameters
    from rcbench.campaign import Experiment

Value = float | int | str
RANDOM = ("haar", "clifford")  # two-qubit ensembles of a brickwork; its other two-qubit gates are the native gates
STARTS = ("none", "alternating", *LAYERS)  # one-qubit layers that a circuit may begin with


@dataclass(frozen=True, slots=True, kw_only=True)
class Parameter:
    """One number or word of a family, as [experiment.model] holds it.

    Args:
        key: its name. default: the value where it is left out.
        low, high: limits of a number, both allowed unless `above`: then it must be larger than low.
        choices: the values of a word or whole number; empty for a number.
    """

    key: str
    default: Value
    low: float = -1e6
    high: float = 1e6
    above: bool = False
    choices: tuple[Value, ...] = ()

    def checked(self, value: object) -> Value:
        """The value; InputError where it is not allowed."""
        if self.choices:
            for choice in self.choices:
                if type(value) is type(choice) and value == choice:
                    return choice
            names = [str(choice) for choice in self.choices]
            allowed = suggest(value, names) if isinstance(value, str) else ", ".join(names)
            raise InputError(self.key, value, allowed)
        number = isinstance(value, int | float) and not isinstance(value, bool)
        if not number or not (self.low <= value <= self.high) or (self.above and value == self.low):  # type: ignore[operator]
            lower = "above" if self.above else "from"
            raise InputError(self.key, value, f"a number {lower} {self.low:g} to {self.high:g}")
        return float(value)  # type: ignore[arg-type]


@dataclass(frozen=True, slots=True)
class Period:
    """One period of a circuit that repeats. name: of one; layers: of two-qubit gates; time: it takes, in `unit`."""

    name: str
    layers: int
    time: float
    unit: str

    def check(self, depths: Sequence[int]) -> None:
        """Refuse a depth that ends inside a period."""
        for depth in depths:
            if depth % self.layers:
                whole = depth - depth % self.layers
                near = f"{whole} and {whole + self.layers}"
                raise InputError("depths", depth, f"multiples of {self.layers}, the layers of one {self.name}: {near}")


@dataclass(frozen=True, slots=True)
class Task:
    """One circuit to make: its experiment and device, how deep, and draws by purpose."""

    experiment: Experiment
    device: Device
    depth: int
    draw: Callable[[str], Draw]

    @property
    def n_qubits(self) -> int:
        """Number of qubits."""
        return self.experiment.n_qubits

    @property
    def entangles(self) -> bool:
        """False for the product control."""
        return self.experiment.circuits.family != "product"

    def schedule(self) -> list[Layer]:
        """The pairs of each layer: those of the device, of the dimers, or none for the product control."""
        if not self.entangles:
            return [()] * self.depth
        chosen = dimer_layers if self.experiment.circuits.family == "dimers" else layers
        return chosen(self.device, self.experiment.qubits, self.depth, self.draw("schedule"))

    def patterns(self) -> list[Layer]:
        """The layers that hold every coupler once; for dimers as many, with as many pairs; empty for the product."""
        own = patterns(self.device, self.experiment.qubits)
        if not self.entangles:
            return [()] * len(own)
        if self.experiment.circuits.family != "dimers":
            return list(own)
        return dimer_layers(self.device, self.experiment.qubits, len(own), self.draw("schedule"))


@dataclass(frozen=True, slots=True)
class Turns:
    """A one-qubit layer: (n, 3) angles of the gate u of each qubit."""

    angles: FloatArray


@dataclass(frozen=True, slots=True)
class Fixed:
    """The device's own two-qubit gate on every pair, at an angle where it offers any."""

    name: str
    angle: float | None = None


@dataclass(frozen=True, slots=True)
class Gates:
    """A layer of two-qubit gates: one compiled unitary a pair, or the device's own gate on all."""

    pairs: Layer
    gate: Decomposition | Fixed


Block = Turns | Gates


@dataclass(frozen=True, slots=True)
class Blocks:
    """The blocks of a circuit, and how many of them each depth has, which may not be reached (-1)."""

    blocks: Sequence[Block]
    counts: Sequence[int]

    def build(self, task: Task) -> Circuit:
        """The circuit in native gates."""
        device, qubits = task.device, task.experiment.qubits
        builder = CircuitBuilder(len(qubits))
        for index, block in enumerate(self.blocks):
            if index:
                builder.barrier()
            if isinstance(block, Turns):
                native.add_euler(builder, device.one_qubit, range(len(qubits)), block.angles)
            elif not block.pairs:
                continue
            elif isinstance(block.gate, Fixed):
                compiler.add_native(builder, device, qubits, block.pairs, block.gate.name, block.gate.angle)
            else:
                compiler.add_two_qubit(builder, device, qubits, block.pairs, block.gate, block.gate.native)
        return builder.build()


def _no_check(experiment: Experiment, device: Device) -> None:
    """Nothing beyond what every family needs."""


def _no_period(experiment: Experiment, device: Device) -> Period | None:
    """Fresh draws in every layer: nothing repeats."""
    return None


@dataclass(frozen=True, slots=True, kw_only=True)
class Family:
    """One kind of circuits, a row of the table `families.MODELS`.

    Args:
        about: what its circuits are, in a few words for a report.
        one_qubit: allowed one-qubit layers, by name. plain: the one where none is given.
        blocks: makes the blocks of a circuit.
        parameters: of [experiment.model]; some depend on the values of others.
        check: refuses what the device or its couplings cannot run. period: of circuits that repeat.
    """

    about: str
    one_qubit: tuple[str, ...]
    plain: str
    blocks: Callable[[Task], Blocks]
    parameters: Callable[[Mapping[str, object]], tuple[Parameter, ...]] = field(default=lambda given: ())
    check: Callable[[Experiment, Device], None] = _no_check
    period: Callable[[Experiment, Device], Period | None] = _no_period

    def resolved(self, given: Mapping[str, object]) -> tuple[tuple[str, Value], ...]:
        """Every parameter with its value; InputError with the key of one that is unknown or out of range."""
        known = {parameter.key: parameter for parameter in self.parameters(given)}
        for key in given:
            if key not in known:
                raise InputError(key, given[key], suggest(key, known) if known else "no parameter: the family has none")
        return tuple(
            (key, parameter.checked(given[key]) if key in given else parameter.default)
            for key, parameter in known.items()
        )


def native_for(name: str, device: Device) -> NativeGate:
    """The native gate that a two-qubit unitary is compiled to, the first that serves; name: of the gates, for errors.

    Raises:
        InputError: no native gate serves every unitary.
    """
    for gate in device.two_qubit:
        if compiles(gate):
            return gate
    listed = ", ".join(f"{one} on {two}" if one != two else one for one, two in served(device)) or "no two-qubit gate"
    raise InputError("two_qubit", name, f"what {device.name} serves: {listed}")


def served(device: Device) -> list[tuple[str, str]]:
    """The (two-qubit gate, native gate) pairs that the device can run, its own gates first.

    A random gate that several native gates serve is compiled to the one the device lists first. Families with gates of
    their own run where `haar` is served.
    """
    pairs = [(gate.name, gate.name) for gate in device.two_qubit]
    return pairs + [(name, gate.name) for name in RANDOM for gate in device.two_qubit if compiles(gate)]


def compiles(gate: NativeGate) -> bool:
    """True where every two-qubit unitary can be compiled to the native gate as the device has it."""
    if ("haar", gate.name) not in native.SERVED:
        return False
    try:
        compiler.decompose(np.eye(4, dtype=np.complex128)[None], gate.name, native.served_parameters(gate))
    except InputError:
        return False
    return True


def compiled(task: Task, unitaries: ComplexArray) -> Decomposition:
    """(m, 4, 4) unitaries in the device's native gates."""
    gate = native_for(task.experiment.circuits.two_qubit, task.device)
    return compiler.decompose(unitaries, gate.name, native.served_parameters(gate))


def layered(schedule: Sequence[Layer], gates: Decomposition) -> list[Gates]:
    """Gates in the order of the schedule, a block a layer."""
    stops = np.cumsum([len(pairs) for pairs in schedule])
    return [
        Gates(pairs, gates[slice(int(stop) - len(pairs), int(stop))])
        for pairs, stop in zip(schedule, stops, strict=True)
    ]


def everywhere(pairs: Layer, gate: Decomposition | Fixed) -> Gates:
    """The same gate on every pair; gate: one decomposed unitary, or the device's own."""
    return Gates(pairs, gate if isinstance(gate, Fixed) else gate[np.zeros(len(pairs), dtype=np.int64)])


def zz_gate(task: Task, angle: float) -> Decomposition | Fixed:
    """exp(-i angle ZZ / 2): as the device's own zz where that has the angle, otherwise compiled."""
    for gate in task.device.two_qubit:
        if gate.name == "zz":
            own = [values for values in (gate.parameters, *gate.by_coupler.values()) if values]
            if not own:
                return Fixed("zz", angle)
            if all(np.allclose(values, angle, rtol=0, atol=native.ANGLE_TOLERANCE) for values in own):
                return Fixed("zz")
    exact = _one_diagonal(native_for(task.experiment.circuits.two_qubit, task.device), angle)
    return exact or compiled(task, gate_matrices("zz", np.array([[angle]])))


def _one_diagonal(gate: NativeGate, angle: float) -> Decomposition | None:
    """exp(-i angle ZZ / 2) as one diagonal native gate and virtual quarter turns about Z, where that is possible."""
    if gate.name not in ("cz", "zz"):
        return None
    wanted = np.diag(gate_matrix("zz", angle))
    own = np.diag(gate_matrix(gate.name, *native.served_parameters(gate)))
    for turn in np.array([0.0, 0.5, 1.0, -0.5]) * np.pi:
        made = own * np.exp(1j * turn * np.array([0, 1, 1, 2]))
        if abs(abs(np.vdot(wanted, made)) - 4) < native.SNAP:
            euler = np.zeros((1, compiler.MOST + 1, 2, 3))
            euler[0, 1, :, 1] = turn
            return Decomposition(gate.name, np.array([1]), euler, np.zeros((1, compiler.MOST)))
    return None


def start(task: Task) -> list[Turns]:
    """The one-qubit layer that a circuit begins with; none for `none`."""
    name = task.experiment.circuits.one_qubit
    if name == "none":
        return []
    if name == "alternating":
        flipped = np.zeros((task.n_qubits, 3))
        flipped[second_sublattice(task)] = native.euler_angles(gate_matrix("x")[None])
        return [Turns(flipped)]
    matrices, _ = one_qubit_layer(name, task.n_qubits, task.draw("one-qubit"))
    return [Turns(native.euler_angles(matrices))]


def second_sublattice(task: Task) -> IntArray:
    """Labels at an odd distance from the lowest label of their connected part: every second qubit of a line or grid."""
    found = distances(couplers_among(task.device, task.experiment.qubits))
    return np.array([label for label, steps in found.items() if steps % 2], dtype=np.int64)


def distances(couplers: Sequence[Pair]) -> dict[int, int]:
    """Steps from the lowest label of its connected part to each label that is coupled at all."""
    found: dict[int, int] = {}
    for root in sorted({label for pair in couplers for label in pair}):
        if root in found:
            continue
        found[root], edge = 0, [root]
        while edge:
            label = edge.pop(0)
            for pair in couplers:
                if label in pair:
                    other = pair[0] if pair[1] == label else pair[1]
                    if other not in found:
                        found[other] = found[label] + 1
                        edge.append(other)
    return found


def repeated(task: Task, first: Sequence[Block], period: Sequence[Block], period_layers: int) -> Blocks:
    """Whole periods after the first blocks; other depths are not reached."""
    blocks = [*first]
    counts = [-1] * (task.depth + 1)
    counts[0] = len(blocks)
    for depth in range(period_layers, task.depth + 1, period_layers):
        blocks += period
        counts[depth] = len(blocks)
    return Blocks(blocks, counts)

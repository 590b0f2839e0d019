"""The steps of one role written as the rows of one circuit, with the outcome that is certain tracked classically."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Any

import numpy as np

from rcbench.arrays import ComplexArray, IntArray
from rcbench.circuits import native
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.cliffords import CLIFFORD1
from rcbench.circuits.compile import add_two_qubit
from rcbench.circuits.ensembles import haar_unitaries
from rcbench.circuits.families import served
from rcbench.circuits.frames import randomised
from rcbench.circuits.joining import joined, relabelled, side_by_side
from rcbench.circuits.passage import FLIPS, LETTERS, PAULIS, unseen
from rcbench.device import Device
from rcbench.errors import InputError
from rcbench.protocol.language import (
    BASES,
    STATES,
    Apply,
    Measure,
    NamedDraw,
    Perturb,
    Prepare,
    Role,
    Rotate,
    Step,
)
from rcbench.protocol.placement import Placement
from rcbench.randomness import Draw

_CNOT = np.array([[1, 0, 0, 0], [0, 1, 0, 0], [0, 0, 0, 1], [0, 0, 1, 0]], dtype=np.complex128)
_BELL: ComplexArray = _CNOT @ np.kron(BASES["X"], np.eye(2))  # takes |00> to (|00> + |11>) / sqrt(2)
_EYE = np.eye(2, dtype=np.complex128)


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """Everything that one circuit of a role needs.

    Args:
        device, qubits: where it runs; qubits[j] is the device qubit of experiment qubit j.
        placement: registers and sites. draws: the protocol's, by name. role: what to write.
        values: the value of each loop.
        draw: words of a named draw with its scope; part tells apart several uses that must differ.
        circuit: the experiment's circuit on a register in one of the forms.
    """

    device: Device
    qubits: Sequence[int]
    placement: Placement
    draws: Mapping[str, NamedDraw]
    role: Role
    values: Mapping[str, str | int]
    draw: Callable[[str, str], Draw]
    circuit: Callable[[str, str], Circuit]


@dataclass(frozen=True, slots=True)
class Written:
    """A circuit with its measurement, the outcome that is certain or empty, and what the roster says about it."""

    circuit: Circuit
    target: str
    params: dict[str, Any]


def write_circuit(setting: Setting) -> Written:
    """Write the circuit of one setting of a role."""
    writer = _Writer(setting)
    for place, step in enumerate(setting.role.steps):
        writer.step(place, step)
    return writer.finish()


@dataclass(slots=True)
class _Writer:
    """Rows so far, and what is known of the state: the device holds (frame) |ideal>, frame a Pauli on each qubit.

    One-qubit gates of prepare and rotate wait until something else comes, so that gates that follow each other make one
    layer; under a frame F a gate G is written as F G F^-1, which leaves the frame as it is.
    """

    setting: Setting
    pieces: list[Circuit] = field(default_factory=list)
    builder: CircuitBuilder = field(init=False)
    frame: IntArray = field(init=False)
    bits: IntArray = field(init=False)
    waiting: dict[int, ComplexArray] = field(default_factory=dict)
    measured: list[int] = field(default_factory=list)
    params: dict[str, Any] = field(default_factory=dict)
    after_barrier: bool = True

    def __post_init__(self) -> None:
        n = len(self.setting.qubits)
        self.builder = CircuitBuilder(n)
        self.frame, self.bits = np.zeros(n, dtype=np.int64), np.zeros(n, dtype=np.int64)

    def step(self, place: int, step: Step) -> None:
        if isinstance(step, Prepare):
            self.prepare(step)
        elif isinstance(step, Rotate):
            self.rotate(step)
        elif isinstance(step, Apply):
            self.apply(place, step)
        elif isinstance(step, Perturb):
            self.perturb(step)
        else:
            self.measure(step)

    # steps

    def prepare(self, step: Prepare) -> None:
        for name in step.registers:
            labels = self.labels(name)
            if step.bell_with:
                self.pairs(zip(labels, self.labels(step.bell_with), strict=True), _BELL)
            elif step.draw and self.setting.draws[step.draw].kind == "bits":
                drawn = self.setting.draw(step.draw, "").integers(2, len(labels))
                self.params[step.draw] = "".join(str(bit) for bit in drawn)
                self.flip(labels, drawn)
            elif step.draw:
                self.wait(labels, self.layer(step.draw, len(labels)))
            else:
                self.prepare_state(labels, str(self.value(step.state)))

    def prepare_state(self, labels: Sequence[int], state: str) -> None:
        """A product state by name or bit pattern; the pattern is repeated until the register is full."""
        if state == "one" or not state.strip("01"):
            pattern = "1" if state == "one" else state
            self.flip(labels, np.array([int(pattern[index % len(pattern)]) for index in range(len(labels))]))
        elif state != "zero":
            self.wait(labels, np.broadcast_to(STATES[state], (len(labels), 2, 2)))

    def rotate(self, step: Rotate) -> None:
        for name in step.registers:
            labels = self.labels(name)
            if step.basis:
                gates = np.broadcast_to(BASES[str(self.value(step.basis))], (len(labels), 2, 2))
            else:
                gates = self.layer(step.draw, len(labels))
            self.wait(labels, _dagger(gates) if step.inverse else gates)

    def apply(self, place: int, step: Apply) -> None:
        circuits = []
        for name, form in zip(step.registers, step.forms, strict=True):
            circuit, labels = self.setting.circuit(name, form), np.array(self.labels(name))
            if step.pauli_layers:
                words = self.setting.draw(step.pauli_layers, f"step {place} {name}")
                untouched = self.setting.role.target != "prepared"
                circuit, left = randomised(
                    circuit, self.setting.device.one_qubit, self.frame[labels], words, corrected=untouched
                )
                self.frame[labels] = left
                blind = unseen(circuit)
                if blind:
                    self.params["unseen_errors"] = list(blind)
            circuits.append((circuit, labels))
        if not step.pauli_layers:
            self.undo_frame([label for _, labels in circuits for label in labels.tolist()])
        self.flush()
        self.append(circuits)
        self.barrier()

    def perturb(self, step: Perturb) -> None:
        pauli = str(self.value(step.pauli))
        sites = self.sites(step.at)
        gate = PAULIS[LETTERS.index(pauli)]
        if step.controlled_by:
            control = self.labels(step.controlled_by)[0]
            controlled = np.eye(4, dtype=np.complex128)
            controlled[2:, 2:] = gate
            for site in sites:
                self.pairs([(control, site)], controlled)
            return
        if step.angle is not None:
            gate = np.cos(step.angle / 2) * _EYE - 1j * np.sin(step.angle / 2) * gate
        self.flush()
        self.wait(sites, np.broadcast_to(gate, (len(sites), 2, 2)))
        self.flush()

    def measure(self, step: Measure) -> None:
        own = [label for name in step.registers for label in self.labels(name)]
        if not step.bell_with:
            self.measured += own
            return
        theirs = self.labels(step.bell_with)
        self.pairs(zip(own, theirs, strict=True), _BELL.conj().T)
        first = len(self.measured)
        self.measured += [*own, *theirs]
        pairs = [[first + index, first + len(own) + index] for index in range(len(own))]
        self.params.setdefault("bell_pairs", []).extend(pairs)

    def finish(self) -> Written:
        """The circuit, measured."""
        target = ""
        if self.setting.role.target == "prepared":
            outcome = self.bits ^ FLIPS[self.frame]
            target = "".join(str(outcome[label]) for label in self.measured)
        else:
            self.undo_frame(self.measured)
        self.flush()
        self.builder.measure(self.measured)
        declared = {key: self.filled(value) for key, value in self.setting.role.params.items()}
        self.pieces.append(self.builder.build())
        return Written(joined(self.pieces), target, self.params | declared)

    # what the steps are made of

    def labels(self, register: str) -> tuple[int, ...]:
        return self.setting.placement.registers[register]

    def value(self, text: str) -> str | int:
        """The value of a "$NAME"; the text itself where it is none."""
        return self.setting.values[text[1:]] if text.startswith("$") else text

    def sites(self, at: str) -> tuple[int, ...]:
        if at.startswith("$"):
            return (int(self.value(at)),)
        if at.startswith("sites."):
            return self.setting.placement.sites[at.removeprefix("sites.")]
        return self.labels(at)

    def filled(self, value: object) -> object:
        """A value of `params` with loops and sites filled in."""
        if isinstance(value, list):
            return [self.filled(item) for item in value]
        if isinstance(value, str) and value.startswith("sites."):
            return list(self.setting.placement.sites[value.removeprefix("sites.")])
        return self.value(value) if isinstance(value, str) else value

    def layer(self, name: str, count: int) -> ComplexArray:
        """(count, 2, 2) gates of a drawn layer; bases: from each basis to that of Z, their letters into the roster."""
        kind, words = self.setting.draws[name].kind, self.setting.draw(name, "")
        if kind == "haar-layer":
            return haar_unitaries(words, count, 2)
        if kind == "clifford-layer":
            return CLIFFORD1[words.integers(len(CLIFFORD1), count)]
        if kind == "pauli-layer":
            return PAULIS[words.integers(4, count)]
        letters = ["XYZ"[index] for index in words.integers(3, count)]
        self.params[name] = "".join(letters)
        return np.stack([BASES[letter] for letter in letters])

    def flip(self, labels: Sequence[int], bits: IntArray) -> None:
        """Prepare bits of qubits that are in |0>."""
        turned = [label for label, bit in zip(labels, bits, strict=True) if bit]
        self.bits[turned] ^= 1
        self.wait(turned, np.broadcast_to(PAULIS[1], (len(turned), 2, 2)))

    def wait(self, labels: Sequence[int], gates: ComplexArray) -> None:
        """One-qubit gates that may be merged with what waits already."""
        for label, gate in zip(labels, gates, strict=True):
            pauli = PAULIS[self.frame[label]]
            self.waiting[label] = pauli @ gate @ pauli @ self.waiting.get(label, _EYE)

    def undo_frame(self, labels: Sequence[int]) -> None:
        """Undo the frame of qubits, where the next step needs the ideal state itself."""
        turned = [label for label in labels if self.frame[label]]
        for label in turned:
            self.waiting[label] = PAULIS[self.frame[label]] @ self.waiting.get(label, _EYE)
        self.frame[turned] = 0

    def flush(self) -> None:
        """Write the gates that wait, as one native one-qubit layer with a barrier after it."""
        labels = sorted(self.waiting)
        angles = native.euler_angles(np.array([self.waiting[label] for label in labels]).reshape(-1, 2, 2))
        self.waiting.clear()
        if angles.any():
            native.add_euler(self.builder, self.setting.device.one_qubit, labels, angles)
            self.after_barrier = False
            self.barrier()

    def barrier(self) -> None:
        """A barrier, unless one was just written or nothing stands before it."""
        if not self.after_barrier:
            self.builder.barrier()
            self.after_barrier = True

    def append(self, circuits: Sequence[tuple[Circuit, IntArray]]) -> None:
        """Circuits on registers, side by side where there are several."""
        n = len(self.setting.qubits)
        alone = len(circuits) == 1
        added = relabelled(*circuits[0], n) if alone else side_by_side(circuits, n, self.setting.device.limits)
        self.pieces += [self.builder.build(), added]
        self.builder = CircuitBuilder(n)
        self.after_barrier = self.after_barrier and not len(added)

    def pairs(self, pairs: Any, gate: ComplexArray) -> None:
        """The same two-qubit gate on pairs of qubits, in native gates, under the frames that they carry."""
        listed = [(int(a), int(b)) for a, b in pairs]
        self.flush()
        frames = [np.kron(PAULIS[self.frame[a]], PAULIS[self.frame[b]]) for a, b in listed]
        gates = np.stack([frame @ gate @ frame for frame in frames])
        add_two_qubit(
            self.builder, self.setting.device, self.setting.qubits, listed, gates, entangler(self.setting.device)
        )
        self.after_barrier = False
        self.barrier()


@lru_cache(maxsize=64)
def _entangler(served_pairs: tuple[tuple[str, str], ...], device_name: str) -> str:
    natives = [native_name for logical, native_name in served_pairs if logical == "haar"]
    if not natives:
        allowed = "a native gate that two-qubit unitaries can be compiled to, for Bell pairs and controlled Paulis"
        raise InputError("two_qubit", ", ".join(sorted({name for _, name in served_pairs})) or "none", allowed)
    return next((name for name in natives if name in ("cz", "zz")), natives[0])


def entangler(device: Device) -> str:
    """The native gate that Bell pairs and controlled Paulis are made of; one that makes a CZ alone, if there is."""
    return _entangler(tuple(served(device)), device.name)


def _dagger(gates: ComplexArray) -> ComplexArray:
    return gates.conj().swapaxes(-1, -2)

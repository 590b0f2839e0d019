"""All circuits of an experiment, planned first and written lazily."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from itertools import product
from typing import Any

from rcbench.campaign import ADOPTED, Campaign, Experiment
from rcbench.circuits import transform
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.families import check, draw_circuits, period
from rcbench.errors import InputError
from rcbench.protocol.language import Protocol, Role
from rcbench.protocol.placement import Placement, place
from rcbench.protocol.writing import Setting, Written, write_circuit
from rcbench.randomness import Draw
from rcbench.regions import write_setting

_FORMS: dict[str, Callable[..., Circuit]] = {
    "inverse": transform.inverse,
    "conjugate": transform.conjugate,
    "transpose": transform.transpose,
}


@dataclass(frozen=True, slots=True, kw_only=True)
class PlannedCircuit:
    """One circuit of an experiment, with its measurement.

    Args:
        circuit_id: unique in the campaign, safe as a file name.
        role, depth, instance, repeat: which one it is.
        setting: label of the values of its loops, as ``site=5;pauli=X``; empty where the role has none.
        circuit: rows in native gates on the experiment's qubits.
        target: the outcome that is certain for an ideal device, bit 0 first; empty where there is none.
        params: what the estimators need to know.
    """

    circuit_id: str
    role: str
    depth: int
    instance: int
    setting: str
    repeat: int
    circuit: Circuit
    target: str
    params: Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class Slot:
    """A circuit before it is written. number: of the setting in the role; values: of the loops."""

    role: Role
    instance: int
    depth: int
    number: int
    values: Mapping[str, str | int]

    @property
    def setting(self) -> str:
        """Label of the loop values."""
        return write_setting(self.values)


def circuit_id(experiment: Experiment, slot: Slot, repeat: int = 0) -> str:
    """The name of a circuit: experiment, role, instance, depth, then setting and repeat where there are several."""
    name = f"{experiment.name}-{slot.role.name}-i{slot.instance:03d}-d{slot.depth:03d}"
    if slot.values:
        name += f"-s{slot.number:03d}"
    return f"{name}-r{repeat}" if repeat else name


def plan(protocol: Protocol, experiment: Experiment, placement: Placement, instance: int) -> Iterator[Slot]:
    """The circuits of one instance, not yet written: depth by depth, role by role, setting by setting.

    Roles for every batch have one circuit a setting, which stands with instance 0 and depth 0.
    """
    if instance == 0:
        for role in protocol.roles:
            if role.every_batch:
                yield from _settings(role, experiment, placement, 0, 0)
    for depth in experiment.depths:
        for role in protocol.roles:
            if not role.every_batch:
                yield from _settings(role, experiment, placement, instance, depth)


def _settings(role: Role, experiment: Experiment, placement: Placement, instance: int, depth: int) -> Iterator[Slot]:
    lists: list[tuple[str | int, ...]] = []
    for loop in role.for_each:
        if loop.values == "settings":
            lists.append(tuple(range(experiment.settings)))
        elif isinstance(loop.values, str):
            lists.append(placement.sites[loop.values.removeprefix("sites.")])
        else:
            lists.append(loop.values)
    names = [loop.name for loop in role.for_each]
    for number, values in enumerate(product(*lists)):
        yield Slot(role, instance, depth, number, dict(zip(names, values, strict=True)))


@dataclass(slots=True)
class Expander:
    """Writes the circuits of one experiment; what the circuits of an instance share is made once.

    Raises:
        InputError: registers that the device cannot host, or a protocol that only serves adopted circuits.
    """

    protocol: Protocol
    experiment: Experiment
    campaign: Campaign
    placement: Placement = field(init=False)
    _instance: int = -1
    _drawn: dict[int, Circuit] = field(default_factory=dict)
    _turned: dict[tuple[int, str, str], Circuit] = field(default_factory=dict)

    def __post_init__(self) -> None:
        name, experiment = self.protocol.name, self.experiment
        if experiment.circuits.family == ADOPTED or any(role.target == "given" for role in self.protocol.roles):
            key, found = ("family", ADOPTED) if experiment.circuits.family == ADOPTED else ("protocol", name)
            raise InputError(
                key, found, "what circuits can be drawn for; this one serves adopted circuits", self._where
            )
        self.placement = place(self.protocol, experiment, self.campaign.device)
        if self.protocol.circuit_register is not None:
            try:
                check(self._alone, self.campaign.device)
            except InputError as error:
                raise error.at(self._where) from None

    @property
    def _alone(self) -> Experiment:
        """The experiment on the first register that hosts its circuits."""
        first = self.protocol.circuit_register
        assert first is not None
        return replace(self.experiment, qubits=self._device_qubits(first.name), sites={}, regions=())

    @property
    def _where(self) -> str:
        return f"experiment {self.experiment.name!r}: "

    def slots(self, instance: int) -> Iterator[Slot]:
        """The circuits of an instance."""
        return plan(self.protocol, self.experiment, self.placement, instance)

    def write(self, slot: Slot) -> Written:
        """The circuit of a slot; InputError names the experiment and what its device lacks."""
        try:
            return self._write(slot)
        except InputError as error:
            raise error.at(self._where) from None

    def _write(self, slot: Slot) -> Written:
        if slot.instance != self._instance:
            self._instance = slot.instance
            self._drawn, self._turned = {}, {}
        written = write_circuit(
            Setting(
                device=self.campaign.device,
                qubits=self.experiment.qubits,
                placement=self.placement,
                draws=self.protocol.draws,
                role=slot.role,
                values=slot.values,
                draw=lambda name, part: self._draw(slot, name, part),
                circuit=lambda register, form: self._circuit(slot, register, form),
            )
        )
        return replace(written, params=written.params | self._time(slot))

    def _time(self, slot: Slot) -> dict[str, Any]:
        """What the roster says of circuits that repeat: layers a period, and the time that the depth stands for."""
        if self.protocol.circuit_register is None or slot.role.every_batch:
            return {}
        one = period(self._alone, self.campaign.device)
        if one is None:
            return {}
        time = round(slot.depth / one.layers * one.time, 12)
        return {"period_layers": one.layers, "time": time, "time_unit": one.unit}

    def _draw(self, slot: Slot, name: str, part: str) -> Draw:
        key: list[str | int] = [f"draw {name}"]
        for scope in self.protocol.draws[name].fresh:
            value = slot.role.name if scope == "role" else slot.depth if scope == "depth" else slot.values[scope]
            key += [scope, value]
        if part:
            key += [part]
        return Draw(self.campaign.seed, self.experiment.circuit_source, slot.instance, *key)

    def _circuit(self, slot: Slot, register: str, form: str) -> Circuit:
        key = (slot.depth, register, form)
        if key not in self._turned:
            drawn = self._draw_instance()[slot.depth]
            own = self._device_qubits(register)
            self._check_alike(drawn, register)
            change = _FORMS.get(form)
            self._turned[key] = drawn if change is None else change(drawn, self.campaign.device, own)
        return self._turned[key]

    def _draw_instance(self) -> dict[int, Circuit]:
        """The experiment's circuits on the first register that hosts them."""
        if not self._drawn:
            self._drawn = draw_circuits(self._alone, self.campaign.device, self.campaign.seed, self._instance)
        return self._drawn

    def _device_qubits(self, register: str) -> tuple[int, ...]:
        return tuple(self.experiment.qubits[label] for label in self.placement.registers[register])

    def _check_alike(self, circuit: Circuit, register: str) -> None:
        """A further register can run the same circuit only where its couplers have the same angles."""
        first = self.protocol.circuit_register
        assert first is not None
        if register == first.name:
            return
        one, two = self._device_qubits(first.name), self._device_qubits(register)
        at = dict(zip(one, two, strict=True))
        for gate in self.campaign.device.two_qubit:
            for a, b in self.campaign.device.couplers:
                if a in at and b in at and gate.at((a, b)) != gate.at((at[a], at[b])):
                    found = f"{gate.name} {gate.at((a, b))} on {a}-{b}, {gate.at((at[a], at[b]))} on {at[a]}-{at[b]}"
                    raise InputError(f"registers.{register}", found, "the same angles on corresponding couplers")


def expand(protocol: Protocol, experiment: Experiment, campaign: Campaign) -> Iterator[PlannedCircuit]:
    """The circuits of an experiment one by one, instance by instance, repeats after their circuit.

    Raises:
        InputError: registers that the device cannot host, gates that it lacks or cannot reverse.
    """
    expander = Expander(protocol, experiment, campaign)
    for instance in range(experiment.instances):
        for slot in expander.slots(instance):
            written = expander.write(slot)
            for repeat in range(experiment.repeats):
                yield PlannedCircuit(
                    circuit_id=circuit_id(experiment, slot, repeat),
                    role=slot.role.name,
                    depth=slot.depth,
                    instance=slot.instance,
                    setting=slot.setting,
                    repeat=repeat,
                    circuit=written.circuit,
                    target=written.target,
                    params=written.params,
                )

"""Where adopted circuits stand: their qubits on the device, and their experiments in the kit's campaign."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np

from rcbench.adopt.reading import MOST_ERRORS, Adopted
from rcbench.campaign import ADOPTED, Campaign, Circuits, Experiment, Margin
from rcbench.circuits.gates import N_QUBITS
from rcbench.device import Device
from rcbench.errors import InputError, raise_all
from rcbench.protocol import load_protocol
from rcbench.signatures.registry import signature

MAX_QUBITS = 200  # across all circuits of one folder; far more than a state vector can hold


def on_device(found: Sequence[Adopted], device: Device | None) -> tuple[dict[str, tuple[int, ...]], Device]:
    """The device qubits of each circuit, and the device; one that states nothing where there is none.

    Without a device, programs that call a qubit by the same name mean the same qubit.
    """
    if device is None:
        names = sorted({(q, one.program.qubits[q]) for one in found for q in one.qubits})
        labels = list(dict.fromkeys(name for _, name in names))
        if len(labels) > MAX_QUBITS:
            raise InputError("qubits", f"{len(labels)} over all circuits", f"at most {MAX_QUBITS}")
        place = {name: number for number, name in enumerate(labels)}
        stated_nothing = Device(
            name="not stated",
            n_qubits=len(labels),
            layout="all-to-all",
            couplers=tuple(combinations(range(len(labels)), 2)),
            physical=tuple(labels),
        )
        return {
            one.circuit_id: tuple(place[one.program.qubits[q]] for q in one.qubits) for one in found
        }, stated_nothing
    errors: list[InputError] = []
    where: dict[str, tuple[int, ...]] = {}
    for one in found:
        try:
            where[one.circuit_id] = tuple(_device_qubit(one, qubit, device) for qubit in one.qubits)
            _check_couplers(one, where[one.circuit_id], device)
        except InputError as error:
            errors.append(error.at(f"{one.circuit_id}: "))
    raise_all(errors[:MOST_ERRORS])
    return where, device


def _device_qubit(one: Adopted, qubit: int, device: Device) -> int:
    name = one.program.qubits[qubit]
    label = name.removeprefix("$")
    number = qubit
    if name.startswith("$"):
        number = device.physical.index(label) if label in device.physical else int(label[:9])
    if number not in device.working_qubits:
        raise InputError("qubit", name, f"working qubits of {device.name}")
    return number


def _check_couplers(one: Adopted, qubits: Sequence[int], device: Device) -> None:
    couplers = set(device.couplers)
    for pair in np.unique(one.circuit.qubits[N_QUBITS[one.circuit.kind] == 2], axis=0).tolist():
        a, b = sorted(qubits[qubit] for qubit in pair)
        if (a, b) not in couplers:
            names = " and ".join(one.program.qubits[one.qubits[qubit]] for qubit in pair)
            raise InputError("coupler", names, f"qubits that {device.name} couples; {a} and {b} are not coupled")


@dataclass(frozen=True, slots=True)
class Place:
    """Where a circuit stands: its experiment and its running number at its depth."""

    experiment: Experiment
    instance: int


def make_campaign(
    found: Sequence[Adopted],
    where: Mapping[str, tuple[int, ...]],
    device: Device,
    protocol: str,
    margin: float | None,
    shots: int,
) -> tuple[Campaign, dict[str, Place]]:
    """The campaign that the kit's other files refer to, and the place of each circuit in it."""
    groups: dict[tuple[int, ...], list[Adopted]] = defaultdict(list)
    for one in found:
        groups[where[one.circuit_id]].append(one)
    keys = [key for key in load_protocol(protocol).signature_keys if signature(key).axis != "prediction only"]
    margins = {}
    if margin is not None:
        margins = {key: Margin(value=margin, relative=signature(key).margin_relative) for key in keys}
    experiments: list[Experiment] = []
    places: dict[str, Place] = {}
    names: set[str] = set()
    for qubits, members in groups.items():
        instance: dict[int, int] = defaultdict(int)
        numbers = {}
        for one in members:
            numbers[one.circuit_id] = instance[one.depth]
            instance[one.depth] += 1
        experiment = Experiment(
            name=_name(len(groups), len(qubits), names),
            protocol=protocol,
            circuits=Circuits(family=ADOPTED),
            depths=tuple(sorted(instance)),
            instances=max(instance.values()),
            shots=shots,
            qubits=qubits,
            nested=False,
            margins=margins,
        )
        experiments.append(experiment)
        places |= {circuit_id: Place(experiment, number) for circuit_id, number in numbers.items()}
    version = "qasm3" if any(one.program.version == 3 for one in found) else "qasm2"
    campaign = Campaign(
        title="Adopted circuits", seed=0, device=device, experiments=tuple(experiments), circuit_format=version
    )
    return campaign, places


def _name(groups: int, n_qubits: int, taken: set[str]) -> str:
    name = ADOPTED if groups == 1 else f"{ADOPTED}-{n_qubits}q"
    number = 1
    while name in taken:
        number += 1
        name = f"{ADOPTED}-{n_qubits}q-{number}"
    taken.add(name)
    return name

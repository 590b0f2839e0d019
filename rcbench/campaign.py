"""The campaign as typed objects: what to run, on which device, and the rule fixed before the data came.

`load_campaign` reads a campaign file; `dump_campaign` writes the resolved one, every default filled in.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from rcbench.circuits.families import ADOPTED as ADOPTED
from rcbench.circuits.families import CONTROLS, FAMILIES, MODELS, family_of
from rcbench.circuits.families.family import Family, Value
from rcbench.device import Device
from rcbench.device_file import device_table, read_device
from rcbench.errors import InputError, InputErrors, raise_all, suggest
from rcbench.regions import read_regions, write_regions
from rcbench.signatures.registry import signature
from rcbench.tomlfile import Section, read_toml

TWO_QUBIT = ("haar", "clifford", "cz", "iswap", "sqrt-iswap", "fsim", "zz")
ONE_QUBIT = ("none", "haar", "quarter-turns", "azimuth", "clifford")
REFERENCES = ("ideal", "noise-model")
CIRCUIT_FORMATS = ("qasm3", "qasm2", "cirq-json")
RULE = "equivalence of paired differences"
MAX_DEPTH = 10_000
_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9_.-]{0,59}")


@dataclass(frozen=True, slots=True, kw_only=True)
class Circuits:
    """The circuit family of an experiment.

    family: brickwork (layers of the device's schedule), one of families.MODELS, product (no entangling gate, the same
    one-qubit layers) or dimers (the same two-qubit gates, count and duration, but every qubit keeps one fixed partner).
    ADOPTED stands for imported circuits, of which the other fields say nothing.
    two_qubit: one of TWO_QUBIT; the family's own name where it is one of MODELS, also in its controls.
    one_qubit: the layer before each two-qubit layer and after the last, one of ONE_QUBIT; `none` only with haar or
    clifford two-qubit gates, which hold one-qubit gates of their own. Most MODELS have it once, at the start.
    model: parameters of a family of MODELS by key; what is left out is filled in.
    """

    family: str = "brickwork"
    two_qubit: str = ""
    one_qubit: str = ""
    angle: float | None = None  # zz only, where the device offers any angle
    model: tuple[tuple[str, Value], ...] = ()

    def __post_init__(self) -> None:
        if self.family not in (*FAMILIES, ADOPTED):
            raise InputError("family", self.family, suggest(self.family, (*FAMILIES, ADOPTED)))
        if not self.two_qubit:
            object.__setattr__(self, "two_qubit", self.family if self.family in MODELS else "cz")
        self._check_two_qubit()
        family = family_of(self.two_qubit)
        if not self.one_qubit:
            object.__setattr__(self, "one_qubit", family.plain)
        if self.one_qubit not in family.one_qubit:
            raise InputError("one_qubit", self.one_qubit, suggest(self.one_qubit, family.one_qubit))
        object.__setattr__(self, "model", family.resolved(dict(self.model)))
        if self.two_qubit in MODELS:
            return
        if self.one_qubit == "none" and self.two_qubit not in ("haar", "clifford"):
            raise InputError("one_qubit", "none", "none only with two_qubit haar or clifford; else a one-qubit layer")

    def _check_two_qubit(self) -> None:
        if self.two_qubit not in (*TWO_QUBIT, *MODELS):
            raise InputError("two_qubit", self.two_qubit, suggest(self.two_qubit, TWO_QUBIT))
        if self.family in MODELS and self.two_qubit != self.family:
            raise InputError("two_qubit", self.two_qubit, f"no other gates than those of {self.family}; leave it out")
        if self.two_qubit in MODELS and self.family not in (self.two_qubit, *CONTROLS):
            raise InputError("two_qubit", self.two_qubit, f"{', '.join(TWO_QUBIT)}, in a {self.family}")

    @property
    def parameters(self) -> dict[str, Value]:
        """The parameters of the model by key."""
        return dict(self.model)

    @property
    def gates(self) -> str:
        """The gate set in one word, as the roster holds it."""
        return "imported" if self.family == ADOPTED else f"{self.two_qubit}+{self.one_qubit}"


@dataclass(frozen=True, slots=True, kw_only=True)
class Margin:
    """How far a signature may lie from its prediction and still agree; relative to the prediction if so said."""

    value: float
    relative: bool = False

    def __post_init__(self) -> None:
        if not 0 < self.value <= 1e6:
            raise InputError("margin", self.value, "a number above 0, at most 1e6")


@dataclass(frozen=True, slots=True, kw_only=True)
class Experiment:
    """One experiment of a campaign.

    Args:
        name: unique in the campaign; letters, digits, '-', '_' and '.'.
        protocol: name of a shipped protocol or path of a file; None to predict `signatures` only.
        signatures: keys to predict without a protocol.
        circuits: the circuit family.
        depths: layers of logical two-qubit gates, one way, rising.
        instances: random circuits. shots: per circuit. repeats: times each circuit is run.
        settings: random settings of each circuit, for protocols that have them.
        qubits: device qubits in the order of the experiment's own labels 0, 1, ...
        patch: name of the device patch they came from, or empty.
        nested: the circuit of depth d is the first d layers of the deepest one.
        same_circuits_as: name of the experiment whose circuit draws are used, itself by default.
        control_for: name of the experiment that this one is the control of, or empty.
        against: the prediction the finding tests, one of REFERENCES.
        margins: by signature key.
        sites: named lists of experiment qubits for the protocol, as `butterfly` and `probe`.
        regions: regions of experiment qubits for predict-only signatures.
    """

    name: str
    protocol: str | None = None
    signatures: tuple[str, ...] = ()
    circuits: Circuits = field(default_factory=Circuits)
    depths: tuple[int, ...]
    instances: int
    shots: int = 1000
    repeats: int = 1
    settings: int = 1
    qubits: tuple[int, ...]
    patch: str = ""
    nested: bool = True
    same_circuits_as: str = ""
    control_for: str = ""
    against: str = "noise-model"
    margins: Mapping[str, Margin] = field(default_factory=dict)
    sites: Mapping[str, tuple[int, ...]] = field(default_factory=dict)
    regions: tuple[tuple[int, ...], ...] = ()

    def __post_init__(self) -> None:
        if not self.depths or any(b <= a for a, b in zip((-1, *self.depths), self.depths, strict=False)):
            raise InputError("depths", self.depths, "whole numbers from 0 up, each larger than the last")
        if self.depths[-1] > MAX_DEPTH:
            raise InputError("depths", self.depths[-1], f"at most {MAX_DEPTH} layers")
        for key in ("instances", "shots", "repeats", "settings"):
            if getattr(self, key) < 1:
                raise InputError(key, getattr(self, key), "a whole number, 1 or more")
        if self.against not in REFERENCES:
            raise InputError("against", self.against, suggest(self.against, REFERENCES))
        n = len(self.qubits)
        for name, sites in self.sites.items():
            for site in sites:
                if not 0 <= site < n:
                    raise InputError(f"sites.{name}", site, f"qubits of the experiment, 0 to {n - 1}")
        for region in self.regions:
            if not region or len(set(region)) != len(region) or not all(0 <= q < n for q in region):
                raise InputError("regions", region, f"different qubits of the experiment, 0 to {n - 1}")

    @property
    def n_qubits(self) -> int:
        """Number of qubits of the experiment."""
        return len(self.qubits)

    @property
    def circuit_source(self) -> str:
        """The name that keys the circuit draws."""
        return self.same_circuits_as or self.name


@dataclass(frozen=True, slots=True, kw_only=True)
class Campaign:
    """A whole campaign. confidence: level of every interval and of the equivalence test's 1 - alpha."""

    title: str
    seed: int
    device: Device
    experiments: tuple[Experiment, ...]
    confidence: float = 0.95
    circuit_format: str = "qasm3"
    rule: str = RULE

    def __post_init__(self) -> None:
        if not 0.5 <= self.confidence < 1:
            raise InputError("confidence", self.confidence, "a level from 0.5 up to 1")
        if self.circuit_format not in CIRCUIT_FORMATS:
            raise InputError("circuit_format", self.circuit_format, suggest(self.circuit_format, CIRCUIT_FORMATS))

    def experiment(self, name: str) -> Experiment:
        """An experiment by name."""
        for experiment in self.experiments:
            if experiment.name == name:
                return experiment
        raise InputError("experiment", name, suggest(name, [e.name for e in self.experiments]))


def load_campaign(path: Path | str) -> Campaign:
    """Read and check a campaign file; protocols given as paths are taken relative to it.

    Raises:
        InputError: every error of the file at once, each with file, line, key, what was found and what is allowed.
    """
    path = Path(path)
    file = read_toml(path)
    errors: list[InputError] = []
    top = Section(file, (), file.data, errors)
    head, device_section = top.section("campaign"), top.section("device")
    if head is None:
        top.error("campaign", "nothing", "a table [campaign] with title and seed")
    device = read_device(device_section) if device_section is not None else None
    if device_section is None:
        top.error("device", "nothing", "a table [device]")
    facts: dict[str, Any] = {}
    if head is not None:
        facts = {
            "title": head.text("title"),
            "seed": head.whole("seed", low=0),
            "confidence": head.number("confidence", 0.95),
            "circuit_format": head.choice("circuit_format", CIRCUIT_FORMATS, "qasm3"),
            "rule": head.choice("rule", [RULE], RULE),
        }
        head.close()
    sections = top.sections("experiment")
    if not sections:
        top.error("experiment", "nothing", "one or more tables [[experiment]]")
    top.close()
    experiments: list[Experiment] = []
    broken: list[object] = []
    if device is not None:
        for section in sections:
            if section.data.get("same_circuits_as") in broken:  # its own errors say it; what would follow is noise
                broken.append(section.data.get("name"))
                continue
            experiment = _read_experiment(section, device, experiments, path.parent)
            if experiment is not None:
                experiments.append(experiment)
            else:
                broken.append(section.data.get("name"))
    if not errors:
        _check_links(sections, experiments)
    raise_all(errors)
    assert device is not None
    try:
        return Campaign(device=device, experiments=tuple(experiments), **facts)
    except InputError as error:
        raise error.at(file.where("campaign", error.key)) from None


def load_device(path: Path | str) -> Device:
    """The device of a file that holds a [device] table and nothing else that matters."""
    file = read_toml(Path(path))
    errors: list[InputError] = []
    section = Section(file, (), file.data, errors).section("device")
    if section is None:
        raise InputError("device", "nothing", "a table [device]", f"{file.name}:1: ")
    device = read_device(section)
    raise_all(errors)
    assert device is not None
    return device


def _read_experiment(section: Section, device: Device, before: list[Experiment], folder: Path) -> Experiment | None:
    """One [[experiment]]; what it leaves out it takes from the experiment whose circuits it shares."""
    errors_before = len(section.errors)
    name = section.text("name")
    if isinstance(name, str) and not _NAME.fullmatch(name):
        section.error("name", name, "letters, digits, '-', '_' and '.', at most 60")
    if name in [experiment.name for experiment in before]:
        section.error("name", name, "a name that no other experiment has")
    source_name = section.text("same_circuits_as", "")
    source = next((experiment for experiment in before if experiment.name == source_name), None)
    if source_name and source is None:
        section.error(
            "same_circuits_as", source_name, suggest(source_name, [e.name for e in before]) or "an earlier one"
        )
    qubits, patch = _read_qubits(section, device, source)
    protocol, signatures = section.text("protocol", None), section.texts("signatures", ())
    if (protocol is None) == (not signatures):
        section.error("protocol", protocol, "either a protocol, or a list of signatures to predict only")
    circuits = _read_circuits(section, source.circuits if source else None, device)
    like = {"depths": source.depths, "instances": source.instances} if source else {}
    facts: dict[str, Any] = {
        "name": name,
        "depths": section.wholes("depths", like.get("depths", ...)),
        "instances": section.whole("instances", like.get("instances", ...), low=1, high=1_000_000),
        "shots": section.whole("shots", source.shots if source else 1000, low=1),
        "repeats": section.whole("repeats", 1, low=1, high=10_000),
        "settings": section.whole("settings", 1, low=1, high=1_000_000),
        "nested": section.flag("nested", source.nested if source else True),
        "against": section.choice("against", REFERENCES, "noise-model" if device.errors else "ideal"),
        "control_for": section.text("control_for", ""),
        "same_circuits_as": source_name,
        "sites": _read_sites(section),
        "regions": _read_regions(section, len(qubits)),
    }
    stated = _read_margins(section)
    section.close()
    if protocol is not None:
        facts["protocol"], keys = _find_protocol(section, protocol, folder)
        # a margin of adopted circuits is always the user's own: what they are for is not known
        adopted = circuits is not None and circuits.family == ADOPTED
        facts["margins"] = {key: _default_margin(key) for key in keys if not _no_margin(key) and not adopted} | stated
    else:
        facts["signatures"], facts["margins"] = signatures, stated
        for key in signatures:
            try:
                signature(key)
            except InputError as error:
                section.error("signatures", key, error.allowed)
    if len(section.errors) > errors_before or circuits is None:
        return None
    if facts["against"] == "noise-model" and device.errors is None and circuits.family != ADOPTED:
        section.error("against", "noise-model", "ideal, since the device states no errors")
    try:
        return Experiment(circuits=circuits, qubits=qubits, patch=patch, **facts)
    except InputError as error:
        section.catch(error)
        return None


def _default_margin(key: str) -> Margin:
    row = signature(key)
    return Margin(value=row.margin, relative=row.margin_relative)


def _no_margin(key: str) -> bool:
    return signature(key).axis == "prediction only"


def _find_protocol(section: Section, protocol: str, folder: Path) -> tuple[str, tuple[str, ...]]:
    """A shipped protocol's name, or the path of a file beside the campaign; with the signatures it measures."""
    from rcbench.protocol import load_protocol

    local = folder / protocol
    found = str(local) if protocol.endswith(".toml") else protocol
    try:
        return found, load_protocol(found).signature_keys
    except InputError as error:
        if error.where and not isinstance(error, InputErrors):
            section.errors.append(error)
        elif isinstance(error, InputErrors):
            section.errors.extend(error.errors)
        else:
            section.error("protocol", protocol, error.allowed)
        return found, ()


def _read_qubits(section: Section, device: Device, source: Experiment | None) -> tuple[tuple[int, ...], str]:
    patch = section.text("patch", "")
    qubits = section.wholes("qubits", ())
    if patch and qubits:
        section.error("patch", patch, "either patch or qubits, not both")
    if patch:
        if patch not in device.patches:
            section.error("patch", patch, suggest(patch, device.patches) or "no patch: the device names none")
        return device.patches.get(patch, ()), patch
    if qubits:
        working = set(device.working_qubits)
        for qubit in qubits:
            if qubit not in working:
                section.error("qubits", qubit, f"working qubits of the device, 0 to {device.n_qubits - 1}")
        if len(set(qubits)) != len(qubits):
            section.error("qubits", list(qubits), "each qubit once")
        return qubits, ""
    return (source.qubits, source.patch) if source else (device.working_qubits, "")


def _read_circuits(section: Section, like: Circuits | None, device: Device) -> Circuits | None:
    default = like or Circuits()
    family = section.choice("family", (*FAMILIES, ADOPTED), default.family)
    gates = family if family in MODELS else default.two_qubit
    facts: dict[str, Any] = {
        "family": family,
        "two_qubit": section.choice("two_qubit", (*TWO_QUBIT, *MODELS), gates),
        "angle": section.number("angle", default.angle),
    }
    if family == ADOPTED:
        return Circuits(family=ADOPTED)
    row = family_of(facts["two_qubit"])
    same = like is not None and like.two_qubit == facts["two_qubit"]
    plain = "none" if facts["two_qubit"] in ("haar", "clifford") else row.plain
    start = like.one_qubit if like is not None and like.one_qubit in row.one_qubit else plain
    facts["one_qubit"] = section.choice("one_qubit", row.one_qubit, start)
    facts["model"] = _read_model(section, row, like.parameters if like is not None and same else {})
    if facts["model"] is None:
        return None
    if facts["two_qubit"] not in ("haar", "clifford", *MODELS):
        try:
            device.native(facts["two_qubit"])
        except InputError as error:
            section.error("two_qubit", facts["two_qubit"], error.allowed)
    try:
        return Circuits(**facts)
    except InputError as error:
        section.catch(error)
        return None


def _read_model(section: Section, row: Family, like: dict[str, Value]) -> tuple[tuple[str, Value], ...] | None:
    """The parameters of a family from [experiment.model], each error at its own line; None where there are some."""
    table = section.section("model")
    if table is None:
        return tuple(like.items()) if not section.has("model") else None
    given: dict[str, object] = like | {key: table.raw(key) for key in table.data}
    known = {parameter.key: parameter for parameter in row.parameters(given)}
    errors_before = len(section.errors)
    for key in table.data:
        try:
            if key not in known:
                names = suggest(key, known) if known else "no key: only families with parameters have a model"
                raise InputError(key, given[key], names)
            known[key].checked(given[key])
        except InputError as error:
            table.error(key, error.found, error.allowed)
    if len(section.errors) > errors_before:
        return None
    return row.resolved({key: value for key, value in given.items() if key in known})


def _read_sites(section: Section) -> dict[str, tuple[int, ...]]:
    table = section.section("sites")
    return {} if table is None else {name: table.wholes(name, ()) for name in table.data}


def _read_regions(section: Section, n_qubits: int) -> tuple[tuple[int, ...], ...]:
    """Regions as labels, or by name: quarters, halves, cuts."""
    from rcbench.signatures.tmi import NAMED

    out: list[tuple[int, ...]] = []
    for label in section.texts("regions", ()):
        try:
            out += NAMED[label](n_qubits) if label in NAMED else read_regions(label)
        except InputError as error:
            section.error("regions", label, error.allowed)
    return tuple(out)


def _read_margins(section: Section) -> dict[str, Margin]:
    """Margins by signature: a number, or { relative = 0.1 } or { absolute = 0.05 }."""
    table = section.section("margins")
    out: dict[str, Margin] = {}
    for key in table.data if table is not None else ():
        assert table is not None
        try:
            signature(key)
        except InputError as error:
            table.error(key, table.raw(key), error.allowed)
            continue
        inner = table.section(key) if isinstance(table.data[key], dict) else None
        try:
            if inner is not None and inner.has("relative"):
                value, relative = inner.number("relative"), True
            else:
                value, relative = (inner.number("absolute") if inner is not None else table.number(key)), False
            if value is not None:
                out[key] = Margin(value=value, relative=relative)
        except InputError as error:
            table.error(key, error.found, error.allowed)
        if inner is not None:
            inner.close()
    return out


def _check_links(sections: list[Section], experiments: list[Experiment]) -> None:
    """Experiments that share circuits or stand as controls must fit each other."""
    by_name = {experiment.name: experiment for experiment in experiments}
    for section, experiment in zip(sections, experiments, strict=True):
        if experiment.control_for and experiment.control_for not in by_name:
            section.error("control_for", experiment.control_for, suggest(experiment.control_for, by_name))
        source = by_name.get(experiment.same_circuits_as)
        if source is None:
            continue
        for key in ("qubits", "nested"):
            if getattr(experiment, key) != getattr(source, key):
                section.error(
                    "same_circuits_as", source.name, f"an experiment with the same {key}, {getattr(experiment, key)}"
                )
        same_gates = experiment.circuits.gates == source.circuits.gates
        if not same_gates:
            section.error("same_circuits_as", source.name, f"an experiment with gates {experiment.circuits.gates}")
        elif experiment.circuits.model != source.circuits.model:
            model = ", ".join(f"{key} = {value}" for key, value in experiment.circuits.model)
            section.error("same_circuits_as", source.name, f"an experiment with the same model, {model}")


def dump_campaign(campaign: Campaign) -> str:
    """The resolved campaign as TOML; `load_campaign` reads the same campaign from it."""
    import tomli_w

    data: dict[str, Any] = {
        "campaign": {
            "title": campaign.title,
            "seed": campaign.seed,
            "confidence": campaign.confidence,
            "circuit_format": campaign.circuit_format,
            "rule": campaign.rule,
        },
        "device": device_table(campaign.device),
        "experiment": [_experiment_table(experiment) for experiment in campaign.experiments],
    }
    return tomli_w.dumps(data)


def _experiment_table(experiment: Experiment) -> dict[str, Any]:
    table: dict[str, Any] = {"name": experiment.name}
    if experiment.protocol is not None:
        table["protocol"] = experiment.protocol
    else:
        table["signatures"] = list(experiment.signatures)
    circuits = experiment.circuits
    table["family"] = circuits.family
    if circuits.family != ADOPTED:
        table |= {"two_qubit": circuits.two_qubit, "one_qubit": circuits.one_qubit}
    if circuits.angle is not None:
        table["angle"] = circuits.angle
    model = circuits.parameters
    table |= {
        "depths": list(experiment.depths),
        "instances": experiment.instances,
        "shots": experiment.shots,
        "repeats": experiment.repeats,
        "settings": experiment.settings,
        "nested": experiment.nested,
        "against": experiment.against,
    }
    table |= {"patch": experiment.patch} if experiment.patch else {"qubits": list(experiment.qubits)}
    for key in ("same_circuits_as", "control_for"):
        if getattr(experiment, key):
            table[key] = getattr(experiment, key)
    if experiment.regions:
        table["regions"] = [write_regions(region) for region in experiment.regions]
    table["sites"] = {name: list(sites) for name, sites in experiment.sites.items()}
    if model:
        table["model"] = model
    table["margins"] = {
        key: {"relative": margin.value} if margin.relative else margin.value
        for key, margin in experiment.margins.items()
    }
    return table

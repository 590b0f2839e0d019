"""The campaign as typed objects: what to run, on which device, and the rule fixed before the data came.

`load_campaign` reads a campaign file; `dump_campaign` writes the resolved one, every default filled in.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from rcbench.device import Device
from rcbench.errors import InputError, suggest

FAMILIES = ("brickwork", "product", "dimers")
TWO_QUBIT = ("haar", "clifford", "cz", "iswap", "sqrt-iswap", "fsim", "zz")
ONE_QUBIT = ("none", "haar", "quarter-turns", "azimuth", "clifford")
REFERENCES = ("ideal", "noise-model")
CIRCUIT_FORMATS = ("qasm3", "qasm2", "cirq-json")


@dataclass(frozen=True, slots=True, kw_only=True)
class Circuits:
    """The circuit family of an experiment.

    family: brickwork (layers of the device's schedule), product (no entangling gate, the same one-qubit layers) or
    dimers (the same two-qubit gates, count and duration, but every qubit keeps one fixed partner).
    two_qubit: one of TWO_QUBIT. one_qubit: the layer before each two-qubit layer and after the last, one of
    ONE_QUBIT; `none` only with haar or clifford two-qubit gates, which hold one-qubit gates of their own.
    """

    family: str = "brickwork"
    two_qubit: str = "cz"
    one_qubit: str = "quarter-turns"
    angle: float | None = None  # zz only, where the device offers any angle

    def __post_init__(self) -> None:
        for key, value, allowed in (
            ("family", self.family, FAMILIES),
            ("two_qubit", self.two_qubit, TWO_QUBIT),
            ("one_qubit", self.one_qubit, ONE_QUBIT),
        ):
            if value not in allowed:
                raise InputError(key, value, suggest(value, allowed))
        if self.one_qubit == "none" and self.two_qubit not in ("haar", "clifford"):
            raise InputError("one_qubit", "none", "none only with two_qubit haar or clifford; else a one-qubit layer")

    @property
    def gates(self) -> str:
        """The gate set in one word, as the roster holds it."""
        return f"{self.two_qubit}+{self.one_qubit}"


@dataclass(frozen=True, slots=True, kw_only=True)
class Margin:
    """How far a signature may lie from its prediction and still agree; relative to the prediction if so said."""

    value: float
    relative: bool = False

    def __post_init__(self) -> None:
        if not 0 < self.value < float("inf"):
            raise InputError("margin", self.value, "a number above 0")


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
        for key, value in (("instances", self.instances), ("shots", self.shots), ("repeats", self.repeats)):
            if value < 1:
                raise InputError(key, value, "a whole number, 1 or more")
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
    rule: str = "equivalence of paired differences"

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

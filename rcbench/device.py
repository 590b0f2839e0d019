"""The device under test: couplings, native gates, timings, limits and the stated error budget."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from rcbench.errors import InputError, suggest

Pair = tuple[int, int]
LAYOUTS = ("line", "ring", "grid", "edges", "all-to-all")
RATE_KINDS = ("pauli", "average-infidelity", "depolarising")
RATE_CONDITIONS = ("isolated", "simultaneous", "not stated")
NATIVE_TWO_QUBIT = ("cz", "iswap", "sqrt-iswap", "fsim", "zz")
# u: any rotation in one gate; r+rz: equatorial rotations and virtual Z; sx+rz: quarter turns about X and virtual Z
NATIVE_ONE_QUBIT = ("u", "r+rz", "sx+rz")


@dataclass(frozen=True, slots=True, kw_only=True)
class Rate:
    """One stated error rate, the same everywhere or one a place.

    Args:
        default: the rate where no other is given.
        values: rates by place: a qubit as (q,), a coupler as (a, b) with a < b.
        kind: what the number means, one of RATE_KINDS (conversions: `engine.noise.pauli_probability`).
        measured: one of RATE_CONDITIONS.
        uncertainty: relative standard uncertainty, common to all places.
        date: when it was measured, ISO 8601; empty where not stated.
    """

    default: float
    values: Mapping[tuple[int, ...], float] = field(default_factory=dict)
    kind: str = "average-infidelity"
    measured: str = "not stated"
    uncertainty: float = 0.0
    date: str = ""

    def __post_init__(self) -> None:
        if self.kind not in RATE_KINDS:
            raise InputError("kind", self.kind, suggest(self.kind, RATE_KINDS))
        if self.measured not in RATE_CONDITIONS:
            raise InputError("measured", self.measured, suggest(self.measured, RATE_CONDITIONS))
        for value in (self.default, *self.values.values()):
            if not 0 <= value < 0.75:
                raise InputError("rate", value, "a number from 0 up to 0.75")
        if not 0 <= self.uncertainty < 1:
            raise InputError("uncertainty", self.uncertainty, "a relative standard uncertainty from 0 up to 1")

    def at(self, *place: int) -> float:
        """The rate of one qubit or one coupler."""
        return self.values.get(tuple(sorted(place)), self.default)


@dataclass(frozen=True, slots=True, kw_only=True)
class Times:
    """T1 and T2 in microseconds, by qubit where they differ."""

    t1: float
    t2: float
    t1_values: Mapping[int, float] = field(default_factory=dict)
    t2_values: Mapping[int, float] = field(default_factory=dict)
    uncertainty: float = 0.0
    date: str = ""

    def at(self, qubit: int) -> tuple[float, float]:
        """(T1, T2) of a qubit in microseconds."""
        return self.t1_values.get(qubit, self.t1), self.t2_values.get(qubit, self.t2)


@dataclass(frozen=True, slots=True, kw_only=True)
class ErrorBudget:
    """Everything the device team states about its errors; what is None is not stated and not modelled.

    readout_0to1 is p(1|0), the probability to read 1 from a qubit in |0>; readout_1to0 is p(0|1).
    """

    one_qubit: Rate | None = None
    two_qubit: Rate | None = None
    readout_0to1: Rate | None = None
    readout_1to0: Rate | None = None
    idle: Times | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Timings:
    """Durations in nanoseconds. overhead: between two shots; job: for each job sent."""

    one_qubit: float = 30.0
    two_qubit: float = 60.0
    measure: float = 1000.0
    reset: float = 1000.0
    overhead: float = 0.0
    job: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Limits:
    """What a device takes at once; None where there is no limit.

    exclusive: sets of couplers of which only one may run at a time.
    """

    shots_per_circuit: int | None = None
    circuits_per_job: int | None = None
    parallel_gates: int | None = None
    exclusive: tuple[tuple[Pair, ...], ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class NativeGate:
    """One native two-qubit gate.

    Args:
        name: one of NATIVE_TWO_QUBIT.
        parameters: fsim (theta, phi) or zz (angle,) in radians; empty for the others, and for zz of any angle.
        by_coupler: calibrated parameters of single couplers (a, b), a < b.
        negative: true where the device also offers the gate with all its angles negated.
    """

    name: str
    parameters: tuple[float, ...] = ()
    by_coupler: Mapping[Pair, tuple[float, ...]] = field(default_factory=dict)
    negative: bool = False

    def at(self, pair: Pair) -> tuple[float, ...]:
        """The parameters on one coupler."""
        return self.by_coupler.get((min(pair), max(pair)), self.parameters)


@dataclass(frozen=True, slots=True, kw_only=True)
class Device:
    """A device. Qubits are 0 to n_qubits - 1, with the device's own labels in `physical`.

    couplers holds every working coupler (a, b), a < b, broken ones and those of broken qubits left out; for
    all-to-all every pair of working qubits.
    """

    name: str
    n_qubits: int
    layout: Literal["line", "ring", "grid", "edges", "all-to-all"]
    couplers: tuple[Pair, ...]
    rows: int = 0
    columns: int = 0
    broken_qubits: tuple[int, ...] = ()
    broken_couplers: tuple[Pair, ...] = ()
    physical: tuple[str, ...] = ()
    patches: Mapping[str, tuple[int, ...]] = field(default_factory=dict)
    one_qubit: str = "u"
    two_qubit: tuple[NativeGate, ...] = ()
    timings: Timings = field(default_factory=Timings)
    limits: Limits = field(default_factory=Limits)
    errors: ErrorBudget | None = None
    invented: bool = False

    @property
    def working_qubits(self) -> tuple[int, ...]:
        """The qubits that are not broken, in order."""
        return tuple(qubit for qubit in range(self.n_qubits) if qubit not in self.broken_qubits)

    def native(self, name: str) -> NativeGate:
        """The native two-qubit gate of that name; refused by name where the device lacks it."""
        for gate in self.two_qubit:
            if gate.name == name:
                return gate
        raise InputError(
            "two_qubit", name, suggest(name, [gate.name for gate in self.two_qubit]) + f" (native to {self.name})"
        )

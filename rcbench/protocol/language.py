"""The words of a protocol file as typed objects: registers, draws, roles, steps, and what is measured."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from rcbench.arrays import ComplexArray

FORMS = ("U", "inverse", "conjugate", "transpose")
PAULI_NAMES = ("X", "Y", "Z")
DRAW_KINDS = ("pauli-layer", "clifford-layer", "haar-layer", "bases", "bits")
LAYER_KINDS = DRAW_KINDS[:4]  # what `rotate` can apply
SCOPES = ("role", "depth")
TARGETS = ("prepared", "given")
FITS = ("decay-fit",)  # estimators that work over all depths at once, in the comparison
_H = 0.5**0.5
STATES: Mapping[str, ComplexArray] = {  # a gate that prepares each state from |0>
    "zero": np.eye(2, dtype=np.complex128),
    "one": np.array([[0, 1], [1, 0]], dtype=np.complex128),
    "plus": np.array([[_H, _H], [_H, -_H]], dtype=np.complex128),
    "minus": np.array([[_H, _H], [-_H, _H]], dtype=np.complex128),
    "plus-i": np.array([[_H, 1j * _H], [1j * _H, _H]], dtype=np.complex128),
    "minus-i": np.array([[_H, -1j * _H], [-1j * _H, _H]], dtype=np.complex128),
}
BASES: Mapping[str, ComplexArray] = {  # a gate that takes the basis of each Pauli to that of Z
    "X": np.array([[_H, _H], [_H, -_H]], dtype=np.complex128),
    "Y": np.array([[_H, -1j * _H], [-1j * _H, _H]], dtype=np.complex128),
    "Z": np.eye(2, dtype=np.complex128),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class SiteList:
    """A list of sites that an experiment gives: where they must lie, and what holds where it gives none.

    default: experiment qubits, `all` for the whole register, or None where the experiment must give the list.
    """

    name: str
    register: str
    default: str | tuple[int, ...] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Register:
    """A named group of qubits; one of take, join and part_of says which.

    Args:
        take: `all`, `share`, `rest`, a number of qubits, or `sites.NAME`: what it takes of the experiment's qubits.
        join: registers that it consists of, in this order.
        part_of: the register that it is a part of: the sites named in `sites`, or those that correspond to `same_as`.
        coupling: what it needs of the device: `circuit`, `pairwise with NAME`, `every with NAME`.
    """

    name: str
    take: str | int | None = None
    join: tuple[str, ...] = ()
    part_of: str = ""
    sites: str = ""
    same_as: str = ""
    coupling: tuple[str, ...] = ()

    @property
    def hosts_circuit(self) -> bool:
        """Whether the experiment's circuit runs on it."""
        return "circuit" in self.coupling


@dataclass(frozen=True, slots=True, kw_only=True)
class NamedDraw:
    """A random ingredient. fresh: `role`, `depth` or names of loops for which it is drawn anew; else it is shared."""

    name: str
    kind: str
    fresh: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Prepare:
    """A state of registers: by name or bit pattern, by a draw, or Bell pairs with the qubits of another register."""

    registers: tuple[str, ...]
    state: str = "zero"
    draw: str = ""
    bell_with: str = ""


@dataclass(frozen=True, slots=True)
class Apply:
    """The experiment's circuit on registers, each in its own form, side by side where there are several."""

    registers: tuple[str, ...]
    forms: tuple[str, ...]
    pauli_layers: str = ""


@dataclass(frozen=True, slots=True)
class Perturb:
    """A Pauli, or a rotation exp(-i angle P / 2) where an angle is given, at every site of `at`."""

    pauli: str
    at: str
    angle: float | None = None
    controlled_by: str = ""


@dataclass(frozen=True, slots=True)
class Rotate:
    """One-qubit gates on registers: those of a draw, or the change from the basis of a Pauli to that of Z."""

    registers: tuple[str, ...]
    draw: str = ""
    basis: str = ""
    inverse: bool = False


@dataclass(frozen=True, slots=True)
class Measure:
    """Measure registers in the computational basis, or one in Bell pairs with another."""

    registers: tuple[str, ...]
    bell_with: str = ""


Step = Prepare | Apply | Perturb | Rotate | Measure


@dataclass(frozen=True, slots=True)
class Loop:
    """A name that a role runs over. values: `settings`, `sites.NAME`, or the values themselves."""

    name: str
    values: str | tuple[str | int, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Role:
    """One kind of circuit of a protocol.

    Args:
        name: letters, digits, '-' and '_'.
        for_each: loops, the first the slowest; each value makes a circuit, a setting.
        steps: what the circuit does, in order.
        target: `prepared` where the steps undo themselves, so that one outcome is certain; `given` where it comes with
            adopted circuits; empty where there is none.
        params: what the roster says about each circuit, `$NAME` and `sites.NAME` filled in.
        every_batch: one circuit a setting, without instances and depths, that runs again in every batch.
    """

    name: str
    for_each: tuple[Loop, ...] = ()
    steps: tuple[Step, ...]
    target: str = ""
    params: Mapping[str, object] = field(default_factory=dict)
    every_batch: bool = False


@dataclass(frozen=True, slots=True)
class MeasuredSignature:
    """A signature that the protocol measures, and the estimator that does it."""

    signature: str
    estimator: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Protocol:
    """A protocol file as an object. template: its example campaign, TOML text; text: the whole file."""

    name: str
    title: str
    summary: str = ""
    sites: Mapping[str, SiteList] = field(default_factory=dict)
    registers: Mapping[str, Register]
    draws: Mapping[str, NamedDraw] = field(default_factory=dict)
    roles: tuple[Role, ...]
    results: tuple[MeasuredSignature, ...]
    template: str = ""
    text: str = ""

    @property
    def measured(self) -> tuple[str, ...]:
        """The signatures it measures, as registry keys."""
        return tuple(row.signature for row in self.results)

    @property
    def signature_keys(self) -> tuple[str, ...]:
        """The same as `measured`."""
        return self.measured

    @property
    def estimators(self) -> tuple[str, ...]:
        """The estimators that it needs at single depths, each once."""
        return tuple(dict.fromkeys(row.estimator for row in self.results if row.estimator not in FITS))

    @property
    def circuit_register(self) -> Register | None:
        """The register that the experiment's circuit is drawn on: the first that hosts it."""
        return next((register for register in self.registers.values() if register.hosts_circuit), None)

    def role(self, name: str) -> Role:
        """A role by name."""
        return next(role for role in self.roles if role.name == name)

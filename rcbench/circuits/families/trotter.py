"""Trotterised spin models: exp(-i H t) in steps, so that depth means time.

    mixed-field-ising   H = J sum ZZ + sum (field_x X_j + z_j Z_j)
    xxz                 H = J sum (XX + YY + anisotropy ZZ) + sum (field_x X_j + z_j Z_j)

Sums over all couplers and qubits, Pauli operators, not spins; z_j is drawn once a circuit, uniform within `disorder` of
`field_z`. Time is in units of 1 over the unit of J. One step of length dt, its factors in the order in which they act:

    order 1   couplings of each pattern in turn, fields; for a given time the error falls as dt
    order 2   fields dt/2, patterns dt/2 forth, the last one dt, patterns dt/2 back, fields dt/2; it falls as dt^2

Patterns of ZZ commute, so the Ising model needs each of them once: a step has as many layers as there are patterns
(two on a line, four on a grid). With xxz in second order it has twice as many less one. Half steps of fields that
meet are not joined, so that a shorter time is always the beginning of a longer one. `one_qubit` makes the state at
time 0; without field_x, xxz does nothing to |0...0>, so `alternating` is where it usually begins.

Source: Suzuki, Commun. Math. Phys. 51, 183 (1976); Childs et al., Phys. Rev. X 11, 011020 (2021) for the errors (from
memory). Default fields of the Ising model: Kim and Huse, Phys. Rev. Lett. 111, 127205 (2013), where it is far from
integrable (from memory).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.circuits import native
from rcbench.circuits.compile import Decomposition
from rcbench.circuits.families.family import (
    STARTS,
    Block,
    Blocks,
    Family,
    Fixed,
    Parameter,
    Period,
    Task,
    Turns,
    compiled,
    everywhere,
    repeated,
    start,
    zz_gate,
)
from rcbench.circuits.schedule import Layer, patterns
from rcbench.device import Device

if TYPE_CHECKING:
    from rcbench.campaign import Experiment

MODELS = ("mixed-field-ising", "xxz")
_COMMON = (
    Parameter(key="hamiltonian", default=MODELS[0], choices=MODELS),
    Parameter(key="step", default=0.2, low=0, high=100, above=True),  # dt
    Parameter(key="order", default=1, choices=(1, 2)),
    Parameter(key="coupling", default=1.0),  # J
    Parameter(key="disorder", default=0.0, low=0),  # half width of the fields along Z
)
_OWN = {
    "mixed-field-ising": (
        Parameter(key="field_x", default=(5**0.5 + 5) / 8),
        Parameter(key="field_z", default=(5**0.5 + 1) / 4),
    ),
    "xxz": (
        Parameter(key="anisotropy", default=1.0),
        Parameter(key="field_x", default=0.0),
        Parameter(key="field_z", default=0.0),
    ),
}


@dataclass(frozen=True, slots=True)
class Terms:
    """H = sum over couplers of (xx XX + yy YY + zz ZZ) + sum over qubits of (x_j X_j + z_j Z_j); x, z: (n,)."""

    couplers: Layer
    xx: float
    yy: float
    zz: float
    x: FloatArray
    z: FloatArray

    def listed(self) -> list[tuple[float, str]]:
        """H as coefficients and Pauli strings, ``(0.8, "Z3 Z4")``; those of no weight left out."""
        bonds = ((self.xx, "X"), (self.yy, "Y"), (self.zz, "Z"))
        out = [(value, f"{letter}{a} {letter}{b}") for a, b in self.couplers for value, letter in bonds if value]
        fields = zip((self.x, self.z), "XZ", strict=True)
        return out + [
            (value, f"{letter}{q}") for values, letter in fields for q, value in enumerate(values.tolist()) if value
        ]


def parameters(given: Mapping[str, object]) -> tuple[Parameter, ...]:
    """Those of all models, and those of the one that is named."""
    name = given.get("hamiltonian", MODELS[0])
    return _COMMON + _OWN[name if isinstance(name, str) and name in _OWN else MODELS[0]]


def terms(task: Task) -> Terms:
    """The Hamiltonian of a circuit, with the fields that were drawn for it; of the dimers, for the controls."""
    model = task.experiment.circuits.parameters
    numbers = {key: float(value) for key, value in model.items() if not isinstance(value, str)}
    spread = 2 * task.draw("fields").uniform(task.n_qubits) - 1
    zz, xx = numbers["coupling"], 0.0
    if model["hamiltonian"] == "xxz":
        xx, zz = zz, zz * numbers["anisotropy"]
    couplers = tuple(sorted(pair for layer in task.patterns() for pair in layer))
    x = np.full(task.n_qubits, numbers["field_x"])
    return Terms(couplers, xx, xx, zz, x, numbers["field_z"] + numbers["disorder"] * spread)


def blocks(task: Task) -> Blocks:
    """The start, then whole steps."""
    model = task.experiment.circuits.parameters
    dt, order, exact = float(model["step"]), int(model["order"]), terms(task)
    stage = dt if order == 1 else dt / 2
    turned = exact.x.any() or exact.z.any()
    fields = [Turns(native.euler_angles(field_turns(exact.x, exact.z, stage)))] if turned else []
    layers = task.patterns()
    couplings: list[Block] = []
    if task.entangles and any(layers):
        whole = _bond(task, exact, dt)
        half = _bond(task, exact, dt / 2) if order == 2 and exact.xx else whole
        palindrome = order == 2 and bool(exact.xx) and len(layers) > 1
        sweep: Sequence[Layer] = [*layers, *layers[-2::-1]] if palindrome else layers
        middle = len(layers) - 1
        for place, pairs in enumerate(sweep):
            couplings.append(everywhere(pairs, half if palindrome and place != middle else whole))
    step = [*couplings, *fields] if order == 1 else [*fields, *couplings, *fields]
    return repeated(task, start(task), step, period(task.experiment, task.device).layers)


def field_turns(x: FloatArray, z: FloatArray, time: float) -> ComplexArray:
    """(n, 2, 2) exp(-i time (x X + z Z)) of each qubit."""
    size = np.hypot(x, z)
    sine = time * np.sinc(size * time / np.pi)  # sin(size time) / size
    out = np.empty((len(x), 2, 2), dtype=np.complex128)
    out[:, 0, 0], out[:, 1, 1] = np.cos(size * time) - 1j * sine * z, np.cos(size * time) + 1j * sine * z
    out[:, 0, 1] = out[:, 1, 0] = -1j * sine * x
    return out


def _bond(task: Task, exact: Terms, time: float) -> Decomposition | Fixed:
    """exp(-i time (xx XX + yy YY + zz ZZ)) with xx = yy."""
    if not exact.xx:
        return zz_gate(task, 2 * exact.zz * time)
    outer, inner = np.exp(-1j * exact.zz * time), np.exp(1j * exact.zz * time)
    keep, move = inner * np.cos(2 * exact.xx * time), -1j * inner * np.sin(2 * exact.xx * time)
    matrix = np.array([[outer, 0, 0, 0], [0, keep, move, 0], [0, move, keep, 0], [0, 0, 0, outer]])
    return compiled(task, matrix[None])


def period(experiment: Experiment, device: Device) -> Period:
    """One step; its time is its length."""
    model = experiment.circuits.parameters
    several = max(1, len(patterns(device, experiment.qubits)))
    palindrome = model["hamiltonian"] == "xxz" and model["order"] == 2 and model["coupling"] != 0
    return Period("step", 2 * several - 1 if palindrome else several, float(model["step"]), "1/energy")


FAMILY = Family(
    about="Trotter steps of a spin model; depth means time",
    one_qubit=STARTS,
    plain="alternating",
    blocks=blocks,
    parameters=parameters,
    period=period,
)

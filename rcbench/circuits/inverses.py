"""Single gates turned round: the inverse, complex conjugate and transpose of each gate kind, up to a global phase.

Every native two-qubit gate is symmetric, so it is its own transpose, and its conjugate is its inverse. That inverse is
written with the gate the device has, between one-qubit gates:

    cz                          itself
    iswap, sqrt_iswap           Z on one qubit before and after
    zz(t)                       zz(-t) where the device offers it; else Z on both qubits (t an odd multiple of pi/2),
                                or X on one qubit before and after
    fsim(t, p)                  fsim(-t, -p) where the device offers it; Z on one qubit before and after where p = 0;
                                X on the first before, X on the second and rz(p) on the first after where t = pi/2
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.circuits.gates import KINDS, gate_matrix
from rcbench.circuits.native import snap
from rcbench.device import NativeGate
from rcbench.errors import InputError

Change = Literal["inverse", "conjugate", "transpose"]
TOLERANCE = 1e-12  # of an angle that makes an inverse exact

_MATRIX_CHANGE: dict[Change, Callable[[ComplexArray], ComplexArray]] = {
    "inverse": lambda m: m.conj().swapaxes(-1, -2),
    "conjugate": lambda m: m.conj(),
    "transpose": lambda m: m.swapaxes(-1, -2),
}
_PHASES = {"z": np.pi, "s": np.pi / 2, "sdg": -np.pi / 2}


@dataclass(frozen=True, slots=True)
class Wrapped:
    """A two-qubit gate with one-qubit gates around it: `before` and `after` hold a (2, 2) unitary by leg, 0 or 1."""

    parameters: tuple[float, ...]
    before: dict[int, ComplexArray]
    after: dict[int, ComplexArray]


def changed_matrices(matrices: ComplexArray, change: Change) -> ComplexArray:
    """The inverse, conjugate or transpose of (..., d, d) unitaries."""
    return _MATRIX_CHANGE[change](matrices)


def z_angles(name: str, parameters: FloatArray, change: Change) -> FloatArray | None:
    """(m,) angles of the rz that is the changed gate, of (m, k) parameters; None for a gate that is not about Z."""
    if name in _PHASES:
        angles = np.full(len(parameters), _PHASES[name])
    elif name == "rz":
        angles = parameters[:, 0]
    else:
        return None
    return angles if change == "transpose" else -angles


def between_half_turns(name: str, change: Change) -> bool:
    """True where the changed gate is the gate between half turns about Z: sx has no native inverse of its own."""
    return name in ("sx", "sxdg") and change != "transpose"


def pulse_parameters(name: str, parameters: FloatArray, change: Change) -> FloatArray:
    """(m, k) parameters of the changed gate, of the same kind; rotation angles stay, axes and phases turn."""
    if name == "r":
        t, p = parameters.T
        turned = {"inverse": p + np.pi, "conjugate": np.pi - p, "transpose": -p}[change]
        return np.stack([t, snap(turned)], axis=1)
    if name == "u":
        t, p, l = parameters.T
        first, second = {
            "inverse": (np.pi - l, np.pi - p),
            "conjugate": (-p, -l),
            "transpose": (l + np.pi, p + np.pi),
        }[change]
        about_z = t == 0
        whole = p + l if change == "transpose" else -p - l
        return np.stack([t, snap(np.where(about_z, whole, first)), snap(np.where(about_z, 0, second))], axis=1)
    if name in ("matrix1", "matrix2"):
        return _stored_parameters(name, parameters, change)
    return parameters  # x, y, h; sx and sxdg between half turns


def two_qubit_gate(name: str, parameters: tuple[float, ...], change: Change, gate: NativeGate | None) -> Wrapped:
    """The changed two-qubit gate in the same kind of gate.

    Args:
        name: gate kind.
        parameters: its parameters.
        change: which change.
        gate: the device's native gate of that name, which tells the angles it offers; None where it has none.
    Raises:
        InputError: fsim with other angles than the inverse needs.
    """
    if name == "matrix2":
        changed = _stored_parameters(name, np.array([parameters]), change)[0]
        return Wrapped(tuple(changed.tolist()), {}, {})
    if change == "transpose" or name in ("cz", "cx"):
        return Wrapped(parameters, {}, {})
    if name in ("iswap", "sqrt_iswap"):
        return Wrapped(parameters, {0: _Z}, {0: _Z})
    if name == "zz":
        return _zz(parameters, gate)
    if name == "fsim":
        return _fsim(parameters, gate)
    raise InputError("gate", name, "gates whose inverse is known in the same native gate")


def _zz(parameters: tuple[float, ...], gate: NativeGate | None) -> Wrapped:
    (t,) = parameters
    if gate is not None and (gate.negative or not (gate.parameters or gate.by_coupler)):
        return Wrapped((-t,), {}, {})
    if _vanishes(np.cos(t)):  # zz(2 t) is then Z on both qubits
        return Wrapped(parameters, {0: _Z, 1: _Z}, {})
    return Wrapped(parameters, {0: _X}, {0: _X})


def _fsim(parameters: tuple[float, ...], gate: NativeGate | None) -> Wrapped:
    t, p = parameters
    if gate is not None and gate.negative:
        return Wrapped((-t, -p), {}, {})
    if _vanishes(np.sin(p / 2)):
        return Wrapped(parameters, {0: _Z}, {0: _Z})
    if _vanishes(np.cos(t)):
        return Wrapped(parameters, {0: _X}, {0: gate_matrix("rz", p), 1: _X})
    raise InputError(
        "fsim",
        parameters,
        "theta = pi/2 or phi = 0 to 1e-12, or a device that lists the negative angles (negative = true): only there"
        " is an exact inverse made of the same native gate",
    )


def _vanishes(value: float) -> bool:
    return bool(abs(value) < TOLERANCE)


def _stored_parameters(name: str, parameters: FloatArray, change: Change) -> FloatArray:
    """Entries of the changed matrices, row by row as real and imaginary part."""
    kind = next(kind for kind in KINDS if kind.name == name)
    assert kind.matrices is not None
    changed = changed_matrices(kind.matrices(parameters), change)
    return np.stack([changed.real, changed.imag], axis=-1).reshape(len(parameters), -1)


_X, _Z = gate_matrix("x"), gate_matrix("z")

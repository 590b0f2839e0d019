"""One-qubit unitaries in the device's native one-qubit gates, and which logical gates which native gate serves.

Everything here holds up to a global phase. A unitary becomes the three angles (t, p, l) of the gate u, and the angles
become rows:

    u        u(t, p, l)
    r+rz     r(t, pi/2 - l), then the virtual rz(p + l)
    sx+rz    rz, sx, rz, sx, rz; one sx where t is a quarter turn, none where it is zero

Angles within 1e-12 of a multiple of pi/4 are set to it, so that quarter turns, Cliffords and Paulis come out exact, and
what is the identity adds no row.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from rcbench.circuits.circuit import CircuitBuilder
from rcbench.device import NATIVE_ONE_QUBIT, NATIVE_TWO_QUBIT, NativeGate
from rcbench.errors import InputError, suggest

# (logical, native) two-qubit gates compiled here; zz at any angle or at +-pi/2, fsim at (+-pi/2, 0) only
SERVED: tuple[tuple[str, str], ...] = tuple(
    (logical, gate) for logical in ("haar", "clifford") for gate in NATIVE_TWO_QUBIT
)
SNAP = 1e-12
ANGLE_TOLERANCE = 1e-7  # a stated native angle this close to pi/2 or 0 counts as that angle


@dataclass(frozen=True, slots=True)
class Pulse:
    """One native layer of many one-qubit gates at once.

    Args:
        name: gate kind.
        present: (...) true where the gate has a row in this layer.
        parameters: (..., k) its angles, None where the kind has none.
    """

    name: str
    present: BoolArray
    parameters: FloatArray | None = None

    def __getitem__(self, rows: Any) -> Pulse:
        return Pulse(self.name, self.present[rows], None if self.parameters is None else self.parameters[rows])


def snap(angles: FloatArray) -> FloatArray:
    """The same angles from -pi (excluded) to pi, exact where within 1e-12 of a multiple of pi/4."""
    steps = np.round(angles * (4 / np.pi))
    near = np.abs(angles - steps * (np.pi / 4)) < SNAP
    wrapped = np.where(np.abs(angles) > np.pi, angles - 2 * np.pi * np.round(angles / (2 * np.pi)), angles)
    exact = (4 - np.mod(4 - steps, 8)) * (np.pi / 4)
    return np.asarray(np.where(near, exact, wrapped), dtype=np.float64)


def euler_angles(matrices: ComplexArray) -> FloatArray:
    """(..., 3) angles (t, p, l) of the gate u that equals each (..., 2, 2) unitary up to phase; t from 0 to pi.

    A diagonal gate has t = 0 and l = 0; a gate with no diagonal has t = pi and p = -l.
    """
    a, b, c, d = matrices[..., 0, 0], matrices[..., 0, 1], matrices[..., 1, 0], matrices[..., 1, 1]
    t = snap(2 * np.arctan2(np.abs(c), np.abs(a)))
    p = np.angle(c * a.conj())
    # whichever of p + l and p - l sits on the larger entries is well defined: the smaller ones are mostly rounding
    l = np.where(np.abs(a) > np.abs(c), np.angle(d * a.conj()) - p, p - np.angle(-c * b.conj()))
    p, l = np.where(t == 0, p + l, p), np.where(t == 0, 0.0, l)
    half = (p - l) / 2
    flip = t == np.pi
    p, l = np.where(flip, half, p), np.where(flip, -half, l)
    return np.stack([t, snap(p), snap(l)], axis=-1)


def pulses(native: str, angles: FloatArray) -> tuple[Pulse, ...]:
    """The native layers, first to last, of gates given by their (..., 3) angles from `euler_angles`.

    Raises:
        InputError: an unknown native set.
    """
    if native not in _PULSES:
        raise InputError("one_qubit", native, suggest(native, NATIVE_ONE_QUBIT))
    return _PULSES[native](angles)


def add_one_qubit(builder: CircuitBuilder, native: str, qubits: Sequence[int], matrices: ComplexArray) -> None:
    """Add rows for one unitary a qubit, in native gates, up to a global phase; the layers are aligned.

    Args:
        builder: the circuit so far; the rows start in its current layer and a new layer follows them.
        native: one of `device.NATIVE_ONE_QUBIT`.
        qubits: m different qubits.
        matrices: (m, 2, 2) unitaries.
    Raises:
        InputError: an unknown native set.
    """
    add_euler(builder, native, qubits, euler_angles(matrices))


def add_euler(builder: CircuitBuilder, native: str, qubits: Sequence[int], angles: FloatArray) -> None:
    """The same for gates given by their (m, 3) angles from `euler_angles`, where many were worked out at once."""
    add_pulses(builder, np.asarray(qubits), pulses(native, angles))


def add_pulses(builder: CircuitBuilder, qubits: IntArray, layers: Iterable[Pulse]) -> None:
    """The same for gates given by their `pulses`: (m,) qubits, and pulses of m gates."""
    for pulse in layers:
        present = pulse.present
        if present.any():
            builder.add_rows(
                pulse.name, qubits[present], None if pulse.parameters is None else pulse.parameters[present]
            )
            builder.next_layer()


def served_parameters(gate: NativeGate) -> tuple[float, ...]:
    """The angles of a native gate on all couplers, where two-qubit unitaries are to be compiled to it.

    Raises:
        InputError: couplers with different angles.
    """
    found = [values for values in (gate.parameters, *gate.by_coupler.values()) if values]
    if any(
        np.shape(one) != np.shape(found[0]) or not np.allclose(one, found[0], rtol=0, atol=ANGLE_TOLERANCE)
        for one in found
    ):
        raise InputError(
            gate.name, sorted(set(found)), "the same angles on all couplers, where unitaries are compiled to it"
        )
    return found[0] if found else ()


def _u_pulses(angles: FloatArray) -> tuple[Pulse, ...]:
    return (Pulse("u", np.asarray(angles.any(axis=-1)), angles),)


def _r_rz_pulses(angles: FloatArray) -> tuple[Pulse, ...]:
    t, p, l = np.moveaxis(angles, -1, 0)
    turn = np.stack([t, snap(np.pi / 2 - l)], axis=-1)
    return Pulse("r", t != 0, turn), _rz_pulse(p + l)


def _sx_rz_pulses(angles: FloatArray) -> tuple[Pulse, ...]:
    t, p, l = np.moveaxis(angles, -1, 0)
    none, one, half = t == 0, t == np.pi / 2, t == np.pi
    # a half turn is two quarter turns with nothing between: all its phase goes to the end
    start = np.where(none | half, 0, np.where(one, l - np.pi / 2, l))
    between = np.where(none | one | half, 0, t + np.pi)
    end = np.where(none, p + l, np.where(one, p + np.pi / 2, np.where(half, p - l + np.pi, p + np.pi)))
    first, second = Pulse("sx", ~none), Pulse("sx", ~(none | one))
    return _rz_pulse(start), first, _rz_pulse(between), second, _rz_pulse(end)


def _rz_pulse(angles: FloatArray) -> Pulse:
    angles = snap(angles)
    return Pulse("rz", angles != 0, angles[..., None])


_PULSES = {"u": _u_pulses, "r+rz": _r_rz_pulses, "sx+rz": _sx_rz_pulses}

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

from collections.abc import Sequence

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.circuits.circuit import CircuitBuilder
from rcbench.device import NATIVE_ONE_QUBIT, NativeGate
from rcbench.errors import InputError, suggest

# (logical, native) two-qubit gates compiled here; zz at any angle or at pi/2, fsim at (pi/2, 0) only
SERVED: tuple[tuple[str, str], ...] = (("haar", "cz"), ("haar", "iswap"), ("haar", "sqrt-iswap"), ("haar", "zz"), ("haar", "fsim"))
SNAP = 1e-12


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
    """The same for unitaries given by their (m, 3) angles from `euler_angles`, where many were worked out at once."""
    if native not in _ADD:
        raise InputError("one_qubit", native, suggest(native, NATIVE_ONE_QUBIT))
    _ADD[native](builder, np.asarray(qubits), angles)


def _add_u(builder: CircuitBuilder, qubits: np.ndarray, angles: FloatArray) -> None:
    _add_where(builder, "u", qubits, angles, angles.any(axis=1))


def _add_r_rz(builder: CircuitBuilder, qubits: np.ndarray, angles: FloatArray) -> None:
    t, p, l = angles.T
    _add_where(builder, "r", qubits, np.stack([t, snap(np.pi / 2 - l)], axis=1), t != 0)
    _add_rz(builder, qubits, p + l)


def _add_sx_rz(builder: CircuitBuilder, qubits: np.ndarray, angles: FloatArray) -> None:
    t, p, l = angles.T
    none, one, half = t == 0, t == np.pi / 2, t == np.pi
    # a half turn is two quarter turns with nothing between: all its phase goes to the end
    start = np.where(none | half, 0, np.where(one, l - np.pi / 2, l))
    end = np.where(none, p + l, np.where(one, p + np.pi / 2, np.where(half, p - l + np.pi, p + np.pi)))
    _add_rz(builder, qubits, start)
    _add_where(builder, "sx", qubits, None, ~none)
    _add_rz(builder, qubits, np.where(none | one | half, 0, t + np.pi))
    _add_where(builder, "sx", qubits, None, ~(none | one))
    _add_rz(builder, qubits, end)


def _add_rz(builder: CircuitBuilder, qubits: np.ndarray, angles: FloatArray) -> None:
    angles = snap(angles)
    _add_where(builder, "rz", qubits, angles[:, None], angles != 0)


def _add_where(
    builder: CircuitBuilder, name: str, qubits: np.ndarray, parameters: FloatArray | None, which: np.ndarray
) -> None:
    """One layer of the rows chosen; nothing where none is."""
    if not which.any():
        return
    builder.add_rows(name, qubits[which], None if parameters is None else parameters[which])
    builder.next_layer()


_ADD = {"u": _add_u, "r+rz": _add_r_rz, "sx+rz": _add_sx_rz}


def served_parameters(gate: NativeGate) -> tuple[float, ...]:
    """The angles of a native gate where it compiles every two-qubit unitary on every coupler alike.

    Raises:
        InputError: couplers with different angles.
    """
    for pair, values in gate.by_coupler.items():
        if not np.allclose(values, gate.parameters or values, rtol=0, atol=1e-7) or not gate.parameters:
            raise InputError(gate.name, dict(gate.by_coupler), f"the same angles on all couplers, where two-qubit unitaries are compiled to it")
    return gate.parameters

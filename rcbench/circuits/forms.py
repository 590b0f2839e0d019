"""Canonical two-qubit gates as sequences of one native gate with local gates between: one function a native gate.

Each takes (m, 3) coordinates of exp(i (x XX + y YY + z ZZ)) in the Weyl chamber, all of the class that `count` native
gates reach, and returns (m, count + 1, 2, 2, 2) local gates, the first step first, up to phase.

    cz      0 to 3; two where z = 0, one at (pi/4, 0, 0). Vatan and Williams, Phys. Rev. A 69, 032315 (2004)
    iswap   0 to 3; two where z = 0, one at (pi/4, pi/4, 0). From the CZ forms, since iSWAP = SWAP CZ (S x S): two
            swaps cancel, and an odd number is taken into the coordinates
    zz      any angle: one gate for each coordinate that is not zero
"""

from __future__ import annotations

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.circuits.gates import gate_matrices, gate_matrix

CLASS_TOLERANCE = 1e-11  # coordinates closer than this to a class with fewer gates are set to it

_I: ComplexArray = np.eye(2, dtype=np.complex128)
_X, _H, _S, _SDG = (gate_matrix(name) for name in ("x", "h", "s", "sdg"))
_RX = gate_matrix("r", np.pi / 2, 0.0)  # takes Y to Z


def clean(coordinates: FloatArray) -> FloatArray:
    """The coordinates, exact where within the tolerance of a multiple of pi/8, where every change of class lies."""
    steps = np.round(coordinates * (8 / np.pi)) * (np.pi / 8)
    return np.where(np.abs(coordinates - steps) < CLASS_TOLERANCE, steps, coordinates)


def cz_count(coordinates: FloatArray) -> IntArray:
    """(m,) the least number of CZ."""
    x, y, z = coordinates.T
    return np.where(z != 0, 3, np.where((y != 0) | ((x != 0) & (x != np.pi / 4)), 2, (x != 0).astype(int)))


def iswap_count(coordinates: FloatArray) -> IntArray:
    """(m,) the least number of iSWAP."""
    x, y, z = coordinates.T
    one = (x == np.pi / 4) & (y == np.pi / 4)
    return np.where(z != 0, 3, np.where(one, 1, np.where(x != 0, 2, 0)))


def zz_count(coordinates: FloatArray) -> IntArray:
    """(m,) the number of ZZ rotations."""
    return np.asarray(np.count_nonzero(coordinates, axis=1))


def cz_locals(coordinates: FloatArray, count: int) -> ComplexArray:
    """Local gates around `count` CZ."""
    x, y, z = coordinates.T
    if count == 1:
        return _steps(len(x), [(_SDG @ _H, _SDG @ _H), (_H, _H)])
    if count == 2:
        back = _RX.conj().T
        return _steps(len(x), [(_RX, _H @ _RX), (_r(-2 * x, 0.0), _r(-2 * y, 0.0)), (back, back @ _H)])
    if count == 3:
        quarter = np.pi / 2
        return _steps(
            len(x),
            [
                (_H, _SDG),
                (gate_matrices("rz", (quarter - 2 * z)[:, None]) @ _H, _H @ _r(2 * x - quarter, quarter)),
                (_H, _r(quarter - 2 * y, quarter) @ _H),
                (_S @ _H, _I),
            ],
        )
    return _steps(len(x), [(_I, _I)])


def iswap_locals(coordinates: FloatArray, count: int) -> ComplexArray:
    """Local gates around `count` iSWAP."""
    if count < 2:
        return _steps(len(coordinates), [(_I, _I)] * (count + 1))
    # an odd number of swaps: N = SWAP N', and SWAP is the canonical gate at (pi/4, pi/4, pi/4)
    out = cz_locals(coordinates + (np.pi / 4 if count == 3 else 0), count)
    swapped = slice(1, None, 2)
    out[:, swapped] = out[:, swapped, ::-1]
    out[:, :-1] = _SDG @ out[:, :-1]
    return out


def zz_locals(coordinates: FloatArray, count: int) -> ComplexArray:
    """Local gates around `count` ZZ rotations by twice the absolute coordinates."""
    m = len(coordinates)
    frames = [_H, _RX, _I]  # take XX, YY and ZZ to ZZ
    out = _steps(m, [(_I, _I)] * (count + 1))
    for step in range(count):
        # exp(i v ZZ) is zz(-2v); an X on one qubit turns the sign where v > 0
        flip = np.where((coordinates[:, step] > 0)[:, None, None], _X, _I)
        out[:, step, 0] = flip @ frames[step] @ out[:, step, 0]
        out[:, step, 1] = frames[step] @ out[:, step, 1]
        back = frames[step].conj().T
        out[:, step + 1, 0], out[:, step + 1, 1] = back @ flip, back
    return out


def dress(locals_: ComplexArray, before: ComplexArray, after: ComplexArray) -> ComplexArray:
    """The same sequence around another gate, where the old one is (after) new (before) with (2, 2, 2) local gates."""
    out = locals_.copy()
    out[:, :-1] = before @ out[:, :-1]
    out[:, 1:] = out[:, 1:] @ after
    return out


def _steps(m: int, steps: list[tuple[ComplexArray, ComplexArray]]) -> ComplexArray:
    out = np.empty((m, len(steps), 2, 2, 2), dtype=np.complex128)
    for step, pair in enumerate(steps):
        for qubit, gate in enumerate(pair):
            out[:, step, qubit] = gate
    return out


def _r(angles: FloatArray, axis: float) -> ComplexArray:
    """Rotations about one equatorial axis."""
    return gate_matrices("r", np.stack([angles, np.full_like(angles, axis)], axis=1))

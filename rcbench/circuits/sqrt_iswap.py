"""Canonical two-qubit gates as two or three sqrt-iSWAP with local gates between.

Two serve where x >= y + |z|, 79 % of Haar-random gates; with one more in front, chosen so that what is left lies well
inside that part of the Weyl chamber, three serve all.

Source: Huang et al., arXiv:2105.06074 (the angles of the two-gate form are theirs).
"""

from __future__ import annotations

from itertools import combinations, product

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.circuits.forms import CLASS_TOLERANCE
from rcbench.circuits.gates import gate_matrices, gate_matrix
from rcbench.circuits.kak import Canonical, canonical, kron, to_chamber

_ONE = np.eye(2, dtype=np.complex128)
_ROOT = gate_matrix("sqrt_iswap")
# every canonical gate that is sqrt-iSWAP up to local gates: two of the coordinates are +-pi/8
_ALIKE = np.array(
    [
        [signs[axes.index(axis)] * np.pi / 8 if axis in axes else 0.0 for axis in range(3)]
        for axes in combinations(range(3), 2)
        for signs in product((1, -1), repeat=2)
    ]
)


def sqrt_iswap_count(coordinates: FloatArray) -> IntArray:
    """(m,) the least number of sqrt-iSWAP."""
    x, y, z = coordinates.T
    one = (x == np.pi / 8) & (y == x) & (z == 0)
    return np.where(_room(coordinates) < -CLASS_TOLERANCE, 3, np.where(one, 1, np.where(x != 0, 2, 0)))


def sqrt_iswap_locals(coordinates: FloatArray, count: int) -> ComplexArray:
    """(m, count + 1, 2, 2, 2) local gates around `count` sqrt-iSWAP, up to phase."""
    m = len(coordinates)
    if count < 2:
        return np.broadcast_to(_ONE, (m, count + 1, 2, 2, 2)).copy()
    if count == 2:
        return _two(coordinates)
    rest = coordinates[:, None, :] - _ALIKE
    nothing = np.broadcast_to(_ONE, (m * len(_ALIKE), 2, 2, 2))
    forms = to_chamber(Canonical(nothing, rest.reshape(-1, 3), nothing))
    best = np.argmax(_room(forms.coordinates).reshape(m, -1), axis=1)
    last = forms[np.arange(m) * len(_ALIKE) + best]
    first = to_chamber(Canonical(nothing[: len(_ALIKE)], _ALIKE, nothing[: len(_ALIKE)]))[best]
    steps = _two(last.coordinates)
    steps[:, 0] = steps[:, 0] @ last.before @ first.after
    steps[:, -1] = last.after @ steps[:, -1]
    return np.concatenate([first.before[:, None], steps], axis=1)


def _room(coordinates: FloatArray) -> FloatArray:
    """How far inside the part of the chamber that two gates reach."""
    return np.asarray(coordinates[:, 0] - coordinates[:, 1] - np.abs(coordinates[:, 2]))


def _two(coordinates: FloatArray) -> ComplexArray:
    """The outer local gates come from the canonical form of the sequence itself."""
    alpha, beta, gamma = _angles(coordinates)
    turn = gate_matrices("rz", gamma[:, None])
    about_x = [gate_matrices("r", np.stack([angle, np.zeros_like(angle)], axis=1)) for angle in (alpha, beta)]
    middle = np.stack([turn @ about_x[0] @ turn, about_x[1]], axis=1)
    built = canonical(_ROOT @ kron(middle) @ _ROOT)
    inverse = [part.conj().swapaxes(2, 3) for part in (built.before, built.after)]
    return np.stack([inverse[0], middle, inverse[1]], axis=1)


def _angles(coordinates: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """(m,) each: alpha, beta and gamma of Huang et al.

    They give the cosines of alpha and beta, which lose half the digits near 1, where z is small. Here are the squared
    sines and cosines of the half angles instead, the small one of each pair from the products
    sin^2(alpha/2) sin^2(beta/2) = 4 (sin x cos y sin z)^2 and cos^2(alpha/2) cos^2(beta/2) = top + bottom.
    """
    x, y, z = coordinates.T
    across = np.sin(x + y) * np.sin(x - y)
    root = np.sin(x + y - z) * np.sin(x - y + z) * np.sin(x + y + z) * np.sin(x - y - z)
    root = np.sqrt(np.clip(root, 0, 1))
    top = 4 * (np.cos(x) * np.sin(y) * np.cos(z)) ** 2
    bottom = np.clip(np.cos(2 * x) * np.cos(2 * y) * np.cos(2 * z), 0, 1)
    sine_beta = across + np.sin(z) ** 2 + root
    cosine_alpha = np.cos(z) ** 2 - across + root
    sine_alpha = 4 * (np.sin(x) * np.cos(y) * np.sin(z)) ** 2 / np.maximum(sine_beta, 1e-300)
    cosine_beta = (top + bottom) / cosine_alpha
    alpha = 2 * np.arctan2(np.sqrt(sine_alpha), np.sqrt(cosine_alpha))
    beta = 2 * np.arctan2(np.sqrt(sine_beta), np.sqrt(cosine_beta))
    gamma = np.arctan2(np.sqrt(bottom), np.where(z < 0, -1, 1) * np.sqrt(top))
    return alpha, beta, gamma

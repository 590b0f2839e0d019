"""The output distribution of Haar-random states: the Porter-Thomas law at finite dimension, and what follows from it.

One probability p = |<x|psi>|^2 is Beta(1, D - 1) distributed: Prob(D p > y) = (1 - y/D)^(D - 1), which tends to e^-y.
Entropies are in nats. `dimension` is D = 2^n, a whole number of any size.
"""

from __future__ import annotations

from fractions import Fraction
from math import prod

import numpy as np
from scipy.special import digamma

from rcbench.arrays import FloatArray
from rcbench.reference.sizes import whole


def tail(scaled: FloatArray, dimension: int) -> FloatArray:
    """Prob(D p > y) at y = `scaled` (any shape, D p from 0 to D; outside 1 or 0): (1 - y/D)^(D - 1).

    Raises:
        InputError: dimension below 2.

    Source: Boixo et al., Nature Phys. 14, 595 (2018), arXiv:1608.00263, for the law at large D.
    """
    d = float(whole("dimension", dimension, 2))
    y = np.clip(np.asarray(scaled, dtype=np.float64) / d, 0, 1)
    with np.errstate(divide="ignore"):  # y = D has probability 0
        return np.asarray(np.exp((d - 1) * np.log1p(-y)))


def density(scaled: FloatArray, dimension: int) -> FloatArray:
    """Density of D p at y = `scaled` (any shape): (1 - 1/D) (1 - y/D)^(D - 2) for y from 0 to D, else 0.

    Raises:
        InputError: dimension below 2.

    Source: as `tail`.
    """
    d = float(whole("dimension", dimension, 2))
    y = np.asarray(scaled, dtype=np.float64) / d
    inside = (y >= 0) & (y < 1)
    return np.where(inside, (1 - 1 / d) * np.exp((d - 2) * np.log1p(-np.where(inside, y, 0))), 0.0)


def moment(k: int, dimension: int) -> float:
    """Mean of (D p)^k: k! D^k / (D (D + 1) .. (D + k - 1)), which tends to k!.

    Raises:
        InputError: k below 0, dimension below 2.

    Source: as `tail`.
    """
    k, d = whole("k", k, 0), whole("dimension", dimension, 2)
    return float(prod(Fraction((j + 1) * d, d + j) for j in range(k)))


def collision_probability(dimension: int) -> float:
    """Mean of sum_x p(x)^2: 2 / (D + 1).

    Raises:
        InputError: dimension below 2.

    Source: as `tail`.
    """
    return 2 / (whole("dimension", dimension, 2) + 1)


def entropy(dimension: int) -> float:
    """Mean of -sum_x p ln p, in nats: H_D - 1, H the harmonic number; tends to ln D - 0.4228.

    Raises:
        InputError: dimension below 2.

    Source: Boixo et al., Nature Phys. 14, 595 (2018), arXiv:1608.00263, for large D.
    """
    return _harmonic(whole("dimension", dimension, 2)) - 1


def cross_entropy_of_uniform(dimension: int) -> float:
    """Mean of -(1/D) sum_x ln p(x), in nats, what uniform noise scores: H_(D-1); tends to ln D + 0.5772.

    It lies 1 - 1/D above `entropy`, the score of perfect sampling.

    Raises:
        InputError: dimension below 2.

    Source: as `entropy`.
    """
    return _harmonic(whole("dimension", dimension, 2) - 1)


def _harmonic(n: int) -> float:
    return float(digamma(float(n) + 1) + np.euler_gamma)


def linear_xeb(dimension: int) -> float:
    """Mean linear cross-entropy D sum_x p(x)^2 - 1 of perfect sampling: (D - 1) / (D + 1).

    Raises:
        InputError: dimension below 2.

    Source: moments of the law; Arute et al., Nature 574, 505 (2019), for large D.
    """
    d = whole("dimension", dimension, 2)
    return (d - 1) / (d + 1)


def linear_xeb_variance(dimension: int) -> float:
    """Variance between Haar states of D sum_x p(x)^2: about 4 / D.

    Raises:
        InputError: dimension below 2.

    Source: fourth moments of Haar states.
    """
    d = whole("dimension", dimension, 2)
    return float(d * d * (_square_of_collisions(d) - Fraction(4, (d + 1) ** 2)))


def shot_variance(dimension: int) -> float:
    """Mean over Haar states of the variance of D p(x), one shot x from p itself: 2 - O(1/D).

    Raises:
        InputError: dimension below 2.

    Source: third and fourth moments of Haar states.
    """
    d = whole("dimension", dimension, 2)
    return float(d * d * (Fraction(6, (d + 1) * (d + 2)) - _square_of_collisions(d)))


def uniform_shot_variance(dimension: int) -> float:
    """Mean over Haar states of the variance of D p(x), one shot x from uniform noise: (D - 1) / (D + 1).

    Raises:
        InputError: dimension below 2.

    Source: second moments of Haar states.
    """
    return linear_xeb(dimension)


def _square_of_collisions(d: int) -> Fraction:
    """Mean of (sum_x p^2)^2."""
    return Fraction(24 + 4 * (d - 1), (d + 1) * (d + 2) * (d + 3))

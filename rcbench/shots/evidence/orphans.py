"""Orphans: shots that hold structure which their circuit does not explain.

Shots that coincide more often than the floor lets them came from some circuit. If that was the circuit asked for, its
cross-entropy explains the coincidences: C = X^2 / v. If clearly more coincide, they came from another circuit, in
another bit order, or the device did something coherent that is not in the circuit. No candidate is needed to see it.
Where both are about 0, the shots are noise, and nothing can be told.

Relaxation and bad readout make structure of their own, but in single bits and pairs. A run is told to be an orphan
only if structure is left beyond those of its own (`many_bit_structure`); that costs a foreign deep circuit nothing,
and a foreign shallow one some.

Needs shots F^2 > 4 sqrt(2 D), so it ends at some 25 qubits.

Sources: speckle purity, Arute et al., Nature 574, 505 (2019), supplement; the comparison of both is derived here.
"""

from __future__ import annotations

import math

import numpy as np

from rcbench.arrays import BoolArray, FloatArray, IntArray
from rcbench.shots.evidence.scores import LARGEST_BIAS, LEAST_EXCESS, Collisions, Crossed, collisions

LEAST_SIGMAS = 3.0
SHARE = 0.5  # a circuit that explains at least half of the structure is not doubted for the rest of it
CLAIMED_SHARE = 0.75  # but what is said instead must explain more: among many wrong answers one may explain half
MODE_SIGMAS = 5.0
ONE_SIDED = 1.645


def structure(found: Collisions) -> FloatArray:
    """(runs,) sigmas by which shots coincide more than the floor lets them."""
    return _sigmas(found, np.zeros_like(found.excess), np.zeros_like(found.excess))


def unexplained(found: Collisions, own: Crossed) -> FloatArray:
    """(runs,) sigmas of structure beyond what the circuit explains."""
    explained, error = explained_excess(own)
    return _sigmas(found, explained, error)


def explained_excess(own: Crossed) -> tuple[FloatArray, FloatArray]:
    """(runs,) X^2 / v without the square's bias, and its standard error."""
    usable = own.excess > LEAST_EXCESS
    v = np.where(usable, own.excess, 1.0)
    explained = np.where(usable, np.maximum(own.mean**2 - own.error**2, 0.0) / v, 0.0)
    return explained, np.where(usable, 2 * np.abs(own.mean) * own.error / v, 0.0)


def consistent(found: Collisions, own: Crossed, share: float = SHARE) -> BoolArray:
    """(runs,) whether the circuit can be the source: it explains a share of the structure that is surely there."""
    explained, error = explained_excess(own)
    return np.asarray(explained + error >= share * (found.excess - ONE_SIDED * found.error))


def is_mode(at_target: FloatArray, most: FloatArray) -> BoolArray:
    """(runs,) whether a string that should return is the commonest outcome, or may be.

    Args:
        at_target, most: (runs,) shots that gave it, and that gave the commonest outcome.
    """
    return np.asarray(most - at_target <= MODE_SIGMAS * np.sqrt(most + at_target))


def is_orphan(found: Collisions, own: Crossed, limit: float) -> BoolArray:
    """(runs,) whether structure is there that the circuit leaves unexplained, in sigmas and in size."""
    explained, _ = explained_excess(own)
    clear = unexplained(found, own) > max(limit, LEAST_SIGMAS)
    return np.asarray(clear & (SHARE * found.excess > explained))


def many_bit_structure(index: IntArray, counts: IntArray, n_bits: int) -> tuple[float, float]:
    """C of one run beyond single bits and pairs, and its standard error.

    The floor is the product of the run's own single bits. In the functions prod (z_j - m_j) / sqrt(1 - m_j^2), which
    are orthonormal on it, C is the sum of all squared coefficients; those of pairs are taken out, less their shot
    noise.

    Args:
        index, counts: (k,) different outcomes and how often.
    """
    z = 1.0 - 2.0 * (index[:, None] >> np.arange(n_bits - 1, -1, -1) & 1)
    shots = float(counts.sum())
    mean = np.clip(counts @ z / shots, -LARGEST_BIAS, LARGEST_BIAS)
    inverse_floor = np.prod(2 / (1 + mean * z), axis=1)
    whole = collisions(inverse_floor, counts, np.zeros(1, dtype=np.int64), 2.0**n_bits)
    unit = (z - mean) / np.sqrt(1 - mean**2)
    pairs = np.triu_indices(n_bits, 1)
    first = ((unit * counts[:, None]).T @ unit / shots)[pairs]
    second = (((unit**2) * counts[:, None]).T @ unit**2 / shots)[pairs]
    noise = (second - first**2) / max(shots - 1, 1)
    return float(whole.excess[0] - (first**2 - noise).sum()), float(whole.error[0])


def shell_excess(share: FloatArray, n_bits: int) -> FloatArray:
    """(runs,) the most C that any model explains in which only the distance from a string counts.

    Args:
        share: (runs, n_bits + 1) share of shots at each Hamming distance from the string.
    """
    size = np.exp(
        [math.lgamma(n_bits + 1) - math.lgamma(k + 1) - math.lgamma(n_bits - k + 1) for k in range(n_bits + 1)]
    )
    return np.asarray(2.0**n_bits * (share**2 / size).sum(axis=1) - 1)


def product_chance(index: IntArray, counts: IntArray, n_bits: int, at: int) -> float:
    """Chance of one outcome if the single bits of a run were independent."""
    shots, chance = float(counts.sum()), 1.0
    for bit in range(n_bits):
        ones = float((index >> (n_bits - 1 - bit) & 1) @ counts) / shots
        chance *= ones if at >> (n_bits - 1 - bit) & 1 else 1 - ones
    return chance


def stands_out(seen: FloatArray, expected: FloatArray) -> BoolArray:
    """Whether outcomes come clearly more often than independent bits would give them; both in shots."""
    return np.asarray(seen - expected > MODE_SIGMAS * np.sqrt(expected + 1))


def _sigmas(found: Collisions, explained: FloatArray, error: FloatArray) -> FloatArray:
    from scipy.stats import norm, poisson

    normal = (found.excess - explained) / np.hypot(found.error, error)
    # few pairs are Poisson, with a longer tail than the normal distribution
    tail = poisson.logsf(np.maximum(found.pairs - 1, -1), found.expected * (1 + explained))
    counted = norm.isf(np.exp(np.maximum(tail, -700.0)))
    return np.minimum(normal, np.where(tail < -690, normal, counted))

"""Orphans: shots that hold structure which their circuit does not explain.

Shots that coincide more often than the floor lets them came from some circuit. If that was the circuit asked for, its
cross-entropy explains the coincidences: C = X^2 / v. If clearly more coincide, they came from another circuit, in another
bit order, or the device did something coherent that is not in the circuit. No candidate is needed to see it. Where
both are about 0, the shots are noise, and nothing can be told.

Needs shots F^2 > 4 sqrt(2 D), so it ends at some 25 qubits.

Sources: speckle purity, Arute et al., Nature 574, 505 (2019), supplement; the comparison of both is derived here.
"""

from __future__ import annotations

import numpy as np

from rcbench.arrays import BoolArray, FloatArray
from rcbench.shots.evidence.scores import LEAST_EXCESS, Collisions, Crossed

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


def _sigmas(found: Collisions, explained: FloatArray, error: FloatArray) -> FloatArray:
    from scipy.stats import norm, poisson

    normal = (found.excess - explained) / np.hypot(found.error, error)
    # few pairs are Poisson, with a longer tail than the normal distribution
    tail = poisson.logsf(np.maximum(found.pairs - 1, -1), found.expected * (1 + explained))
    counted = norm.isf(np.exp(np.maximum(tail, -700.0)))
    return np.minimum(normal, np.where(tail < -690, normal, counted))

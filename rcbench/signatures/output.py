"""Statistics of the output distribution of an ideal circuit."""

from __future__ import annotations

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.errors import InputError


def collision_probability(probabilities: FloatArray) -> float:
    """sum_x p(x)^2; probabilities: (D,), summing to 1. Haar-random states average 2 / (D + 1).

    Source: Dalzell, Hunter-Jones, Brandao, PRX Quantum 3, 010333 (2022).
    """
    return float(probabilities @ probabilities)


def porter_thomas_distance(probabilities: FloatArray) -> float:
    """Largest distance between the distribution of D p(x) over outcomes and the exact Porter-Thomas law, from 0 to 1.

    The law at finite D is Prob(D p > y) = (1 - y / D)^(D - 1). probabilities: (D,), summing to 1.

    Source: Boixo et al., Nature Physics 14, 595 (2018).
    """
    size = len(probabilities)
    ordered = np.sort(np.clip(probabilities, 0.0, 1.0))
    law = 1.0 - (1.0 - ordered) ** (size - 1)
    steps = np.arange(size + 1) / size
    return float(max(np.abs(steps[1:] - law).max(), np.abs(steps[:-1] - law).max()))


def moment(probabilities: FloatArray, k: int) -> float:
    """Mean over outcomes of (D p)^k; probabilities: (D,), summing to 1. Porter-Thomas tends to k!.

    Raises:
        InputError: k below 0.

    Source: Boixo et al., Nature Physics 14, 595 (2018).
    """
    if k < 0:
        raise InputError("k", k, "a whole number, 0 or more")
    return float(np.mean((len(probabilities) * probabilities) ** k))


def entropy(probabilities: FloatArray) -> float:
    """-sum_x p ln p in nats; probabilities: (D,), summing to 1. Porter-Thomas tends to ln D - 0.4228.

    Source: Boixo et al., Nature Physics 14, 595 (2018).
    """
    positive = probabilities[probabilities > 0]
    return float(-(positive * np.log(positive)).sum())


def linear_xeb(probabilities: FloatArray) -> float:
    """D sum_x p(x)^2 - 1, what a perfect device scores in linear cross-entropy; Haar averages (D - 1) / (D + 1).

    Args:
        probabilities: (D,), summing to 1.

    Source: Arute et al., Nature 574, 505 (2019).
    """
    return len(probabilities) * collision_probability(probabilities) - 1

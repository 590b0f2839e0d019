"""A kit of another seed: the shots hold structure, and not one of them matches any circuit of this kit.

One orphan may be a slip with one file. Where most runs hold structure, none is explained by its own circuit, by
another, or in another bit order, the shots belong to another kit: of another seed, or compiled to other circuits.
The sigmas of all runs add up, so that this shows where each run alone would not.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import BoolArray, FloatArray

FEWEST = 2  # runs
MATCHED = 0.05  # share of runs that may seem to match by chance
LEAST_SIGMAS = 6.0
LEAST_SHARE = 0.02  # F^2 of the structure, below which noise of the floor's own could be meant


@dataclass(frozen=True, slots=True)
class OtherKit:
    """sigmas: of structure left unexplained, all runs together. self_fidelity: F of it, where it can be said."""

    sigmas: float
    self_fidelity: float


def other_kit(
    structure: FloatArray, unexplained: FloatArray, square: FloatArray, matched: BoolArray, orphan: BoolArray
) -> OtherKit | None:
    """Whether runs are of another kit.

    Args:
        structure, unexplained: (runs,) sigmas by which shots coincide, and beyond what any circuit explains.
        square: (runs,) C / v, the structure as F^2. matched: (runs,) whether a circuit explains the run.
        orphan: (runs,) whether the run alone is one.
    """
    runs = len(structure)
    if runs < FEWEST or matched.sum() > MATCHED * runs:
        return None
    total = float(unexplained.sum()) / math.sqrt(runs)
    there = float(structure.sum()) / math.sqrt(runs)
    mean = float(np.mean(square)) if len(square) else 0.0
    if min(total, there) < LEAST_SIGMAS or total < there / 2:
        return None
    if mean < LEAST_SHARE and orphan.sum() < max(FEWEST, runs / 2):
        return None
    return OtherKit(total, math.sqrt(max(mean, 0.0)))

"""Change within a run, where shots have an order, and between batches, where circuits are run again.

Within a run: shots are cut into PARTS equal parts. Each bit's share of ones, and the score of the shots against the
circuit, should be the same in all of them; a chi-square over parts says whether. Sums over runs pool what one run
cannot show; a file of which the second half is of another circuit shows in its own.

Between batches: the score of a circuit that was run in several batches (an anchor, or a repeat) should be the same in
all of them. Only shot noise is in the test, since the circuit is the same.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from rcbench.arrays import FloatArray, IntArray

PARTS = 8
FEWEST = 5.0  # expected shots of either kind in a part, below which a chi-square is not one


class Change(NamedTuple):
    """How much something changes: chi-square and its degrees of freedom, by run; first, last: mean over runs at both
    ends.
    """

    chi2: FloatArray
    dof: IntArray
    first: float
    last: float

    def sigmas(self) -> float:
        """All runs together, in standard deviations."""
        return chi2_sigmas(float(self.chi2.sum()), int(self.dof.sum()))

    def sigmas_by_run(self) -> FloatArray:
        """(runs,) each run alone."""
        return np.array([chi2_sigmas(float(x), int(k)) for x, k in zip(self.chi2, self.dof, strict=True)])


def chi2_sigmas(chi2: float, dof: int) -> float:
    """A chi-square as one-sided standard deviations."""
    from scipy.stats import chi2 as distribution
    from scipy.stats import norm

    if dof < 1:
        return 0.0
    tail = float(distribution.sf(chi2, dof))
    if tail > 1e-300:
        return float(norm.isf(tail))
    # the first term of the tail's expansion; scipy has none so far out
    log_tail = -chi2 / 2 + (dof / 2 - 1) * math.log(chi2 / 2) - math.lgamma(dof / 2)
    return math.sqrt(-2 * log_tail)


def change_of_values(series: Sequence[FloatArray]) -> Change:
    """Whether the mean of a value changes within runs; series: by run, (shots,) the value of each shot in order."""
    chi2, dof, firsts, lasts = [], [], [], []
    for values in series:
        parts = np.array_split(np.asarray(values, dtype=np.float64), PARTS)
        spread = float(np.var(values)) if len(values) else 0.0
        if len(values) < PARTS * FEWEST or spread < 1e-12:
            chi2.append(0.0)
            dof.append(0)
            continue
        means = np.array([part.mean() for part in parts])
        sizes = np.array([len(part) for part in parts])
        chi2.append(float((sizes * (means - np.mean(values)) ** 2).sum() / spread))
        dof.append(PARTS - 1)
        firsts.append(means[0])
        lasts.append(means[-1])
    ends = (float(np.mean(firsts)), float(np.mean(lasts))) if firsts else (0.0, 0.0)
    return Change(np.array(chi2), np.array(dof, dtype=np.int64), *ends)


def change_of_bits(series: Sequence[IntArray], n_bits: int) -> list[Change]:
    """For each bit, whether its share of ones changes within runs; series: by run, (shots,) state indices in order."""
    found = []
    for bit in range(n_bits):
        values = [(index >> (n_bits - 1 - bit) & 1).astype(np.float64) for index in series]
        rare = [min(v.mean(), 1 - v.mean()) * len(v) / PARTS < FEWEST if len(v) else True for v in values]
        found.append(change_of_values([v[:0] if skip else v for v, skip in zip(values, rare, strict=True)]))
    return found


class Between(NamedTuple):
    """Scores of circuits by batch. sigmas: how sure they differ; low, high: the batches and means furthest apart."""

    sigmas: float
    low: tuple[str, float]
    high: tuple[str, float]


def between_batches(
    circuit: Sequence[str], batch: Sequence[str], value: FloatArray, error: FloatArray
) -> Between | None:
    """Whether circuits that were run in several batches score differently in them; None where none was.

    Args:
        circuit, batch: (runs,) labels. value, error: (runs,) score and its shot noise.
    """
    chi2, dof = 0.0, 0
    rest: dict[str, list[tuple[float, float]]] = {}
    for name in dict.fromkeys(circuit):
        runs = [i for i, one in enumerate(circuit) if one == name and np.isfinite(error[i]) and error[i] > 0]
        if len({batch[i] for i in runs}) < 2:
            continue
        weight = 1 / np.square(error[runs])
        mean = float(weight @ value[runs] / weight.sum())
        chi2 += float(weight @ np.square(value[runs] - mean))
        dof += len(runs) - 1
        for i in runs:
            rest.setdefault(batch[i], []).append((float(value[i] - mean), float(1 / error[i] ** 2)))
    if not dof:
        return None
    means = {name: sum(r * w for r, w in found) / sum(w for _, w in found) for name, found in rest.items()}
    low, high = min(means, key=lambda name: means[name]), max(means, key=lambda name: means[name])
    return Between(chi2_sigmas(chi2, dof), (low, means[low]), (high, means[high]))

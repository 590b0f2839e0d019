"""Intervals, resampling and combined uncertainty: what stands behind every plus-or-minus in a table.

Two questions have two uncertainties. *These circuits*: shot noise alone. *Circuits of this kind*: the scatter of
per-instance values, which holds the shot noise already; adding it again would count it twice. From MIN_INSTANCES
instances on the second question is answered, with Student's t; below, only the first, and the interval says so.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from scipy.special import ndtr, ndtri, stdtr, stdtrit

from rcbench.arrays import BoolArray, FloatArray

# Scatter of fewer instances gives no interval that covers: Student's t with 3 degrees of freedom is 1.6 times the
# normal one and still rests on the values being normal
MIN_INSTANCES = 5
OVER_INSTANCES = "t over instances"
JACKKNIFE = "jackknife-t over instances"
SHOTS_ONLY = "shots only, these circuits"


class Component(NamedTuple):
    """One standard uncertainty and its degrees of freedom, infinite where it is known and not estimated."""

    u: float
    dof: float = math.inf


@dataclass(frozen=True, slots=True, kw_only=True)
class Interval:
    """A value with its interval. std_error: combined; kind: how it was made."""

    value: float
    std_error: float
    low: float
    high: float
    dof: float
    kind: str


def quantile(probability: float, dof: float) -> float:
    """Quantile of Student's t; of the normal distribution for infinite degrees of freedom."""
    return float(ndtri(probability) if math.isinf(dof) else stdtrit(dof, probability))


def cumulative(value: float, dof: float) -> float:
    """Cumulative probability of Student's t; of the normal distribution for infinite degrees of freedom."""
    return float(ndtr(value) if math.isinf(dof) else stdtr(dof, value))


def combine(*parts: Component) -> Component:
    """Uncertainties in quadrature, with the effective degrees of freedom of Welch and Satterthwaite.

    Source: JCGM 100:2008 (GUM), sections 5.1.2 and G.4.1.
    """
    total = math.hypot(*(part.u for part in parts))
    if total == 0:
        return Component(0.0)
    loss = sum((part.u / total) ** 4 / part.dof for part in parts)
    return Component(total, 1 / loss if loss > 0 else math.inf)


def scatter(values: FloatArray, errors: FloatArray) -> Component:
    """Standard uncertainty of the mean of per-instance values.

    From MIN_INSTANCES instances on: standard deviation over sqrt(K), K - 1 degrees of freedom. Below, or where all
    values are equal: shot noise only, with infinite degrees of freedom.

    Args:
        values: (K,) one value an instance. errors: (K,) the shot noise of each.
    """
    count = len(values)
    if count >= MIN_INSTANCES:
        spread = float(values.std(ddof=1))
        if spread > 1e-14 * max(1.0, float(np.abs(values).max())):
            return Component(spread / math.sqrt(count), count - 1)
    return Component(math.sqrt(float((errors**2).sum())) / count)


def t_interval(values: FloatArray, errors: FloatArray, confidence: float, *more: Component) -> Interval:
    """Mean of per-instance values with Student's interval, or the shot-noise interval of fewer than MIN_INSTANCES.

    Strongly skewed values need more instances: the raw cross-entropy of four-qubit circuits, whose ideal value itself
    differs from circuit to circuit, covers 91 % at five instances instead of 95 %.

    Args:
        values, errors: (K,) as `scatter` takes them.
        confidence: two-sided level.
        more: further components that the scatter does not hold.
    """
    own = scatter(values, errors)
    total = combine(own, *more)
    mean = float(values.mean())
    half = quantile((1 + confidence) / 2, total.dof) * total.u
    kind = SHOTS_ONLY if len(values) < MIN_INSTANCES else OVER_INSTANCES
    return Interval(value=mean, std_error=total.u, low=mean - half, high=mean + half, dof=total.dof, kind=kind)


def leave_one_out(values: FloatArray) -> FloatArray:
    """(K, ...) means over the first axis with one entry left out in turn; NaN marks what is missing.

    Where an entry is missing, or is the only one, leaving it out changes nothing.
    """
    there = np.isfinite(values)
    filled = np.where(there, values, 0.0)
    count = there.sum(axis=0)
    total = filled.sum(axis=0)
    left = count - there
    without: FloatArray = np.where(left > 0, (total - filled) / np.maximum(left, 1), total / np.maximum(count, 1))
    return without


def jackknife(replicates: FloatArray) -> Component:
    """Standard error from the values of a statistic with one instance left out in turn; replicates: (K,).

    Source: Efron and Stein, Ann. Stat. 9, 586 (1981).
    """
    count = len(replicates)
    spread = float(((replicates - replicates.mean()) ** 2).sum())
    return Component(math.sqrt((count - 1) / count * spread), count - 1)


@dataclass(frozen=True, slots=True, kw_only=True)
class BetweenRuns:
    """Variation between repeats of the same circuits, apart from the scatter between circuits.

    std_dev: standard deviation between repeats of one circuit beyond its shot noise. component: standard uncertainty
    that this adds to a mean over instances and repeats, where the scatter of instances does not hold it. runs: repeats.
    """

    std_dev: float
    component: Component
    runs: int


def between_runs(values: FloatArray, errors: FloatArray) -> BetweenRuns:
    """The between-run component, by the method of moments of a two-way table of instances and repeats.

    A drift that all circuits of a run share moves the mean but leaves the scatter between instances as it was, so it is
    added; what varies from circuit to circuit within a run is in that scatter already. With fewer than MIN_INSTANCES
    instances the scatter is not used and both are added. Components below 0 count as 0.

    Args:
        values, errors: (K, R) by instance and repeat, NaN where a repeat is missing; only instances with every
            repeat are used.
    Source: Searle, Casella, McCulloch, Variance Components (1992), chapter 4 (from memory).
    """
    none = BetweenRuns(std_dev=0.0, component=Component(0.0), runs=values.shape[1])
    whole = np.isfinite(values).all(axis=1)
    table, noise = values[whole], float((errors[whole] ** 2).mean()) if whole.any() else 0.0
    k, r = table.shape
    if r < 2 or k < 1:
        return none
    within = float(((table - table.mean(axis=1, keepdims=True)) ** 2).sum()) / (k * (r - 1))
    by_run = k * float(table.mean(axis=0).var(ddof=1))
    rest = table - table.mean(axis=0) - table.mean(axis=1, keepdims=True) + table.mean()
    residual = float((rest**2).sum()) / ((k - 1) * (r - 1)) if k > 1 else noise
    common = Component(math.sqrt(max(by_run - residual, 0.0) / (k * r)), r - 1)
    if k < MIN_INSTANCES and k > 1:
        common = combine(common, Component(math.sqrt(max(residual - noise, 0.0) / (k * r)), (k - 1) * (r - 1)))
    return BetweenRuns(std_dev=math.sqrt(max(within - noise, 0.0)), component=common, runs=r)


@dataclass(frozen=True, slots=True, kw_only=True)
class Equivalence:
    """Result of an equivalence test. low, high: the interval it rests on; p_value: of the null `not equivalent`."""

    low: float
    high: float
    p_value: float
    inside: bool
    outside: bool


def equivalence(difference: float, total: Component, margin: float, alpha: float) -> Equivalence:
    """Two one-sided t tests of a difference against plus and minus the margin.

    inside: the interval of level 1 - 2 alpha lies within the margin, so that a difference as large as the margin is
    called equivalent with a probability of at most alpha. outside: it lies wholly beyond it, on one side.

    Source: Schuirmann, J. Pharmacokinet. Biopharm. 15, 657 (1987) (from memory).
    """
    half = quantile(1 - alpha, total.dof) * total.u
    low, high = difference - half, difference + half
    if total.u > 0:
        p_value = cumulative((abs(difference) - margin) / total.u, total.dof)
    else:
        p_value = float(abs(difference) > margin)
    return Equivalence(
        low=low,
        high=high,
        p_value=p_value,
        inside=-margin <= low and high <= margin,
        outside=low > margin or high < -margin,
    )


def holm(p_values: Sequence[float] | FloatArray, alpha: float) -> BoolArray:
    """Which hypotheses Holm's step-down procedure rejects, with a family-wise error of at most alpha.

    Source: Holm, Scand. J. Stat. 6, 65 (1979).
    """
    p = np.asarray(p_values, dtype=np.float64)
    order = np.argsort(p, kind="stable")
    passed = np.cumprod(p[order] <= alpha / np.arange(len(p), 0, -1)).astype(bool)
    rejected = np.zeros(len(p), dtype=bool)
    rejected[order] = passed
    return rejected


def u_to_settle(gap: float, alpha: float, power: float, u_syst: float, two_sided: bool) -> float:
    """Largest statistical uncertainty at which the test decides with the given power; 0 where none is small enough.

    Args:
        gap: distance from the true difference to the margin. alpha: level of each one-sided test. power: wanted.
        u_syst: systematic uncertainty, which more data does not lower.
        two_sided: the true difference is 0, so that either margin can be crossed.
    Source: normal approximation as in Schuirmann (1987); exact power in Shieh, PLoS ONE 11, e0162093 (2016).
    """
    beta = 1 - power
    reach = quantile(1 - alpha, math.inf) + quantile(1 - beta / 2 if two_sided else 1 - beta, math.inf)
    rest = (gap / reach) ** 2 - u_syst**2
    return math.sqrt(rest) if rest > 0 else 0.0

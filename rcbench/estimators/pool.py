"""How the values of single instances become one number with an interval, and one paired difference from a prediction.

Every pooled number is a function of column means over instances: one column for a signature at one depth, a column a
depth for a fit. That makes one resampling serve all: leave out whole instances, all their depths and repeats together.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.estimators import decay
from rcbench.estimators.cross_entropy import square_again
from rcbench.statistics import (
    JACKKNIFE,
    MIN_INSTANCES,
    SHOTS_ONLY,
    BetweenRuns,
    Component,
    Interval,
    between_runs,
    combine,
    jackknife,
    leave_one_out,
    quantile,
    scatter,
    t_interval,
)


def _same(values: FloatArray, errors: FloatArray) -> tuple[FloatArray, FloatArray]:
    return values, errors


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """values, errors: (K, R, c) by instance, repeat and column, NaN where there is none."""

    values: FloatArray
    errors: FloatArray

    def by_instance(self) -> tuple[FloatArray, FloatArray]:
        """(K, c) means over the repeats, and their shot noise; NaN where it is unknown, as of a single shot."""
        there = np.isfinite(self.values)
        count = there.sum(axis=1)
        some = np.maximum(count, 1)
        mean = np.where(there, self.values, 0.0).sum(axis=1) / some
        error = np.sqrt(np.where(there, self.errors**2, 0.0).sum(axis=1)) / some
        return np.where(count > 0, mean, np.nan), np.where(count > 0, error, np.nan)


@dataclass(frozen=True, slots=True)
class Pool:
    """forward: per-instance values and errors to columns that may be averaged. combine: (..., c) means to (...)."""

    combine: Callable[[FloatArray], FloatArray]
    forward: Callable[[FloatArray, FloatArray], tuple[FloatArray, FloatArray]] = _same
    linear: bool = False

    def columns(self, table: Table) -> Table:
        """The table with its values and errors moved to columns that may be averaged."""
        values, errors = self.forward(table.values, table.errors)
        return Table(values=values, errors=errors)


MEAN = Pool(combine=lambda means: means[..., 0], linear=True)
# of signatures whose square is what is unbiased
ROOT_MEAN_SQUARE = Pool(
    combine=lambda means: np.sign(means[..., 0]) * np.sqrt(np.abs(means[..., 0])), forward=square_again
)
POOLS = {"self_fidelity": ROOT_MEAN_SQUARE}


def pool_for(signature: str) -> Pool:
    """How a signature at one depth is averaged over instances."""
    return POOLS.get(signature, MEAN)


def decay_pool(key: str, layers: FloatArray, weights: FloatArray, n_qubits: int) -> Pool:
    """`layer_loss` or `spam` of a fit with the weights held fixed."""

    def fitted(means: FloatArray) -> FloatArray:
        found = decay.fit(means, layers, weights)
        return decay.layer_loss(found, n_qubits) if key == "layer_loss" else found.amplitude

    return Pool(combine=fitted)


@dataclass(frozen=True, slots=True, kw_only=True)
class Difference:
    """A paired difference. stat: its statistical uncertainty, between-run part included.

    one: standard deviation of one instance; shot: the shot noise in it.
    """

    value: float
    stat: Component
    one: float
    shot: float


def interval(pool: Pool, table: Table, confidence: float) -> Interval:
    """The pooled value of measured instances with its interval.

    One column: Student's interval of its mean, carried through `combine`. Several: jackknife over whole instances.
    Fewer than MIN_INSTANCES instances: shot noise alone. Repeats add what runs share (`statistics.between_runs`).
    """
    columns = pool.columns(table)
    values, errors = columns.by_instance()
    means = np.nanmean(values, axis=0)
    slope = np.ones(1) if len(means) == 1 else _slope(pool, means)
    runs = _runs(columns, slope).component
    if len(means) == 1:
        return _through(pool, t_interval(values[:, 0], errors[:, 0], confidence, runs))
    total = combine(_compound(pool, values, errors, slope), runs)
    value = float(pool.combine(means))
    half = quantile((1 + confidence) / 2, total.dof) * total.u
    kind = SHOTS_ONLY if len(values) < MIN_INSTANCES else JACKKNIFE
    low, high = value - half, value + half
    return Interval(value=value, std_error=total.u, low=low, high=high, dof=total.dof, kind=kind)


def _through(pool: Pool, found: Interval) -> Interval:
    """An interval of a column mean carried through the rising function `combine`."""
    if pool.linear:
        return found
    ends = (found.value, found.low, found.high, found.value - found.std_error, found.value + found.std_error)
    value, low, high, down, up = (float(pool.combine(np.array([end]))) for end in ends)
    return replace(found, value=value, low=low, high=high, std_error=(up - down) / 2)


def difference(pool: Pool, table: Table, predicted: Table) -> Difference:
    """Pooled measured value minus pooled prediction of the very same circuits.

    From MIN_INSTANCES instances on the scatter of the paired differences holds shot noise and the Monte Carlo noise
    of the predictions, which is drawn afresh for each circuit; neither is added again.

    Args:
        predicted: (K, 1, c) predictions and their numerical errors, instance for instance; NaN where there is none,
            which leaves that instance out of the difference. One at least must be there.
    """
    measured = pool.columns(table)
    expected = pool.columns(predicted)
    values, errors = measured.by_instance()
    model, model_errors = expected.by_instance()
    both = np.isfinite(values + model)
    paired = both.any(axis=1)
    values, model = (np.where(both, side, np.nan)[paired] for side in (values, model))
    errors, noise = errors[paired], np.hypot(errors, model_errors)[paired]
    count = len(values)
    means, model_means = np.nanmean(values, axis=0), np.nanmean(model, axis=0)
    value = float(pool.combine(means) - pool.combine(model_means))
    slope = np.ones(1) if pool.linear else _slope(pool, means)
    if pool.linear:
        own = scatter(values[:, 0] - model[:, 0], noise[:, 0])
    elif count >= MIN_INSTANCES:
        own = jackknife(pool.combine(leave_one_out(values)) - pool.combine(leave_one_out(model)))
        own = own if own.u > 1e-13 else _shots(noise, slope)
    else:
        own = _shots(noise, slope)
    shot = _shots(errors, slope).u * math.sqrt(count)
    total = combine(own, _runs(measured, slope).component)
    return Difference(value=value, stat=total, one=own.u * math.sqrt(count), shot=shot)


def run_variation(pool: Pool, table: Table) -> BetweenRuns:
    """The variation between repeats of the same circuits, in units of the pooled value."""
    columns = pool.columns(table)
    means = np.nanmean(columns.by_instance()[0], axis=0)
    return _runs(columns, np.ones(1) if pool.linear else _slope(pool, means))


def _compound(pool: Pool, values: FloatArray, errors: FloatArray, slope: FloatArray) -> Component:
    if len(values) >= MIN_INSTANCES:
        found = jackknife(pool.combine(leave_one_out(values)))
        if found.u > 1e-13:
            return found
    return _shots(errors, slope)


def _shots(errors: FloatArray, slope: FloatArray) -> Component:
    """Shot noise of the pooled value, by its slope in each column mean."""
    count = np.maximum(np.isfinite(errors).sum(axis=0), 1)
    return Component(math.sqrt(float((np.nansum(errors**2, axis=0) / count**2) @ slope**2)))


def _runs(columns: Table, slope: FloatArray) -> BetweenRuns:
    """Between-run variation of the pooled value, linear in the columns."""
    values = np.where(np.isfinite(columns.errors), columns.values, np.nan)
    return between_runs(values @ slope, np.sqrt(columns.errors**2 @ slope**2))


def _slope(pool: Pool, means: FloatArray) -> FloatArray:
    """(c,) derivative of the pooled value by each column mean, by central differences."""
    step = 1e-3 * float(np.abs(means).max()) or 1e-3
    moves = step * np.eye(len(means))
    return np.asarray(pool.combine(means + moves) - pool.combine(means - moves)) / (2 * step)

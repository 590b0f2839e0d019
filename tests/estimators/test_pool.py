"""Pooling over instances: against direct formulas and explicit refits."""

import numpy as np
import pytest
import scipy.stats
from numpy.testing import assert_allclose

from rcbench.estimators.decay import fit
from rcbench.estimators.pool import MEAN, ROOT_MEAN_SQUARE, Table, decay_pool, difference, interval, pool_for
from rcbench.statistics import JACKKNIFE, OVER_INSTANCES, SHOTS_ONLY

LAYERS = np.array([2.0, 4, 8, 16])


def table_of(values, errors=0.01):
    values = np.asarray(values, dtype=float)
    while values.ndim < 3:
        values = values[..., None]
    return Table(values=values, errors=np.broadcast_to(errors, values.shape).astype(float))


def decays(count, seed=1, noise=0.01):
    rng = np.random.default_rng(seed)
    q = rng.normal(0.96, 0.01, (count, 1))
    return 0.9 * q**LAYERS + rng.normal(0, noise, (count, 4))


def test_self_fidelity_is_averaged_by_its_squares_and_nothing_else_is():
    assert pool_for("self_fidelity") is ROOT_MEAN_SQUARE
    assert pool_for("xeb_fidelity") is MEAN
    values = np.array([0.5, -0.1, 0.7, 0.4, 0.6])
    found = interval(ROOT_MEAN_SQUARE, table_of(values), 0.95)
    squares = values * np.abs(values)
    low, high = scipy.stats.ttest_1samp(squares, 0).confidence_interval(0.95)
    assert_allclose(found.value, np.sqrt(squares.mean()))
    assert_allclose([found.low, found.high], np.sign([low, high]) * np.sqrt(np.abs([low, high])))
    assert found.kind == OVER_INSTANCES


def test_paired_difference_drops_the_scatter_between_circuits():
    rng = np.random.default_rng(2)
    truth = rng.uniform(0, 1, 10)
    found = difference(MEAN, table_of(truth + rng.normal(0, 0.01, 10)), table_of(truth, 0.0))
    assert found.stat.u < 0.006
    assert found.stat.dof == 9
    assert abs(found.value) < 4 * 0.01 / np.sqrt(10)


def test_paired_difference_of_roots_is_a_jackknife_of_both_sides():
    rng = np.random.default_rng(3)
    measured, model = rng.uniform(0.4, 0.8, 8), rng.uniform(0.5, 0.7, 8)
    found = difference(ROOT_MEAN_SQUARE, table_of(measured), table_of(model, 0.0))

    def gap(keep):
        return np.sqrt(np.mean(measured[keep] ** 2)) - np.sqrt(np.mean(model[keep] ** 2))

    left = [gap(np.arange(8) != i) for i in range(8)]
    assert_allclose(found.value, gap(np.arange(8)))
    assert_allclose(found.stat.u, np.sqrt(7 / 8 * np.sum((np.array(left) - np.mean(left)) ** 2)))


def test_fit_interval_leaves_out_whole_instances():
    data = decays(7)
    pool = decay_pool("spam", LAYERS, np.ones(4), 3)
    found = interval(pool, table_of(data[:, None, :]), 0.95)
    left = np.array([fit(np.delete(data, i, axis=0).mean(axis=0), LAYERS, np.ones(4)).amplitude for i in range(7)])
    assert_allclose(found.value, fit(data.mean(axis=0), LAYERS, np.ones(4)).amplitude)
    assert_allclose(found.std_error, np.sqrt(6 / 7 * np.sum((left - left.mean()) ** 2)))
    assert (found.kind, found.dof) == (JACKKNIFE, 6)


@pytest.mark.parametrize("key", ["layer_loss", "spam"])
def test_fit_of_few_instances_carries_the_shot_noise_through(key):
    """Two instances: the stated error against the scatter of 400 redrawn data sets, 4 times 3.5 %."""
    rng = np.random.default_rng(4)
    pool = decay_pool(key, LAYERS, np.ones(4), 3)
    truth = 0.9 * 0.96**LAYERS
    drawn = [interval(pool, table_of(truth + rng.normal(0, 0.02, (2, 1, 4)), 0.02), 0.95) for _ in range(400)]
    assert drawn[0].kind == SHOTS_ONLY
    assert_allclose(np.mean([found.std_error for found in drawn]), np.std([found.value for found in drawn]), rtol=0.14)


def test_a_fit_that_is_not_quite_exponential_bends_data_and_prediction_alike():
    """A prediction with a plateau: the same data as prediction differ by nothing."""
    curve = 0.1 + 0.8 * 0.9**LAYERS + np.random.default_rng(5).normal(0, 0.01, (6, 1, 4))
    found = difference(decay_pool("layer_loss", LAYERS, np.ones(4), 3), table_of(curve), table_of(curve, 0.0))
    assert found.value == 0


def test_an_instance_that_lacks_a_depth_still_counts_at_the_others():
    data = decays(6)[:, None, :]
    data[2, 0, 3] = np.nan
    found = interval(decay_pool("layer_loss", LAYERS, np.ones(4), 3), table_of(data), 0.95)
    assert_allclose(found.value, (1 - 4.0**-3) * (1 - fit(np.nanmean(data[:, 0], axis=0), LAYERS, np.ones(4)).rate))


def test_repeats_that_drift_together_widen_the_interval():
    rng = np.random.default_rng(6)
    steady = 0.5 + rng.normal(0, 0.01, (10, 3, 1))
    drifting = steady + np.array([-0.1, 0.0, 0.1])[:, None]
    narrow, wide = interval(MEAN, table_of(steady), 0.95), interval(MEAN, table_of(drifting), 0.95)
    assert_allclose(narrow.value, wide.value)
    assert_allclose(wide.std_error, 0.1 / np.sqrt(3), rtol=0.1)
    assert wide.dof < 3

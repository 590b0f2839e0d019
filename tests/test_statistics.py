"""Intervals, uncertainties and tests against scipy, the GUM and closed forms."""

import math

import numpy as np
import pytest
import scipy.stats
from numpy.testing import assert_allclose

from rcbench.statistics import (
    OVER_INSTANCES,
    SHOTS_ONLY,
    Component,
    between_runs,
    combine,
    equivalence,
    holm,
    jackknife,
    leave_one_out,
    quantile,
    scatter,
    t_interval,
    u_to_settle,
)


def test_interval_over_instances_is_students():
    values = np.random.default_rng(1).normal(0.5, 0.1, 12)
    found = t_interval(values, np.full(12, 9.9), 0.9)
    low, high = scipy.stats.ttest_1samp(values, 0).confidence_interval(0.9)
    assert_allclose([found.low, found.high, found.dof], [low, high, 11])
    assert found.kind == OVER_INSTANCES


def test_fewer_than_five_instances_give_shot_noise_only_and_say_so():
    values, errors = np.array([0.1, 0.9, 0.5]), np.array([0.03, 0.04, 0.12])
    found = t_interval(values, errors, 0.95)
    assert found.kind == SHOTS_ONLY == "shots only, these circuits"
    assert_allclose(found.std_error, 0.13 / 3)
    assert_allclose(found.high - found.low, 2 * 1.959964 * 0.13 / 3, rtol=1e-6)
    assert found.dof == math.inf


def test_equal_values_fall_back_on_shot_noise():
    assert scatter(np.ones(8), np.full(8, 0.02)) == Component(pytest.approx(0.02 / math.sqrt(8)), math.inf)


def test_effective_degrees_of_freedom_are_those_of_the_gauge_block_example():
    """JCGM 100:2008 (GUM), H.1.6: parts of 25, 9.7, 2.9 and 16.6 nm give u = 32 nm with 16.7 degrees of freedom."""
    found = combine(Component(25, 18), Component(9.7, 25.6), Component(2.9, 50), Component(16.6, 2))
    assert_allclose([found.u, found.dof], [32, 16.7], rtol=0.011)


def test_parts_that_are_known_leave_the_degrees_of_freedom_to_the_others():
    assert combine(Component(0.0), Component(0.0)) == Component(0.0, math.inf)
    assert combine(Component(3.0, 7), Component(0.0)) == Component(3.0, pytest.approx(7))
    assert combine(Component(3.0), Component(4.0)) == Component(5.0, math.inf)


def test_jackknife_of_a_mean_is_the_standard_error_of_the_mean():
    values = np.random.default_rng(2).normal(size=9)
    assert_allclose(jackknife(leave_one_out(values)).u, values.std(ddof=1) / 3)


def test_leaving_one_out_skips_what_is_missing():
    values = np.array([[1.0, 2.0], [3.0, np.nan], [5.0, 6.0]])
    assert_allclose(leave_one_out(values), [[4, 6], [3, 4], [2, 2]])


@pytest.mark.parametrize("difference", [-0.04, 0.0, 0.02, 0.2])
def test_equivalence_is_two_one_sided_t_tests_of_scipy(difference):
    values = np.random.default_rng(3).normal(0, 0.08, 15)
    values += difference - values.mean()
    u = Component(float(values.std(ddof=1) / math.sqrt(15)), 14)
    found = equivalence(difference, u, 0.05, 0.05)
    above = scipy.stats.ttest_1samp(values, -0.05, alternative="greater").pvalue
    below = scipy.stats.ttest_1samp(values, 0.05, alternative="less").pvalue
    assert_allclose(found.p_value, max(above, below), rtol=1e-9)
    assert found.inside == (max(above, below) <= 0.05)
    assert found.outside == (difference == 0.2)


def test_equivalence_without_uncertainty_compares_with_the_margin():
    assert equivalence(0.04, Component(0.0), 0.05, 0.05).inside
    assert equivalence(0.06, Component(0.0), 0.05, 0.05).outside


def test_holm_rejects_step_by_step():
    """Four tests at 5 %: 0.005 <= 0.05 / 4 and 0.01 <= 0.05 / 3, then 0.03 > 0.05 / 2 ends it, also for 0.04."""
    assert holm([0.01, 0.04, 0.03, 0.005], 0.05).tolist() == [True, False, False, True]
    assert holm([], 0.05).tolist() == []


def test_instances_for_equivalence_follow_the_published_formula():
    """Margin 0.05, standard deviation 0.08, power 0.8: 22 instances in the normal approximation."""
    u = u_to_settle(0.05, 0.05, 0.8, 0.0, two_sided=True)
    assert math.ceil((0.08 / u) ** 2) == 22
    assert u_to_settle(0.05, 0.05, 0.8, 0.05, two_sided=True) == 0


def test_normal_quantiles_are_those_of_infinitely_many_degrees_of_freedom():
    assert_allclose(quantile(0.975, math.inf), quantile(0.975, 1e9))


@pytest.mark.parametrize("instances", [3, 12])
def test_between_run_component_covers_what_runs_share(instances):
    """4000 tables of 4 runs: shared drift 0.05, own 0.03, shots 0.02; stated variance to 4 sigma of true, 6 %."""
    rng = np.random.default_rng(6)
    drift, own, shot, runs = 0.05, 0.03, 0.02, 4
    means, variances, beyond = [], [], []
    for _ in range(4000):
        table = rng.normal(0, drift, runs) + rng.normal(0, math.hypot(own, shot), (instances, runs))
        found = between_runs(table, np.full(table.shape, shot))
        rest = scatter(table.mean(axis=1), np.full(instances, shot / 2)).u
        means.append(table.mean())
        variances.append(rest**2 + found.component.u**2)
        beyond.append(found.std_dev)
    assert_allclose(np.mean(variances), np.var(means), rtol=0.1)
    assert_allclose(np.sqrt(np.mean(np.square(beyond))), math.hypot(drift, own), rtol=0.05)


def test_scatter_between_circuits_is_no_variation_between_runs():
    table = np.random.default_rng(7).normal(0, 1, (20, 1)) + np.zeros((20, 3))
    found = between_runs(table, np.full((20, 3), 0.01))
    assert found.std_dev == 0
    assert found.component.u < 1e-9


def test_one_run_has_no_variation_and_missing_repeats_leave_their_instance_out():
    assert between_runs(np.ones((5, 1)), np.ones((5, 1))).component.u == 0
    table = np.array([[1.0, 2.0], [1.0, 2.0], [np.nan, 40.0]])
    found = between_runs(table, np.zeros((3, 2)))
    assert_allclose(found.component.u, math.sqrt(0.5 / 2))
    assert found.component.dof == 1

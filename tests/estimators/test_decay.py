"""Decay fits against scipy's least squares and exact curves."""

import numpy as np
import pytest
import scipy.optimize
from numpy.testing import assert_allclose

from rcbench.estimators.decay import depth_weights, fit, layer_loss


@pytest.mark.parametrize(("a", "q"), [(1.0, 1.0), (0.9, 0.97), (0.8, 0.6), (0.95, 1.01), (0.5, 0.05)])
@pytest.mark.parametrize("layers", [(0, 2, 4, 8), (4, 8, 16, 24, 40), (1, 2, 3)])
def test_exact_exponentials_are_found(a, q, layers):
    m = np.array(layers, dtype=float)
    found = fit(a * q**m, m, np.ones(len(m)))
    assert_allclose(found.curve(m), a * q**m, atol=1e-13)
    if q >= 0.6 or layers[0] < 4:
        assert_allclose([found.amplitude, found.rate], [a, q], rtol=1e-11)


def test_fit_is_the_weighted_least_squares_of_scipy():
    rng = np.random.default_rng(1)
    m = np.array([2.0, 4, 8, 12, 20])
    weights = np.array([1.0, 0.9, 0.7, 0.5, 0.8])
    data = 0.9 * 0.93**m + rng.normal(0, 0.03, (40, 5))
    found = fit(data, m, weights)
    for row, a, q in zip(data, found.amplitude, found.rate, strict=True):
        best, _ = scipy.optimize.curve_fit(
            lambda m, a, q: a * q**m, m, row, p0=(0.9, 0.93), sigma=weights**-0.5, xtol=1e-12, ftol=1e-12
        )
        assert_allclose([a, q], best, rtol=2e-6)


def test_many_data_sets_are_fitted_at_once_whatever_their_shape():
    m = np.array([0.0, 2, 4])
    data = np.full((3, 2, 3), 0.5) * 0.9**m
    found = fit(data, m, np.ones(3))
    assert found.amplitude.shape == found.rate.shape == (3, 2)
    assert_allclose(found.rate, 0.9, rtol=1e-6)


def test_data_below_zero_give_no_amplitude_and_no_warning():
    m = np.array([400.0, 401, 402])
    assert fit(-np.ones(3), m, np.ones(3)).amplitude == 0
    assert np.isfinite(fit(np.array([1.0, 0, 0]), m, np.ones(3)).amplitude)


def test_loss_of_a_layer_is_the_process_infidelity_of_a_depolarising_layer():
    """Depolarising by 1 - q: non-identity Paulis have probability (1 - q)(1 - 4^-n)."""
    m = np.array([2.0, 4, 6])
    assert_allclose(layer_loss(fit(0.8 * 0.95**m, m, np.ones(3)), 2), 0.05 * 15 / 16, rtol=1e-6)


def test_weights_follow_shot_noise_and_level_off_where_circuits_scatter_more():
    errors = np.array([[0.01, 0.02]] * 6)
    same = np.zeros((6, 2))
    assert_allclose(depth_weights(same, errors), [1, 0.25])
    wide = np.random.default_rng(0).normal(0, 0.5, (6, 2))
    assert depth_weights(wide, errors)[1] > 0.99
    assert_allclose(depth_weights(same, np.zeros((6, 2))), 1)
    assert_allclose(
        depth_weights(np.array([[0.5, np.nan], [0.6, 0.4], [0.5, 0.4]]), np.full((3, 2), 0.02)), 1, rtol=0.2
    )

"""The fitted front against the published butterfly velocity and the exact average it is read from."""

from __future__ import annotations

import numpy as np
import pytest
from sampled_brickwork import assert_mean
from signature_circuits import brickworks, products

from rcbench.errors import InputError
from rcbench.reference import haar
from rcbench.reference.brickwork import spreading as exact
from rcbench.signatures.evolution import operators
from rcbench.signatures.otoc import infinite_temperature_map
from rcbench.signatures.paulis import pauli_weights
from rcbench.signatures.spreading import end_density, fit_front, operator_size, size_distribution


def test_the_front_of_the_exact_average_has_the_published_velocity():
    """v_B = 3/5 site a layer (Nahum, Vijay and Haah, arXiv:1705.08975) within 1 % at 200 sites, width 4/5 in 3 %."""
    growth = 1 - exact.otoc_map(200, 0, 250)
    fit = fit_front(growth, range(251), range(200), first_depth=20)
    assert fit.velocity == pytest.approx(exact.butterfly_velocity(), rel=0.01)
    assert fit.width == pytest.approx(np.sqrt(exact.front_variance()), rel=0.03)
    assert fit.misfit < 0.03
    assert fit.instances == 1
    assert np.isnan(fit.chi_square)


def test_a_front_made_by_the_law_is_found_again():
    depths, distances = np.arange(1, 30), np.arange(40)
    growth = np.array([exact.front_profile(distances.astype(float), d) for d in depths])
    fit = fit_front(growth, depths, distances)
    assert fit.velocity == pytest.approx(0.6, abs=1e-6)
    assert fit.width == pytest.approx(0.8, abs=1e-5)
    assert fit.misfit < 1e-6


def test_sampled_fronts_agree_with_the_fit_of_their_exact_average():
    """30 brickworks of 7 qubits: velocity and width within 4 jackknife errors of those of the exact map."""
    n, depths = 7, (2, 3, 4, 5, 6, 7)
    samples = [infinite_temperature_map(brickworks(n, depths, s), 0).mean(axis=2) for s in range(30)]
    fit = fit_front(1 - np.array(samples), depths, range(n))
    ideal = fit_front(1 - exact.otoc_map(n, 0, 7)[list(depths)], depths, range(n))
    assert abs(fit.velocity - ideal.velocity) < 4 * fit.velocity_error
    assert abs(fit.width - ideal.width) < 4 * fit.width_error
    assert 0 < fit.velocity_error < 0.2
    assert fit.instances == 30


def test_ends_of_brickwork_operators_average_to_the_exact_walk():
    """Biased walk with 4/5 and 1/5; 80 brickworks of 5 qubits, 4 sigma."""
    n, depth = 5, 3
    ends = []
    for seed in range(80):
        ((_, operator),) = operators(brickworks(n, (depth,), seed), 0, "Z", dtype="complex128")
        ends.append(end_density(pauli_weights(operator)))
    expected = exact.end_density(n, 0, depth)
    for x, value in enumerate(expected):
        if value > 1e-12:
            assert_mean(np.array(ends)[:, x], value)


def test_a_deep_brickwork_has_the_sizes_of_a_scrambled_operator():
    """Binomial(n, 3/4) without size 0; one brickwork of 7 qubits at depth 40, shares within 0.02."""
    ((_, operator),) = operators(brickworks(7, (40,), 1), 3, "Z")
    weights = pauli_weights(operator)
    np.testing.assert_allclose(size_distribution(weights), haar.operator_size_distribution(7), atol=0.02)
    assert operator_size(weights) == pytest.approx(haar.operator_size(7), abs=0.03)


def test_products_keep_the_size_at_one():
    ((_, operator),) = operators([products(5, 3)], 2, "X", dtype="complex128")
    np.testing.assert_allclose(size_distribution(pauli_weights(operator)), [0, 1, 0, 0, 0, 0], atol=1e-12)


def test_a_front_with_too_few_points_is_refused_with_what_would_work():
    growth = 1 - exact.otoc_map(6, 0, 20)
    with pytest.raises(InputError, match="3 depths or more before the front meets the end"):
        fit_front(growth[[0, 18, 20]], [0, 18, 20], range(6))
    with pytest.raises(InputError, match="growth"):
        fit_front(growth, [1, 2], range(6))
    with pytest.raises(InputError, match="right or left"):
        end_density(np.ones((4, 4)), "top")

"""The output distribution of Haar states against sampled states: Porter-Thomas at finite dimension."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sampled_brickwork import assert_mean
from scipy.stats import beta

from rcbench.errors import InputError
from rcbench.reference import porter_thomas as reference


def outputs(dimension: int, states: int, seed: int) -> np.ndarray:
    """(states, D) output distributions of Haar states, from complex normal amplitudes."""
    rng = np.random.default_rng(seed)
    p = rng.normal(size=(states, dimension)) ** 2 + rng.normal(size=(states, dimension)) ** 2
    return p / p.sum(axis=1, keepdims=True)


P16, P64 = outputs(16, 8000, 1), outputs(64, 4000, 2)


def test_the_law_is_the_beta_distribution():
    """Beta(1, D - 1), here from scipy; Prob(D p > 1) at D = 16 is 0.3798, not 1/e."""
    for d in (2, 16, 1 << 30):
        y = np.linspace(0, min(d, 40), 50)
        assert_allclose(reference.tail(y, d), beta.sf(y / d, 1, d - 1), rtol=1e-7, atol=1e-15)
        assert_allclose(reference.density(y[:-1], d), beta.pdf(y[:-1] / d, 1, d - 1) / d, rtol=1e-7, atol=1e-15)
    assert_allclose(reference.tail(np.array(1.0), 16), 0.3798, atol=5e-5)
    assert_allclose(reference.tail(np.array(1.0), 1 << 60), np.exp(-1), rtol=1e-12)
    assert_allclose(reference.tail(np.array([-1.0, 20.0]), 16), [1, 0])
    assert_mean((16 * P16 > 1).mean(axis=1), float(reference.tail(np.array(1.0), 16)))


@pytest.mark.parametrize(("k", "value"), [(2, 1.9692), (3, 5.7287), (4, 21.89)])
def test_moments_at_64_outcomes(k, value):
    """Boixo et al., Nature Phys. 14, 595 (2018), at finite D. 4 sigma."""
    assert_allclose(reference.moment(k, 64), value, rtol=2e-4)
    assert_mean(((64 * P64) ** k).mean(axis=1), reference.moment(k, 64))


def test_moments_of_large_dimension_are_factorials():
    assert_allclose([reference.moment(k, 1 << 1000) for k in range(5)], [1, 1, 2, 6, 24], rtol=1e-12)


@pytest.mark.parametrize(("d", "value"), [(16, 2.38073), (64, 3.74389), (256, 5.12434)])
def test_entropy_of_the_output_distribution(d, value):
    """Harmonic number less 1, in nats. 4 sigma."""
    assert_allclose(reference.entropy(d), value, atol=6e-6)
    p = {16: P16, 64: P64, 256: outputs(256, 500, 3)}[d]
    assert_mean(-(p * np.log(p)).sum(axis=1), value)


def test_perfect_and_uniform_cross_entropy_differ_by_a_nat():
    """Uniform sampling scores 4.72827 nats at D = 64; the gap is 1 - 1/D."""
    assert_allclose(reference.cross_entropy_of_uniform(64), 4.72827, atol=6e-6)
    assert_mean(-np.log(P64).mean(axis=1), reference.cross_entropy_of_uniform(64))
    assert_allclose(reference.cross_entropy_of_uniform(64) - reference.entropy(64), 63 / 64, rtol=1e-12)
    assert_allclose(reference.entropy(1 << 50), 50 * np.log(2) - 1 + np.euler_gamma, rtol=1e-12)


@pytest.mark.parametrize(("d", "mean"), [(16, 15 / 17), (64, 63 / 65)])
def test_linear_cross_entropy_of_perfect_sampling(d, mean):
    """(D - 1)/(D + 1), and its spread between states. 4 sigma, variance within 12 %."""
    p = {16: P16, 64: P64}[d]
    xeb = d * (p**2).sum(axis=1) - 1
    assert_allclose(reference.linear_xeb(d), mean, rtol=1e-14)
    assert_mean(xeb, mean)
    assert_allclose(xeb.var(), reference.linear_xeb_variance(d), rtol=0.12)
    assert_allclose(reference.collision_probability(d), (1 + mean) / d, rtol=1e-14)


def test_spread_of_one_shot():
    """Variance of D p(x): 1.7956 at D = 64 and 1.9462 at 256 for ideal shots, (D - 1)/(D + 1) for uniform ones."""
    assert_allclose(reference.linear_xeb_variance(64), 0.05525, atol=6e-6)
    assert_allclose([reference.shot_variance(64), reference.shot_variance(256)], [1.7956, 1.9462], atol=6e-5)
    score = 64 * P64
    assert_mean((P64 * score**2).sum(axis=1) - (P64 * score).sum(axis=1) ** 2, reference.shot_variance(64))
    assert_mean(score.var(axis=1), reference.uniform_shot_variance(64))


def test_a_dimension_below_two_is_refused():
    for call in (lambda: reference.entropy(1), lambda: reference.tail(np.zeros(1), 1), lambda: reference.moment(2, 0)):
        with pytest.raises(InputError, match=r"dimension: found \d; allowed: a whole number, 2 or more"):
            call()

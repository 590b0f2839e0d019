"""Purities and entropies of regions against the published values for Haar-random states."""

from __future__ import annotations

import numpy as np
import pytest

from rcbench.errors import InputError
from rcbench.signatures.entropy import purity, renyi2_entropy, vonneumann_entropy


def haar_states(n: int, batch: int, seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    states = rng.normal(size=(batch, 2**n)) + 1j * rng.normal(size=(batch, 2**n))
    return states / np.linalg.norm(states, axis=1, keepdims=True)


def sizes(n_a: int, n: int) -> tuple[int, int]:
    return 2 ** min(n_a, n - n_a), 2 ** max(n_a, n - n_a)


CASES = [(1, 4), (3, 4), (3, 6), (4, 8)]


@pytest.mark.parametrize(("n_a", "n"), CASES)
def test_mean_purity_is_that_of_lubkin(n_a, n):
    """Lubkin, J. Math. Phys. 19, 1028 (1978) (from memory); 4 sigma, fixed seed."""
    a, b = sizes(n_a, n)
    found = purity(haar_states(n, 2000, n_a), range(n_a))
    assert abs(found.mean() - (a + b) / (a * b + 1)) < 4 * found.std() / np.sqrt(len(found))


@pytest.mark.parametrize(("n_a", "n"), [(2, 6), (3, 6)])
def test_variance_of_the_purity_is_that_of_scott_and_caves(n_a, n):
    """Scott and Caves, J. Phys. A 36, 9553 (2003) (from memory); 10 %, 5000 states."""
    a, b = sizes(n_a, n)
    d = a * b
    exact = 2 * (a**2 - 1) * (b**2 - 1) / ((d + 1) ** 2 * (d + 2) * (d + 3))
    assert purity(haar_states(n, 5000, 5), range(n_a)).var() == pytest.approx(exact, rel=0.1)


@pytest.mark.parametrize(("n_a", "n"), CASES)
def test_mean_entropy_is_that_of_page(n_a, n):
    """Page, Phys. Rev. Lett. 71, 1291 (1993), proved in Sen, hep-th/9601132; nats; 4 sigma, fixed seed."""
    a, b = sizes(n_a, n)
    page = sum(1 / k for k in range(b + 1, a * b + 1)) - (a - 1) / (2 * b)
    found = vonneumann_entropy(haar_states(n, 1000, n_a), range(n_a))
    assert abs(found.mean() - page) < 4 * found.std() / np.sqrt(len(found))


@pytest.mark.parametrize(("n_a", "n"), [(3, 6), (4, 8)])
def test_mean_renyi2_entropy_is_the_second_order_value(n_a, n):
    """-ln of the mean purity, plus variance over twice its square; 0.007 nats, third order left out."""
    a, b = sizes(n_a, n)
    d = a * b
    mean = (a + b) / (d + 1)
    variance = 2 * (a**2 - 1) * (b**2 - 1) / ((d + 1) ** 2 * (d + 2) * (d + 3))
    found = renyi2_entropy(haar_states(n, 2000, 3), range(n_a))
    assert found.mean() == pytest.approx(-np.log(mean) + variance / (2 * mean**2), abs=0.007)


def test_both_sides_of_a_cut_agree_and_the_whole_is_pure():
    states = haar_states(6, 20, 1)
    for region in ([0, 3], [5], [1, 2, 4]):
        other = [q for q in range(6) if q not in region]
        np.testing.assert_allclose(purity(states, region), purity(states, other), rtol=1e-12)
        np.testing.assert_allclose(vonneumann_entropy(states, region), vonneumann_entropy(states, other), rtol=1e-10)
    for region in ([], range(6)):
        np.testing.assert_allclose(purity(states, region), 1)
        np.testing.assert_allclose(vonneumann_entropy(states, region), 0, atol=1e-12)
        np.testing.assert_allclose(renyi2_entropy(states, region), 0, atol=1e-12)


def test_scattered_regions_equal_the_partial_trace():
    states = haar_states(5, 3, 2)
    for state, found in zip(states, purity(states, [4, 1]), strict=True):
        tensor = state.reshape((2,) * 5)
        rho = np.einsum("abcde,afcdg->ebgf", tensor, tensor.conj()).reshape(4, 4)
        assert found == pytest.approx(np.trace(rho @ rho).real, rel=1e-12)


def test_a_bell_pair_has_one_bit_whatever_the_precision():
    bell = np.array([1, 0, 0, 1], dtype=np.complex64) / np.sqrt(np.float32(2))
    assert vonneumann_entropy(bell, [0])[0] == pytest.approx(np.log(2), abs=1e-6)
    assert renyi2_entropy(bell, [1])[0] == pytest.approx(np.log(2), abs=1e-6)


@pytest.mark.parametrize("region", [[0, 0], [5], [-1]])
def test_a_region_outside_the_state_is_refused(region):
    with pytest.raises(InputError, match="different qubits from 0 to 4"):
        purity(haar_states(5, 1, 0), region)

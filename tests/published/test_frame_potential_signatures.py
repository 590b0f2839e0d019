"""Frame potentials against the counts of Haar and of the Clifford group, and their error against its published law."""

from __future__ import annotations

import numpy as np
import pytest
from sampled_brickwork import sampled_unitaries
from scipy.stats import unitary_group

from rcbench.circuits.cliffords import CLIFFORD1
from rcbench.errors import InputError
from rcbench.reference import frame_potentials as reference
from rcbench.reference.brickwork.frame_potential import frame_potential_k2
from rcbench.signatures.frame_potential import (
    FramePotential,
    design_depth,
    estimate,
    instances_to_resolve,
    of_states,
    of_unitaries,
    overlaps,
)


@pytest.mark.parametrize("k", [1, 2, 3, 4])
def test_one_qubit_cliffords_have_the_published_counts(k):
    """All 24, pairs with themselves too: 1, 2, 5, 15 (Zhu et al., arXiv:1609.08172); exact to rounding."""
    squares = overlaps(np.array(CLIFFORD1))
    assert (squares**k).mean() == pytest.approx([1, 2, 5, 15][k - 1], abs=1e-10)
    value, _ = estimate(squares, k)
    assert value == pytest.approx((24 * [1, 2, 5, 15][k - 1] - 4**k) / 23, abs=1e-10)


@pytest.mark.parametrize(("k", "d"), [(1, 2), (2, 2), (1, 4), (2, 4)])
def test_haar_unitaries_of_scipy_have_the_count_of_permutations(k, d):
    """Rains, Electron. J. Combin. 5, R12 (1998); 600 unitaries, 4 of the stated standard errors."""
    found = of_unitaries(unitary_group.rvs(d, size=600, random_state=10 * k + d), k)
    assert found.haar == reference.unitary(k, d)
    assert abs(found.value - found.haar) < 4 * found.std_error
    assert not found.warning


def test_haar_states_have_the_value_of_the_symmetric_space():
    """1 / binomial(D + k - 1, k); columns of scipy's unitaries, 400 states, 4 sigma."""
    states = unitary_group.rvs(8, size=400, random_state=3)[:, :, 0]
    for k in (1, 2, 3):
        found = of_states(states, k)
        assert found.haar == pytest.approx(reference.state(k, 8))
        assert abs(found.value - found.haar) < 4 * found.std_error


def test_brickworks_have_the_exact_second_frame_potential():
    """Layer matrices of Hunter-Jones, arXiv:1905.12053; 4 qubits, 300 instances, 4 sigma."""
    for depth in (2, 4):
        found = of_unitaries(sampled_unitaries(4, depth, 300, depth), 2)
        assert abs(found.value - frame_potential_k2(4, depth)) < 4 * found.std_error


def test_the_estimator_has_no_bias_and_the_scatter_of_a_degenerate_statistic():
    """Var = 2 (F(2k) - F(k)^2) / (N (N - 1)) for Haar; N = 10, 1500 repeats: mean 4 sigma, variance 15 %."""
    d, count, repeats = 4, 10, 1500
    draws = unitary_group.rvs(d, size=count * repeats, random_state=6).reshape(repeats, count, d, d)
    found = np.array([estimate(overlaps(members), 1) for members in draws])
    values, errors = found.T
    assert abs(values.mean() - 1) < 4 * values.std() / np.sqrt(repeats)
    exact = reference.haar_estimator_variance(1, d, count)
    assert values.var() == pytest.approx(exact, rel=0.15)
    # the jackknife of a degenerate statistic is up to twice too large in variance, never too small on average
    assert 0.9 * exact < np.mean(errors**2) < 2.5 * exact


def test_overlaps_do_not_depend_on_the_memory_given():
    members = unitary_group.rvs(8, size=20, random_state=1)
    whole = overlaps(members)
    traces = np.abs(np.einsum("aij,bij->ab", members.conj(), members)) ** 2
    np.testing.assert_allclose(whole, traces, atol=1e-10)
    np.testing.assert_allclose(overlaps(members, memory_limit=24 * 400 + 2 * 16 * 20 * 3), whole, atol=1e-10)
    with pytest.raises(InputError, match="memory"):
        overlaps(members, memory_limit=100)


def test_a_controlled_ensemble_of_few_circuits_is_told_apart():
    """The same two unitaries over and over: far above Haar, by many standard errors."""
    few = np.array([unitary_group.rvs(4, random_state=s % 2) for s in range(40)])
    found = of_unitaries(few, 2)
    assert found.excess > 10
    assert found.value - found.haar > 4 * found.std_error


def test_too_few_instances_are_said_with_the_number_that_could():
    found = of_unitaries(unitary_group.rvs(16, size=8, random_state=1), 4)
    needed = instances_to_resolve(4, 16, 1 / 6)
    assert f"{needed} could" in found.warning
    assert of_unitaries(unitary_group.rvs(16, size=needed, random_state=1), 4).warning == ""
    with pytest.raises(InputError, match="4 or more"):
        of_unitaries(unitary_group.rvs(4, size=3, random_state=1), 1)
    with pytest.raises(InputError, match="1, 2, 3 or 4"):
        of_unitaries(unitary_group.rvs(4, size=9, random_state=1), 5)


def potential(value: float, error: float, count: int = 500) -> FramePotential:
    return FramePotential(k=2, value=value, std_error=error, haar=2.0, instances=count)


def test_the_design_depth_is_the_first_from_which_all_are_close():
    values = [potential(v, 0.01) for v in (8.0, 2.1, 2.5, 2.15, 2.05)]
    found = design_depth([1, 2, 3, 4, 5], values, 16, 0.1)
    assert (found.depth, found.certain) == (4, True)
    noisy = design_depth([1, 2], [potential(9, 0.3, 20), potential(2.1, 0.3, 20)], 16, 0.1)
    assert (noisy.depth, noisy.certain) == (2, False)
    assert f"{instances_to_resolve(2, 16, 0.05)} could" in noisy.message
    none = design_depth([1, 2], [potential(9, 0.1), potential(4, 0.1)], 16, 0.1)
    assert none.depth is None
    assert "deeper circuits could" in none.message
    with pytest.raises(InputError, match="one or more depths"):
        design_depth([], [], 16)


def test_pairs_of_an_instance_with_itself_would_have_added_the_published_bias():
    """F (N - 1) / N + d^(2k) / N with the diagonal: 411.4 for 2 at d = 8, k = 2, N = 10; identity, 1e-9."""
    squares = overlaps(unitary_group.rvs(8, size=10, random_state=2))
    biased = (squares**2).mean()
    assert biased == pytest.approx(reference.with_diagonal(estimate(squares, 2)[0], 2, 8, 10), rel=1e-9)
    assert reference.with_diagonal(2.0, 2, 8, 10) == pytest.approx(411.4)

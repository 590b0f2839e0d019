"""Two inputs through one circuit: against reduced states from qiskit, and Haar means."""

from __future__ import annotations

import numpy as np
import pytest
from qiskit.quantum_info import DensityMatrix, Statevector, partial_trace
from sampled_brickwork import assert_mean
from scipy.stats import unitary_group
from signature_circuits import brickworks, products

from rcbench.engine.state import final_state
from rcbench.errors import InputError
from rcbench.signatures.distinguishability import (
    haar_total_variation,
    marginal_differences,
    overlap,
    total_variation,
    trace_distance,
)
from rcbench.signatures.evolution import twins, unitaries


def reduced(state: np.ndarray, region) -> np.ndarray:
    """qiskit counts qubits from the least significant bit."""
    n = len(state).bit_length() - 1
    out = [n - 1 - q for q in range(n) if q not in region]
    rho = partial_trace(Statevector(state), out) if out else DensityMatrix(Statevector(state))
    return rho.data


@pytest.mark.parametrize("region", [[0], [3], [1, 2], [0, 2, 4], [0, 1, 2, 3], [0, 1, 2, 3, 4]])
def test_distances_of_a_region_are_those_of_its_reduced_states(region):
    """qiskit's partial trace; half the trace norm by numpy; 1e-10."""
    circuits = brickworks(5, (1, 3), 4)
    for _, states in twins(circuits, dtype="complex128"):
        difference = reduced(states[0], region) - reduced(states[1], region)
        exact = np.linalg.svd(difference, compute_uv=False).sum() / 2
        assert trace_distance(states, region) == pytest.approx(exact, abs=1e-10)
        strings = np.abs(np.diag(difference).real).sum() / 2
        assert total_variation(states, region) == pytest.approx(strings, abs=1e-12)
        assert strings <= exact + 1e-12


def test_twins_are_both_branches_of_the_circuit_and_stay_orthogonal():
    """The global overlap is zero at every depth: 1e-24; nothing is lost in an ideal circuit."""
    circuits = brickworks(5, (0, 2, 6), 1)
    whole = dict(unitaries(circuits, dtype="complex128"))
    for place, states in twins(circuits, "01100", "01011", dtype="complex128"):
        np.testing.assert_allclose(states[0], whole[place][:, 0b01100], atol=1e-13)
        np.testing.assert_allclose(states[1], whole[place][:, 0b01011], atol=1e-13)
        assert overlap(states) < 1e-24
        assert trace_distance(states, range(5)) == pytest.approx(1, abs=1e-12)


def test_single_qubit_differences_are_expectation_values():
    ((_, states),) = twins(brickworks(4, (2,), 6), dtype="complex128")
    for q in range(4):
        change = reduced(states[0], [q]) - reduced(states[1], [q])
        found = marginal_differences(states)[q]
        exact = [np.trace(p @ change).real for p in ([[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]])]
        np.testing.assert_allclose(found, exact, atol=1e-12)
        assert trace_distance(states, [q]) == pytest.approx(np.linalg.norm(found) / 2, abs=1e-12)


@pytest.mark.parametrize(("n_region", "n"), [(1, 4), (2, 5), (5, 5), (3, 6)])
def test_random_orthogonal_pairs_have_the_mean_total_variation_of_beta_variables(n_region, n):
    """First two columns of scipy's unitaries; 400 pairs, 4 sigma."""
    draws = unitary_group.rvs(2**n, size=400, random_state=n)[:, :, :2].transpose(0, 2, 1)
    found = np.array([total_variation(pair, range(n_region)) for pair in draws])
    value = haar_total_variation(n_region, n)
    assert_mean(found, value) if n_region < n else assert_near(found.mean(), value)


def assert_near(found: float, value: float) -> None:
    """The orthogonality correction is of first order only: 3 % where the region is the whole."""
    assert found == pytest.approx(value, rel=0.03)


def test_large_registers_take_the_normal_law_without_a_jump():
    assert haar_total_variation(2, 17) == pytest.approx(haar_total_variation(2, 15) / 2, rel=1e-3)
    assert haar_total_variation(300, 600) < 1e-40


def test_products_keep_the_two_inputs_apart_where_they_differ_and_nowhere_else():
    ((_, states),) = twins([products(5, 2)], dtype="complex128")
    for q in range(5):
        assert trace_distance(states, [q]) == pytest.approx(float(q == 2), abs=1e-7)


def test_equal_inputs_and_bad_strings_are_refused():
    circuits = [products(3, 0)]
    with pytest.raises(InputError, match="differs from the first"):
        next(twins(circuits, "010", "010"))
    with pytest.raises(InputError, match="a string of 3 bits"):
        next(twins(circuits, "01", "010"))
    with pytest.raises(InputError, match="no empty region"):
        total_variation(np.eye(2, 8, dtype=complex), [])
    with pytest.raises(InputError, match="the two branches"):
        overlap(final_state(circuits[0]))

"""Nested commutators, thermal values and equal-energy inputs against dense matrices and scipy's exponential."""

from __future__ import annotations

import numpy as np
import pytest
from sampled_brickwork import pauli_at
from scipy.linalg import expm

from rcbench.errors import InputError
from rcbench.signatures.early_time import (
    dense_hamiltonian,
    exact_otoc,
    leading_growth,
    nested_commutators,
    otoc_series,
    support_by_order,
)
from rcbench.signatures.thermal import basis_energies, equal_energy_pair, thermal_state

N = 5
LETTERS = "IXYZ"
ISING = (
    [(1.0, f"Z{j} Z{j + 1}") for j in range(N - 1)]
    + [(0.9, f"X{j}") for j in range(N)]
    + [(0.5, f"Z{j}") for j in range(N)]
)
XXZ = [(c, f"{p}{j} {p}{j + 1}") for j in range(N - 1) for p, c in (("X", 1.0), ("Y", 1.0), ("Z", 0.6))]
MIXED = [*ISING, (0.3, "Y2 X3"), (-0.4, "Z1 X2"), (0.2, "Y0")]


def written_out(terms) -> np.ndarray:
    """The Hamiltonian from Kronecker products."""
    total = np.zeros((2**N, 2**N), dtype=complex)
    for c, text in terms:
        term = np.eye(2**N, dtype=complex)
        for piece in text.split():
            term = term @ pauli_at(LETTERS.index(piece[0]), int(piece[1:]), N)
        total += c * term
    return total


def evolved(h: np.ndarray, w: np.ndarray, time: float) -> np.ndarray:
    return expm(1j * h * time) @ w @ expm(-1j * h * time)


def operator(label: tuple[str, int]) -> np.ndarray:
    return pauli_at(LETTERS.index(label[0]), label[1], N)


@pytest.mark.parametrize("terms", [ISING, XXZ, MIXED])
def test_the_hamiltonian_is_the_sum_of_its_terms(terms):
    np.testing.assert_allclose(dense_hamiltonian(terms, N), written_out(terms), atol=1e-13)


@pytest.mark.parametrize("terms", [ISING, XXZ, MIXED])
@pytest.mark.parametrize(("w", "v"), [(("Z", 0), ("X", 2)), (("Y", 4), ("Z", 3)), (("X", 1), ("Y", 1))])
def test_the_series_meets_scipys_exponential_to_its_order(terms, w, v):
    """Twelve orders at t = 0.1: 1e-10; and the spectrum's own evolution 1e-12 at any time."""
    h, times = written_out(terms), np.array([0.05, 0.1, 0.7])
    exact = []
    for time in times:
        product = evolved(h, operator(w), time) @ operator(v)
        exact.append(np.trace(product @ product).real / 2**N)
    np.testing.assert_allclose(otoc_series(terms, N, w, v, times[:2], 12), exact[:2], atol=1e-10)
    np.testing.assert_allclose(exact_otoc(terms, N, w, v, times), exact, atol=1e-12)


def test_each_order_is_the_commutator_written_out():
    """L^k W / k! with L = i[H, .], by matrix products; 1e-11."""
    h, current = written_out(MIXED), operator(("Y", 1))
    for k, strings in enumerate(nested_commutators(MIXED, N, 1, "Y", 5)):
        if k:
            current = 1j * (h @ current - current @ h) / k
        found = sum(
            weight
            * np.linalg.multi_dot(
                [np.eye(2**N)] + [pauli_at([0, 1, 3, 2][(x >> j & 1) + 2 * (z >> j & 1)], j, N) for j in range(N)]
            )
            for (x, z), weight in strings.items()
        )
        np.testing.assert_allclose(found, current, atol=1e-11)


@pytest.mark.parametrize(
    ("w", "v"), [(("Z", 0), ("Z", 0)), (("Z", 0), ("Z", 1)), (("Z", 0), ("X", 2)), (("X", 4), ("Z", 2))]
)
def test_the_first_growth_at_a_distance_has_the_power_and_coefficient_of_the_exact_evolution(w, v):
    """Ratio of the exact 1 - F to c t^p tends to 1 with t^2: extrapolated from two times, 1 %."""
    power, coefficient = leading_growth(ISING, N, w, v)
    times = np.array([0.04, 0.08]) if power < 8 else np.array([0.12, 0.24])
    ratio = (1 - exact_otoc(ISING, N, w, v, times)) / (coefficient * times**power)
    assert (4 * ratio[0] - ratio[1]) / 3 == pytest.approx(1, abs=0.01)


def test_support_grows_by_at_most_a_site_an_order_and_leaves_the_rest_alone():
    found = support_by_order(XXZ, N, 0, "Z", 4)
    assert [int(row.sum()) for row in found] == [1, 2, 3, 4, 5]
    single = support_by_order(ISING, N, 0, "Z", 4)
    assert [int(row.sum()) for row in single] == [1, 1, 2, 2, 3]


def test_a_thermal_state_has_the_energy_asked_for_and_the_values_of_the_exponential():
    h = written_out(ISING)
    for energy in (-3.0, 0.0, 2.0):
        state = thermal_state(ISING, N, energy)
        rho = expm(-state.beta * h)
        rho /= np.trace(rho)
        assert np.trace(rho @ h).real == pytest.approx(energy, abs=1e-9)
        for letter, site in (("X", 0), ("Z", 2), ("Y", 1)):
            assert state.expectation(letter, site) == pytest.approx(
                np.trace(rho @ operator((letter, site))).real, abs=1e-9
            )
    with pytest.raises(InputError, match="ends of the spectrum"):
        thermal_state(ISING, N, 100.0)


def test_equal_energy_inputs_are_orthogonal_basis_states_of_the_same_mean_energy():
    first, second, energy = equal_energy_pair(ISING, N)
    diagonal = np.diag(written_out(ISING)).real
    np.testing.assert_allclose(basis_energies(ISING, N), diagonal, atol=1e-12)
    assert first != second
    assert diagonal[int(first, 2)] == pytest.approx(diagonal[int(second, 2)], abs=1e-9)
    assert diagonal[int(first, 2)] == pytest.approx(energy, abs=1e-9)


@pytest.mark.parametrize(
    ("term", "message"),
    [
        ("Z0 Z2", "two neighbouring sites"),
        ("Z0 Z0", "each site once"),
        ("Q1", "letters X, Y, Z with sites"),
        ("Z9", "from 0 to 4"),
        ("", "letters X, Y, Z with sites"),
    ],
)
def test_terms_that_are_not_nearest_neighbour_paulis_are_refused(term, message):
    with pytest.raises(InputError, match=message):
        nested_commutators([(1.0, term)], N, 0, "Z", 1)


def test_a_hamiltonian_that_carries_nothing_there_is_said():
    with pytest.raises(InputError, match="carries W to site 3"):
        leading_growth([(1.0, "Z0 Z1")], N, ("X", 0), ("X", 3))

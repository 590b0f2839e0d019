"""OTOCs of circuits against dense algebra, Haar averages, the exact brickwork average, and signs from stim."""

from __future__ import annotations

import numpy as np
import pytest
from sampled_brickwork import assert_mean, otocs, pauli_at
from scipy.stats import unitary_group
from signature_circuits import brickworks, clifford, pauli_string, products

from rcbench.errors import InputError
from rcbench.reference import haar
from rcbench.reference.brickwork import spreading as exact
from rcbench.reference.brickwork import strings
from rcbench.signatures.evolution import Evolution, adjoint, operators, unitaries
from rcbench.signatures.otoc import (
    infinite_temperature_map,
    light_cone_front,
    otocs_of_weights,
    state_otoc,
    typical_otoc,
)
from rcbench.signatures.paulis import applied, pauli_weights
from rcbench.signatures.spreading import end_density, operator_size, size_distribution, support


def test_the_map_is_the_trace_written_out():
    """Every site and letter, 1e-12."""
    n, site = 4, 1
    circuits = brickworks(n, (0, 1, 3, 5), 5)
    found = infinite_temperature_map(circuits, site, "Y", dtype="complex128")
    for place, u in unitaries(circuits, dtype="complex128"):
        for q in range(n):
            for letter in (1, 2, 3):
                value = otocs(u[None], pauli_at(letter, q, n), pauli_at(2, site, n))[0]
                assert found[place, q, letter - 1] == pytest.approx(value, abs=1e-12)


def test_haar_unitaries_have_the_otoc_of_roberts_and_yoshida():
    """-1/(d^2 - 1), spread sqrt(2)/d: arXiv:1610.04903; 2000 unitaries of 3 qubits, 4 sigma, spread 10 %."""
    n = 3
    v = pauli_at(3, 0, n)
    weights = [pauli_weights(u @ v @ u.conj().T) for u in unitary_group.rvs(2**n, size=2000, random_state=1)]
    found = np.array([otocs_of_weights(w)[2, 0] for w in weights])
    assert_mean(found, haar.otoc(n))
    assert found.std() == pytest.approx(haar.otoc_spread(n), rel=0.1)
    sizes = np.array([operator_size(w) for w in weights[:400]])
    assert_mean(sizes, haar.operator_size(n))
    ends = np.array([end_density(w) for w in weights[:400]])
    for x in range(n):
        assert_mean(ends[:, x], 3 * 4**x / (4**n - 1))


def test_brickworks_average_to_the_exact_map():
    """Nahum, Vijay and Haah, PRX 8, 021014 (2018); 150 Haar brickworks of 4 qubits, 4 sigma each point."""
    n, depths = 4, (1, 2, 3)
    maps = np.array(
        [infinite_temperature_map(brickworks(n, depths, s), 0, "Z", dtype="complex128") for s in range(150)]
    )
    rows = exact.otoc_map(n, 0, 3)[1:]
    for place, row in enumerate(rows):
        for q in range(n):
            samples = maps[:, place, q].mean(axis=1)
            if row[q] == 1:
                np.testing.assert_allclose(samples, 1, atol=1e-12)  # outside the light cone in every instance
            else:
                assert_mean(samples, row[q])


def test_strings_of_brickworks_average_to_the_exact_distribution():
    """Sizes and support from the Markov chain of Nahum, Vijay and Haah; 100 brickworks, 4 sigma."""
    n, depth = 4, 3
    weights = []
    for seed in range(100):
        ((_, operator),) = operators(brickworks(n, (depth,), seed), 1, "X", dtype="complex128")
        weights.append(pauli_weights(operator))
    distribution = strings.string_distribution(n, 1, depth)
    expected = strings.size_distribution(distribution)
    sizes = np.array([size_distribution(w) for w in weights])
    np.testing.assert_allclose(sizes.sum(axis=1), 1, atol=1e-12)
    for size in range(1, n + 1):
        assert_mean(sizes[:, size], expected[size])
    occupied = np.array([support(w) for w in weights])
    for q, value in enumerate(strings.occupation(distribution)):
        assert_mean(occupied[:, q], value)


def test_ends_from_the_left_are_ends_from_the_right_of_the_mirrored_operator():
    w = pauli_weights(unitary_group.rvs(8, random_state=2))
    np.testing.assert_allclose(end_density(w, "left"), end_density(w.transpose(2, 1, 0), "right")[::-1], atol=1e-14)
    assert end_density(w).sum() == pytest.approx(1 - w[0, 0, 0] / w.sum(), abs=1e-12)


@pytest.mark.parametrize("depth", [2, 5])
def test_clifford_otocs_are_the_signs_that_stim_gives(depth):
    """W(t) of a Clifford is one Pauli, which commutes with V or does not: +1 or -1, 1e-10."""
    n = 6
    circuit, tableau = clifford(n, depth, depth)
    for site, letter in ((0, "Z"), (3, "X")):
        image = tableau(pauli_string({site: letter}, n))
        found = infinite_temperature_map([circuit], site, letter, dtype="complex128")[0]
        for q in range(n):
            for place, w in enumerate("XYZ"):
                sign = 1 if image.commutes(pauli_string({q: w}, n)) else -1
                assert found[q, place] == pytest.approx(sign, abs=1e-10)
        on_state = state_otoc(circuit, [("X", q) for q in range(n)], [(letter, site)], dtype="complex128")
        np.testing.assert_allclose(on_state[:, 0], found[:, 0], atol=1e-10)


def test_products_leave_every_otoc_between_different_sites_at_one():
    found = infinite_temperature_map([products(5, 1)], 2, "Z", dtype="complex128")[0]
    np.testing.assert_allclose(found[[0, 1, 3, 4]], 1, atol=1e-12)
    assert light_cone_front((1 - found).max(axis=1)[None], 2).tolist() == [[0, 0]]


def test_the_front_of_an_instance_moves_a_site_a_layer_at_most():
    """Light cone of the brickwork: V on the left leg of its first gate reaches site L after L layers."""
    growth = (1 - infinite_temperature_map(brickworks(7, range(1, 7), 3), 0, "Z")).max(axis=2)
    assert light_cone_front(growth, 0)[:, 1].tolist() == [1, 2, 3, 4, 5, 6]
    assert light_cone_front(growth, 0)[:, 0].tolist() == [0] * 6


def test_the_otoc_of_a_state_is_the_expectation_value_written_out():
    """Basis states, where one echo serves all probes, and any other state, where it does not; 1e-12."""
    n = 4
    (circuit,) = brickworks(n, (4,), 8)
    ((_, u),) = unitaries([circuit], dtype="complex128")
    rng = np.random.default_rng(3)
    other = rng.normal(size=16) + 1j * rng.normal(size=16)
    other /= np.linalg.norm(other)
    basis = np.eye(16, dtype=complex)[5]
    butterflies, probes = [("X", 0), ("Y", 3)], [("Z", 1), ("Z", 2), ("X", 3)]
    for state in (None, basis, other):
        psi = np.eye(16, dtype=complex)[0] if state is None else state
        found = state_otoc(circuit, butterflies, probes, state, dtype="complex128")
        for i, (a, x) in enumerate(butterflies):
            w = u.conj().T @ pauli_at("IXYZ".index(a), x, n) @ u
            for j, (b, y) in enumerate(probes):
                v = pauli_at("IXYZ".index(b), y, n)
                assert found[i, j] == pytest.approx((psi.conj() @ w @ v @ w @ v @ psi).real, abs=1e-12)


def test_random_states_give_the_infinite_temperature_otoc_within_their_error():
    """8 qubits, 4 states, 4 sigma at every depth and site; and the error stated is the size of the deviation."""
    n = 8
    circuits = brickworks(n, (2, 4, 8), 21)
    whole = infinite_temperature_map(circuits, 0, "Z", dtype="complex128")[:, :, 0]
    pulls = []
    for place, circuit in enumerate(circuits):
        mean, error = typical_otoc(circuit, [("X", q) for q in range(n)], [("Z", 0)], seed=4, dtype="complex128")
        known = error[:, 0] > 1e-9
        np.testing.assert_allclose(mean[~known, 0], 1, atol=1e-9)
        pulls += ((mean[known, 0] - whole[place, known]) / error[known, 0]).tolist()
    assert np.abs(pulls).max() < 4
    assert 0.3 < np.std(pulls) < 2


def test_the_adjoint_undoes_the_circuit_and_evolution_takes_any_state():
    (circuit,) = brickworks(5, (6,), 2)
    evolution = Evolution(circuit, dtype="complex128")
    state = unitary_group.rvs(32, random_state=4)[0]
    np.testing.assert_allclose(evolution.backward(evolution.forward(state)), state, atol=1e-13)
    ((_, u),) = unitaries([adjoint(circuit)], dtype="complex128")
    np.testing.assert_allclose(u @ evolution.forward(state), state, atol=1e-13)


def test_bad_sites_letters_and_sizes_are_refused_with_what_is_allowed():
    (circuit,) = brickworks(4, (1,), 0)
    with pytest.raises(InputError, match="a qubit from 0 to 3"):
        infinite_temperature_map([circuit], 4, "Z")
    with pytest.raises(InputError, match="X, Y or Z"):
        state_otoc(circuit, [("Q", 0)], [("Z", 1)])
    with pytest.raises(InputError, match="2 or more, so that their spread"):
        typical_otoc(circuit, [("X", 0)], [("Z", 1)], states=1)
    with pytest.raises(InputError, match="at most 12"):
        infinite_temperature_map([products(13, 0)], 0)
    with pytest.raises(InputError, match="memory"):
        typical_otoc(circuit, [("X", 0)], [("Z", 1)], memory_limit=10)


@pytest.mark.parametrize("paulis", [[("Z", 2)], [("X", 0)], [("Y", 5), ("Z", 1)]])
def test_one_pauli_error_leaves_a_scrambled_state_with_a_fidelity_of_one_over_d_plus_one(paulis):
    """Mean |<psi|P|psi>|^2 over Haar states of 6 qubits; 3000 states, 4 sigma."""
    rng = np.random.default_rng(12)
    states = rng.normal(size=(3000, 64)) + 1j * rng.normal(size=(3000, 64))
    states /= np.linalg.norm(states, axis=1, keepdims=True)
    turned = states
    for letter, site in paulis:
        turned = applied(turned, site, letter)
    assert_mean(np.abs(np.sum(states.conj() * turned, axis=1)) ** 2, 1 / 65)

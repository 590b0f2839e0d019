"""Tripartite mutual information against closed forms, exact identities, and stabilizer ranks from stim."""

from __future__ import annotations

import numpy as np
import pytest
from sampled_brickwork import PAULI, assert_mean, pauli_at
from scipy.stats import unitary_group
from signature_circuits import brickworks, clifford, products, stabilizer_entropy

from rcbench.engine.state import final_state
from rcbench.errors import InputError
from rcbench.reference import haar
from rcbench.signatures.entropy import cut_entropies, mutual_information, renyi_entropy
from rcbench.signatures.evolution import choi_states, unitaries
from rcbench.signatures.tmi import choi_of, cuts, halves, operator_tmi, quarters, state_tmi

BIT = np.log(2)


def haar_states(n: int, count: int, seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    states = rng.normal(size=(count, 2**n)) + 1j * rng.normal(size=(count, 2**n))
    return states / np.linalg.norm(states, axis=1, keepdims=True)


@pytest.mark.parametrize("n", [4, 8])
def test_quarters_of_haar_states_have_the_mean_tmi_of_page(n):
    """Page, PRL 71, 1291 (1993), in I3 of Hosur et al., arXiv:1511.04021; 300 states, 4 sigma, fixed seed."""
    found = state_tmi(haar_states(n, 300, n), *quarters(n)[:3])
    assert_mean(found, haar.tmi_vonneumann(n // 4, n // 4, n // 4, n))
    size = n // 4
    assert_mean(state_tmi(haar_states(n, 300, n), *quarters(n)[:3], order=2), haar.tmi_renyi2(size, size, size, n))


@pytest.mark.parametrize(
    ("n", "a", "vn", "error", "renyi2"), [(4, 2, -2.6814, 0.0019, -2.1800), (4, 1, -1.3902, 0.0016, -1.1517)]
)
def test_choi_states_of_haar_unitaries_have_the_mean_tmi_sampled_elsewhere(n, a, vn, error, renyi2):
    """Formula of Hosur et al., arXiv:1511.04021; means from an independent simulation; 200 unitaries, 4 sigma."""
    choi = choi_of(unitary_group.rvs(2**n, size=200, random_state=3))
    found = operator_tmi(choi, range(a), range(a)) / BIT
    assert abs(found.mean() - vn) < 4 * np.hypot(found.std(ddof=1) / np.sqrt(200), error)
    second = operator_tmi(choi, range(a), range(a), order=2) / BIT
    assert abs(second.mean() - renyi2) < 4 * np.hypot(second.std(ddof=1) / np.sqrt(200), error)
    purity = np.exp(-renyi_entropy(choi, [*range(a), *range(n, n + a)], 2))
    assert_mean(purity, haar.operator_purity(a, a, n))


@pytest.mark.parametrize(("n", "a", "c"), [(3, 1, 1), (3, 1, 2), (4, 2, 2)])
def test_renyi2_tmi_of_a_unitary_is_its_averaged_otoc(n, a, c):
    """I3 = 2a + log2 Delta(A, C) + log2 Delta(A, D) for every unitary, Hosur et al., arXiv:1511.04021; 1e-10."""
    u = unitary_group.rvs(2**n, random_state=7)

    def strings(sites):
        out = [np.eye(2**n, dtype=complex)]
        for site in sites:
            out = [p @ pauli_at(letter, site, n) for p in out for letter in range(4)]
        return out

    def delta(inputs, outputs):
        total = [
            np.trace(u.conj().T @ w @ u @ v @ u.conj().T @ w @ u @ v).real / 2**n
            for v in strings(inputs)
            for w in strings(outputs)
        ]
        return np.mean(total)

    exact = 2 * a + np.log2(delta(range(a), range(c))) + np.log2(delta(range(a), range(c, n)))
    assert operator_tmi(choi_of(u), range(a), range(c), order=2)[0] / BIT == pytest.approx(exact, abs=1e-10)
    assert len(PAULI) == 4


@pytest.mark.parametrize("swaps", [False, True])
@pytest.mark.parametrize("order", [1, 2])
def test_products_and_swaps_have_no_operator_tmi(swaps, order):
    """The negative controls: zero for every choice of regions, 1e-12."""
    circuit = products(5, 2, swaps=swaps)
    ((_, choi),) = choi_states([circuit], dtype="complex128")
    for a, c in ([0, 1], [0, 1]), ([0], [4]), ([1, 3], [0, 2, 4]):
        assert operator_tmi(choi, a, c, order=order)[0] == pytest.approx(0, abs=1e-12)


def test_a_product_of_local_gates_leaves_a_state_without_tmi():
    state = final_state(products(6, 4), "complex128")
    assert state_tmi(state, [0], [1, 2], [3])[0] == pytest.approx(0, abs=1e-12)


@pytest.mark.parametrize("depth", [1, 3, 6])
def test_entropies_of_clifford_circuits_are_the_stabilizer_ranks_of_stim(depth):
    """Every Renyi order alike, 1e-10 bits."""
    n = 7
    circuit, tableau = clifford(n, depth, depth)
    state = final_state(circuit, "complex128")
    for region in ([0, 1, 2], [1, 4], [6], [0, 3, 5, 6]):
        exact = stabilizer_entropy(tableau, region)
        for order in (0.5, 1, 2, 3, float("inf")):
            assert renyi_entropy(state, region, order)[0] / BIT == pytest.approx(
                exact, abs=1e-6 if order < 1 else 1e-10
            )
    exact = [0, *(stabilizer_entropy(tableau, range(cut)) for cut in range(1, n)), 0]
    np.testing.assert_allclose(cut_entropies(state)[0] / BIT, exact, atol=1e-10)


def test_operator_tmi_of_a_clifford_circuit_is_a_whole_number_of_bits():
    ((_, choi),) = choi_states([clifford(6, 6, 9)[0]], dtype="complex128")
    value = operator_tmi(choi, range(3), range(3))[0] / BIT
    assert value == pytest.approx(round(value), abs=1e-9)
    assert value < 0
    assert operator_tmi(choi, range(3), range(3), order=2)[0] / BIT == pytest.approx(value, abs=1e-9)


def test_unitaries_of_nested_circuits_are_products_of_their_gates():
    shallow, deep = brickworks(4, (2, 5), 11)
    found = dict(unitaries([shallow, deep], dtype="complex128"))
    for place, circuit in enumerate((shallow, deep)):
        np.testing.assert_allclose(found[place][:, 0], final_state(circuit, "complex128"), atol=1e-13)
        np.testing.assert_allclose(found[place] @ found[place].conj().T, np.eye(16), atol=1e-13)


def test_tmi_does_not_care_which_output_half_is_called_c_and_keeps_its_bound():
    ((_, choi),) = choi_states(brickworks(4, (6,), 3), dtype="complex128")
    first, second = halves(4)
    value = operator_tmi(choi, first, first)[0]
    assert value == pytest.approx(operator_tmi(choi, first, second)[0], abs=1e-12)
    assert haar.operator_tmi_bound(2, 2, 4) <= value <= 0


def test_mutual_information_of_a_bell_pair_is_two_bits():
    bell = np.zeros(8, dtype=complex)
    bell[[0, 5]] = 0.5**0.5  # qubits 0 and 2
    assert mutual_information(bell, [0], [2])[0] / BIT == pytest.approx(2, abs=1e-12)
    assert mutual_information(bell, [0], [1])[0] == pytest.approx(0, abs=1e-12)


def test_named_regions_are_neighbours_and_as_equal_as_can_be():
    assert quarters(8) == ((0, 1), (2, 3), (4, 5), (6, 7))
    assert [len(region) for region in quarters(10)] == [3, 3, 2, 2]
    assert halves(5) == ((0, 1, 2), (3, 4))
    assert cuts(3) == ((0,), (0, 1))


@pytest.mark.parametrize(
    ("regions", "message"),
    [
        (([0, 1], [1, 2], [3]), "share no qubit; these share \\[1\\]"),
        (([], [1], [2]), "no empty region"),
        (([0], [1], [9]), "qubits from 0 to 3"),
    ],
)
def test_regions_that_do_not_fit_are_refused_with_what_would(regions, message):
    with pytest.raises(InputError, match=message):
        state_tmi(haar_states(4, 1, 0), *regions)


def test_operator_tmi_needs_both_parts_and_a_size_that_fits():
    choi = choi_of(np.eye(8, dtype=complex))
    with pytest.raises(InputError, match="fewer than all 3 qubits"):
        operator_tmi(choi, [0, 1, 2], [0])
    with pytest.raises(InputError, match="at least 4 qubits for 4 regions"):
        quarters(3)
    with pytest.raises(InputError, match="at most 12"):
        next(choi_states([products(13, 0)]))

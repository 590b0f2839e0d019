"""Echo estimators against exact twirls and closed forms."""

from itertools import product

import cirq
import numpy as np
import pytest
from numpy.testing import assert_allclose

from rcbench.engine.distribution import Distribution
from rcbench.estimators.echo import apply, polarization_weights
from rcbench.estimators.sample import Group, Run
from rcbench.shots.outcomes import Outcomes


def values_of(sample, target):
    run = Run(
        circuit_id="c",
        role="echo",
        setting="",
        n_qubits=sample.n_bits,
        measured_qubits=tuple(range(sample.n_bits)),
        target=None if target is None else np.array(target),
        params={},
        sample=sample,
    )
    group = Group(experiment="e", depth=1, instance=0, runs=(run,))
    return {found.signature: found for found in apply(group)}


def test_polarization_is_the_identity_part_of_any_pauli_channel_after_a_local_clifford_twirl():
    """All 24^2 local Cliffords, exactly; Proctor et al., Nature Physics 18, 75 (2022), arXiv:2008.11294."""
    rng = np.random.default_rng(5)
    paulis = [
        np.kron(a, b) for a, b in product([np.eye(2), *(cirq.unitary(g) for g in (cirq.X, cirq.Y, cirq.Z))], repeat=2)
    ]
    weights = rng.dirichlet(np.ones(16))
    cliffords = [
        cirq.unitary(cirq.PhasedXZGate.from_matrix(cirq.unitary(g)))
        for g in cirq.SingleQubitCliffordGate.all_single_qubit_cliffords
    ]
    total = np.zeros(4)
    for a, b in product(cliffords, repeat=2):
        layer = np.kron(a, b)
        for weight, pauli in zip(weights, paulis, strict=True):
            total += weight * np.abs((layer.conj().T @ pauli @ layer)[:, 0]) ** 2
    found = values_of(Distribution(2, total / 24**2), [0, 0])["polarization"].value
    entanglement_infidelity = 1 - weights[0]
    assert_allclose((1 - 4.0**-2) * (1 - found), entanglement_infidelity, atol=1e-12)


@pytest.mark.parametrize("n", [1, 3, 6])
def test_uniform_bitstrings_have_no_polarization_and_return_once_in_d(n):
    values = values_of(Distribution(n, np.full(2**n, 2.0**-n)), [1] * n)
    assert_allclose(values["polarization"].value, 0, atol=1e-12)
    assert_allclose(values["echo_return"].value, 2.0**-n)


def test_symmetric_readout_flips_lower_the_polarization_by_the_published_factor():
    """S times (1 - 1.5 e)^n, up to the terms in 4^-n that the definition adds."""
    n, e = 5, 0.03
    bits = (np.arange(2**n)[:, None] >> np.arange(n)) & 1
    flipped = np.prod(np.where(bits == 1, e, 1 - e), axis=1)
    found = values_of(Distribution(n, flipped), [0] * n)["polarization"].value
    small = 4.0**-n
    assert_allclose(found, ((1 - 1.5 * e) ** n - small) / (1 - small), atol=1e-12)


def test_the_target_may_be_any_string():
    rng = np.random.default_rng(3)
    bits = (rng.random((200, 4)) < 0.2).astype(int)
    target = np.array([1, 0, 1, 1])
    plain, moved = values_of(Outcomes.from_bits(bits), [0] * 4), values_of(Outcomes.from_bits(bits ^ target), target)
    for key in ("echo_return", "polarization"):
        assert_allclose([moved[key].value, moved[key].std_error], [plain[key].value, plain[key].std_error])


@pytest.mark.parametrize("key", ["echo_return", "polarization"])
def test_echo_estimates_are_unbiased_and_state_their_scatter(key):
    """Mixture of the target and uniform bitstrings, 500 data sets: 4 sigma; the scatter to 4 times 3.2 %."""
    n, kept, shots = 4, 0.7, 300
    truth = {"echo_return": kept + (1 - kept) / 2**n, "polarization": kept}[key]
    rng = np.random.default_rng(9)
    found = []
    for _ in range(500):
        index = np.where(rng.random(shots) < kept, 5, rng.integers(2**n, size=shots))
        row = values_of(Outcomes.from_index(index, n), [0, 1, 0, 1])[key]
        found.append((row.value, row.std_error))
    values, errors = np.array(found).T
    assert abs(values.mean() - truth) < 4 * values.std(ddof=1) / np.sqrt(len(values))
    assert_allclose(np.sqrt(np.mean(errors**2)), values.std(ddof=1), rtol=0.13)


def test_shots_that_all_return_still_have_an_uncertainty():
    row = values_of(Outcomes.from_index(np.zeros(999, dtype=int), 3), [0, 0, 0])["echo_return"]
    assert row.value == 1
    assert_allclose(row.std_error, 1 / 1000)
    assert values_of(Distribution(3, np.eye(8)[0]), [0, 0, 0])["echo_return"].std_error == 0


def test_runs_without_a_target_give_nothing():
    assert values_of(Outcomes.from_index(np.arange(4), 2), None) == {}


def test_polarization_weights_of_very_many_qubits_do_not_overflow():
    weights = polarization_weights(600)
    assert weights[0] == 1
    assert_allclose(weights[1], -0.5)

"""OTOCs from butterfly echoes against the operator definition and the published variance."""

import numpy as np
import pytest
import scipy.stats
from numpy.testing import assert_allclose

from rcbench.engine.distribution import Distribution
from rcbench.estimators.butterfly import apply, missing, normalise
from rcbench.estimators.sample import Group, Run, Value
from rcbench.shots.outcomes import Outcomes

N = 4
PAULI = {"X": np.array([[0, 1], [1, 0]]), "Y": np.array([[0, -1j], [1j, 0]]), "Z": np.diag([1, -1])}


def site(operator, qubit):
    return np.kron(np.kron(np.eye(2**qubit), operator), np.eye(2 ** (N - 1 - qubit)))


def run_of(role, sample, target=None, qubits=tuple(range(N)), **params):
    return Run(
        circuit_id=role,
        role=role,
        setting="",
        n_qubits=N,
        measured_qubits=qubits,
        target=target,
        params=params,
        sample=sample,
    )


def group_of(*runs):
    return Group(experiment="e", depth=1, instance=0, runs=runs)


def echo_of(u, middle):
    state = u.conj().T @ middle @ u @ np.eye(2**N)[0]
    return Distribution(N, np.abs(state) ** 2)


@pytest.mark.parametrize("pauli", ["X", "Y", "Z"])
def test_otoc_of_the_echo_is_the_operator_definition(pauli):
    """Re <0| W(t) Z W(t) Z |0> with W(t) = U^dagger W U, dense."""
    u = scipy.stats.unitary_group.rvs(2**N, random_state=8)
    w = site(PAULI[pauli], 1)
    runs = (run_of("reference", echo_of(u, np.eye(2**N))), run_of("butterfly", echo_of(u, w), butterfly=1, pauli=pauli))
    found = {row.region: row for row in apply(group_of(*runs)) if row.signature == "otoc"}
    w_t = u.conj().T @ w @ u
    for probe in range(N):
        z = site(PAULI["Z"], probe)
        expected = (w_t @ z @ w_t @ z)[0, 0].real
        assert_allclose(found[f"butterfly=1;probe={probe};W={pauli};V=Z"].value, expected, atol=1e-12)


def test_ideal_reference_is_one_at_every_probe_and_named_by_it():
    u = scipy.stats.unitary_group.rvs(2**N, random_state=9)
    rows = apply(group_of(run_of("reference", echo_of(u, np.eye(2**N)))))
    assert [row.region for row in rows] == ["probe=0", "probe=1", "probe=2", "probe=3"]
    assert_allclose([row.value for row in rows], 1, atol=1e-12)


def test_a_target_of_ones_turns_the_sign():
    bits = np.array([[1, 0, 0, 0]] * 90 + [[0, 0, 0, 0]] * 10)
    row = apply(group_of(run_of("reference", Outcomes.from_bits(bits), target=np.array([1, 0, 0, 0]))))[0]
    assert_allclose(row.value, 0.8)


def test_probes_are_named_by_the_measured_qubits():
    bits = np.zeros((50, 2), dtype=int)
    rows = apply(group_of(run_of("reference", Outcomes.from_bits(bits), qubits=(3, 1))))
    assert [row.region for row in rows] == ["probe=3", "probe=1"]


@pytest.mark.parametrize(("o", "r", "shots"), [(0.25, 0.3, 2000), (0.6, 0.5, 300), (-0.3, 0.4, 400)])
def test_ratio_has_the_published_scatter_and_hardly_any_bias(o, r, shots):
    """Var = [1 - O^2 R^2 + O^2 (1 - R^2)] / (R^2 M); bias below a fifth of one standard error; 4000 data sets."""
    rng = np.random.default_rng(4)
    z = lambda mean: 2 * rng.binomial(shots, (1 + mean) / 2, 4000) / shots - 1  # noqa: E731
    b, reference = z(o * r), z(r)
    error = lambda mean: np.sqrt((1 - mean**2) / (shots - 1))  # noqa: E731
    found = np.array([normalise(Value(x, error(x)), Value(y, error(y))) for x, y in zip(b, reference, strict=True)])
    assert np.isfinite(found).mean() > 0.995
    values, errors = found[np.isfinite(found[:, 0])].T
    formula = np.sqrt((1 - o**2 * r**2 + o**2 * (1 - r**2)) / (r**2 * shots))
    assert_allclose(values.std(ddof=1), formula, rtol=0.08)
    assert_allclose(np.median(errors), formula, rtol=0.05)
    assert abs(values.mean() - o) < 0.2 * formula


def test_a_reference_below_five_standard_errors_is_refused():
    assert np.isnan(normalise(Value(0.1, 0.05), Value(0.24, 0.05)).value)
    assert np.isnan(normalise(Value(0.1, 0.05), Value(-0.9, 0.05)).value)
    assert np.isfinite(normalise(Value(0.1, 0.05), Value(0.26, 0.05)).value)


def test_a_group_says_what_it_lacks():
    sample = Outcomes.from_index(np.arange(4), N)
    reference, butterfly = run_of("reference", sample), run_of("butterfly", sample, butterfly=2, pauli="X")
    assert missing(group_of(butterfly)) == "the reference echo"
    assert missing(group_of(reference)) == ""
    assert missing(group_of(reference, butterfly)) == ""
    assert apply(group_of(butterfly)) == []

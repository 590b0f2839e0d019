"""Estimators of one sampled circuit against closed forms, cirq and scipy."""

import cirq
import numpy as np
import pytest
import scipy.stats
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from rcbench.engine.distribution import Distribution
from rcbench.estimators import ESTIMATORS, estimator
from rcbench.estimators.cross_entropy import of_run, signed_root, square_again
from rcbench.estimators.sample import Run, Value
from rcbench.shots.outcomes import Outcomes

N = 5
SIZE = 2**N


def ideal_probabilities(seed, depth=12):
    """Outcome probabilities of a random circuit, by cirq's simulator."""
    qubits = cirq.LineQubit.range(N)
    circuit = cirq.testing.random_circuit(qubits, depth, 0.9, random_state=seed)
    circuit.append([cirq.X(q) ** 0.31 for q in qubits])
    state = cirq.Simulator(dtype=np.complex128, seed=1).simulate(circuit, qubit_order=qubits).final_state_vector
    return np.abs(state) ** 2 / np.sum(np.abs(state) ** 2)


def run_of(sample, ideal):
    return Run(
        circuit_id="c",
        role="sample",
        setting="",
        n_qubits=N,
        measured_qubits=tuple(range(N)),
        target=None,
        params={},
        sample=sample,
        ideal=ideal,
    )


def values_of(sample, ideal):
    return {found.signature: found for found in of_run(run_of(sample, ideal))}


@pytest.fixture(scope="module")
def many():
    """600 data sets of one circuit under white noise: what each signature should be, and what was estimated."""
    rng = np.random.default_rng(11)
    p, fidelity, shots = ideal_probabilities(3), 0.6, 400
    noisy = fidelity * p + (1 - fidelity) / SIZE
    v = SIZE * np.sum(p**2) - 1
    truth = {
        "xeb_linear": fidelity * v,
        "xeb_fidelity": fidelity,
        "collision_probability": np.sum(noisy**2),
        "self_fidelity": fidelity**2,
    }
    found = {key: [] for key in truth}
    for _ in range(600):
        outcomes = Outcomes.from_index(rng.choice(SIZE, shots, p=noisy), N)
        values = values_of(outcomes, p)
        for key, rows in found.items():
            value, error = values[key].value, values[key].std_error
            if key == "self_fidelity":
                value, error = (float(x[0]) for x in square_again(np.array([value]), np.array([error])))
            rows.append((value, error))
    return truth, {key: np.array(rows) for key, rows in found.items()}


@pytest.mark.parametrize("key", ["xeb_linear", "xeb_fidelity", "collision_probability", "self_fidelity"])
def test_estimates_of_white_noise_are_unbiased(many, key):
    """Within 4 standard errors of 600 data sets; the self-fidelity by its square, which is what is unbiased."""
    truth, found = many
    values = found[key][:, 0]
    assert abs(values.mean() - truth[key]) < 4 * values.std(ddof=1) / np.sqrt(len(values))


@pytest.mark.parametrize("key", ["xeb_linear", "xeb_fidelity", "collision_probability", "self_fidelity"])
def test_stated_shot_noise_is_the_scatter_between_data_sets(many, key):
    """The relative error of a standard deviation from 600 values is 2.9 %; 4 sigma and the rounding of a mean."""
    _, found = many
    values, errors = found[key].T
    assert_allclose(np.sqrt(np.mean(errors**2)), values.std(ddof=1), rtol=0.12)


def test_ideal_prediction_scores_exactly_one():
    p = ideal_probabilities(4)
    values = values_of(Distribution(N, p), p)
    assert_allclose([values["xeb_fidelity"].value, values["self_fidelity"].value], 1, atol=1e-12)
    assert_allclose(values["xeb_linear"].value, SIZE * np.sum(p**2) - 1)
    assert all(row.std_error == 0 for row in values.values())


def test_uniform_bitstrings_score_zero():
    p = ideal_probabilities(5)
    values = values_of(Distribution(N, np.full(SIZE, 1 / SIZE)), p)
    for key in ("xeb_linear", "xeb_fidelity", "self_fidelity"):
        assert_allclose(values[key].value, 0, atol=1e-7)
    assert_allclose(values["collision_probability"].value, 1 / SIZE)


def test_uniform_ideal_distribution_gives_no_fidelity():
    uniform = np.full(SIZE, 1 / SIZE, dtype=np.float32)
    values = values_of(Outcomes.from_index(np.arange(10), N), uniform)
    assert np.isnan(values["xeb_fidelity"].value)
    assert np.isnan(values["self_fidelity"].value)
    assert np.isfinite(values["xeb_linear"].value)


def test_one_shot_gives_no_collisions_and_no_ideal_gives_collisions_only():
    assert set(values_of(Outcomes.from_index(np.array([3]), N), ideal_probabilities(1))) == {
        "xeb_linear",
        "xeb_fidelity",
    }
    assert set(values_of(Outcomes.from_index(np.array([3, 4, 3]), N), None)) == {"collision_probability"}


def test_porter_thomas_distance_is_given_for_the_ideal_prediction_only_and_agrees_with_scipy():
    p = ideal_probabilities(6)
    noisy = Distribution(N, p, weight=0.9, batches=np.full((2, SIZE), 1 / SIZE))
    assert "porter_thomas_ks" not in values_of(noisy, p)
    assert "porter_thomas_ks" not in values_of(Outcomes.from_index(np.arange(20), N), p)
    law = scipy.stats.beta(1, SIZE - 1)  # |<x|psi>|^2 of a Haar-random state
    found = values_of(Distribution(N, p), p)["porter_thomas_ks"].value
    assert_allclose(found, scipy.stats.kstest(p, law.cdf).statistic, atol=1e-12)


@given(square=st.floats(-2, 2), error=st.floats(1e-6, 1))
def test_squaring_a_signed_root_gives_back_value_and_error(square, error):
    root = signed_root(Value(square, error))
    value, back = square_again(np.array([root.value]), np.array([root.std_error]))
    assert_allclose(value[0], square, atol=1e-12)
    assert_allclose(back[0], error, rtol=1e-5)


def test_negative_squares_keep_their_sign_so_that_their_mean_is_unbiased():
    rng = np.random.default_rng(2)
    squares = rng.normal(0.01, 0.1, 20000)
    roots = np.array([signed_root(Value(x, 0.1)).value for x in squares])
    assert_allclose(np.mean(roots * np.abs(roots)), squares.mean())


@pytest.mark.parametrize("name", ESTIMATORS)
def test_every_estimator_names_signatures_of_the_registry_that_name_it(name):
    from rcbench.signatures.registry import signature

    assert estimator(name).name == name
    for key in estimator(name).signatures:
        assert signature(key).estimator == name


def test_a_mistyped_estimator_gets_the_names():
    from rcbench.errors import InputError

    with pytest.raises(InputError, match="did you mean 'butterfly-echo'"):
        estimator("butterfly")


def test_collisions_give_no_value_where_the_shots_are_too_few_to_see_any():
    """500 shots of 24 qubits: uniform bitstrings give 500 * 499 / 2 / 2**24 = 0.007 coincident pairs."""
    rng = np.random.default_rng(3)
    bits = rng.integers(0, 2, size=(500, 24))
    run = Run(
        circuit_id="c",
        role="sample",
        setting="",
        n_qubits=24,
        measured_qubits=tuple(range(24)),
        target=None,
        params={},
        sample=Outcomes.from_bits(bits),
    )
    (value,) = (v for v in of_run(run) if v.signature == "collision_probability")
    assert np.isnan(value.value)

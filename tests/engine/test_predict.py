"""Predicted distributions: measured bits, readout, the mixture against an exact density matrix, tilts, determinism."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from engine_cases import density_probabilities, noise_model, random_circuit, turns_circuit
from scipy import stats

from rcbench.circuits.circuit import CircuitBuilder
from rcbench.circuits.gates import VIRTUAL
from rcbench.engine import blocks, mixture, trajectories
from rcbench.engine.predict import distributions
from rcbench.engine.readout import flip, measured
from rcbench.engine.reference import final_state_reference
from rcbench.engine.work import Work
from rcbench.errors import InputError

VIRTUAL_KINDS = tuple(np.flatnonzero(VIRTUAL).tolist())
FOUR_SIGMA = stats.norm.sf(4)


def predict(circuit, noise, **options):
    ((_, ideal, noisy),) = distributions([circuit], noise, **options)
    return ideal, noisy


def assert_close(found, exact: np.ndarray) -> None:
    """Every outcome within the t quantile of its batches that a normal 4 sigma would be."""
    batches = found.batches
    error = (1 - found.weight) * batches.std(axis=0, ddof=1) / np.sqrt(len(batches))
    limit = stats.t.isf(FOUR_SIGMA, len(batches) - 1)
    assert np.all(np.abs(found.probabilities - exact) < limit * error + 1e-7)


def test_ideal_probabilities_are_those_of_the_measured_bits_in_their_order():
    builder = CircuitBuilder(3)
    builder.append(random_circuit(3, 3, seed=2, measure=False))
    builder.measure([2, 0])
    circuit = builder.build()
    ideal, noisy = predict(circuit, None)
    whole = (np.abs(final_state_reference(circuit)) ** 2).reshape(2, 2, 2)
    np.testing.assert_allclose(ideal.exact, whole.sum(axis=1).T.reshape(-1), atol=1e-6)
    assert noisy is None
    assert ideal.batches is None
    assert ideal.n_bits == 2


def test_readout_alone_is_exact():
    circuit = random_circuit(4, 3, seed=1)
    n = 4
    noise = replace(
        noise_model(n), one_qubit=np.zeros(n), two_qubit=np.zeros((n, n)), t1=np.full(n, np.inf), t2=np.full(n, np.inf)
    )
    ideal, noisy = predict(circuit, noise)
    confusion = np.ones((1, 1))
    for table in noise.confusion(range(n)):
        confusion = np.kron(confusion, table)
    np.testing.assert_allclose(noisy.exact, confusion @ ideal.exact, atol=1e-12)
    assert noisy.weight == 1
    assert noisy.batches is None
    worse = np.ones((1, 1))
    for table in noise.confusion(range(n), sigmas=1):
        worse = np.kron(worse, table)
    np.testing.assert_allclose(noisy.shifted("readout").probabilities, worse @ ideal.exact, atol=1e-12)


def test_flip_and_measured_act_on_batches():
    rng = np.random.default_rng(1)
    batch = rng.random((3, 16))
    tables = noise_model(4).confusion([3, 1])
    together = flip(measured(batch, [3, 1]), tables)
    for row, alone in zip(batch, together, strict=True):
        np.testing.assert_allclose(flip(measured(row, [3, 1]), tables), alone)


@pytest.mark.parametrize("make", [random_circuit, turns_circuit])
@pytest.mark.parametrize("n", [2, 4])
def test_mixture_is_the_density_matrix_within_4_sigma(make, n):
    circuit, noise = make(n, 4, seed=n), noise_model(n)
    _, noisy = predict(circuit, noise, trajectories=3000)
    exact = flip(density_probabilities(circuit, noise, VIRTUAL_KINDS), noise.confusion(range(n)))
    assert noisy.probabilities.sum() == pytest.approx(1, abs=1e-5)
    assert_close(noisy, exact)


def test_the_path_of_large_states_agrees(monkeypatch):
    """The path of states above one block, forced on a small one: the same patterns give the same distribution."""
    circuit, noise = random_circuit(6, 4, seed=4), noise_model(6)
    _, usual = predict(circuit, noise, trajectories=64, dtype="complex128")
    monkeypatch.setattr(mixture, "BLOCK_QUBITS", 3)
    _, sweeps = predict(circuit, noise, trajectories=64, dtype="complex128")
    np.testing.assert_allclose(sweeps.batches, usual.batches, atol=1e-13)
    for source, tilt in usual.tilts.items():
        np.testing.assert_allclose(sweeps.tilts[source], tilt, atol=1e-13)


@pytest.mark.parametrize("saved", [1, 10**4, 10**9])
def test_states_kept_to_start_from_change_nothing(monkeypatch, saved):
    circuit, noise = random_circuit(5, 4, seed=4), noise_model(5)
    _, usual = predict(circuit, noise, trajectories=32, dtype="complex128")
    monkeypatch.setattr(mixture, "SAVED_BYTES", saved)
    for limit in (15, 3):
        monkeypatch.setattr(mixture, "BLOCK_QUBITS", limit)
        _, noisy = predict(circuit, noise, trajectories=32, dtype="complex128")
        np.testing.assert_allclose(noisy.batches, usual.batches, atol=1e-13)


def test_trajectories_in_several_sweeps_start_before_their_first_error(monkeypatch):
    n = 7
    circuit, noise = random_circuit(n, 7, seed=4), noise_model(n, 0.5)
    monkeypatch.setattr(mixture, "BLOCK_QUBITS", 3)
    monkeypatch.setattr(trajectories, "BLOCK_QUBITS", 3)
    monkeypatch.setattr(blocks, "BLOCK_BYTES", 16 * 2**5)
    monkeypatch.setattr(blocks, "RUN_BYTES", 16 * 2**3)
    assert len(trajectories.noisy_program(circuit, noise, "complex128").sweeps.active) > 2
    _, noisy = predict(circuit, noise, trajectories=1000, dtype="complex128")
    assert_close(noisy, flip(density_probabilities(circuit, noise, VIRTUAL_KINDS), noise.confusion(range(n))))


@pytest.mark.parametrize(
    ("source", "change"), [("one_qubit", "one_qubit"), ("two_qubit", "two_qubit"), ("idle", "times")]
)
def test_tilt_is_the_change_for_one_standard_uncertainty(source, change):
    """Against a central difference of the exact density matrix; 4 sigma of the spread between 40 seeds."""
    n = 4
    circuit, noise = random_circuit(n, 4, seed=7), noise_model(n)

    def scaled(factor: float) -> np.ndarray:
        if change == "times":
            model = replace(noise, t1=noise.t1 / factor, t2=noise.t2 / factor)
        else:
            model = replace(noise, **{change: getattr(noise, change) * factor})
        return flip(density_probabilities(circuit, model, VIRTUAL_KINDS), noise.confusion(range(n)))

    step = 1e-4
    exact = noise.uncertainty[source] * (scaled(1 + step) - scaled(1 - step)) / (2 * step)
    found = np.array([predict(circuit, noise, trajectories=160, seed=s)[1].tilts[source] for s in range(40)])
    assert np.all(np.abs(found.sum(axis=1)) < 1e-6)
    spread = found.std(axis=0, ddof=1) / np.sqrt(len(found))
    assert np.all(np.abs(found.mean(axis=0) - exact) < stats.t.isf(FOUR_SIGMA, 39) * spread + 1e-7)


def test_shifted_distribution_moves_by_the_tilt():
    _, noisy = predict(random_circuit(4, 3, seed=1), noise_model(4), trajectories=64)
    for source in ("one_qubit", "two_qubit", "idle", "readout"):
        moved = noisy.shifted(source).probabilities - noisy.probabilities
        np.testing.assert_allclose(moved, noisy.tilts[source], atol=1e-12)


def test_distributions_depend_on_seed_and_content_alone():
    circuits = [random_circuit(5, layers, seed=layers) for layers in (2, 3, 4)]
    noise = noise_model(5)

    def bytes_of(chosen, **options):
        found = {}
        for index, ideal, noisy in distributions(chosen, noise, trajectories=48, **options):
            found[id(chosen[index])] = (ideal.exact.tobytes(), noisy.batches.tobytes(), noisy.tilts["idle"].tobytes())
        return found

    forward = bytes_of(circuits, seed=3, threads=1)
    assert bytes_of(circuits[::-1], seed=3, threads=2) == forward
    assert bytes_of(circuits[1:2], seed=3) == {id(circuits[1]): forward[id(circuits[1])]}
    assert bytes_of(circuits, seed=4)[id(circuits[0])][1] != forward[id(circuits[0])][1]


def test_an_idle_qubit_without_a_gate_can_flip():
    """A qubit that only waits is 1 with probability (1 - exp(-t/T1)) / 2: the twirl relaxes to the mixed state."""
    builder = CircuitBuilder(2)
    for _ in range(50):
        builder.add("x", [0])
        builder.next_layer()
    builder.measure([1])
    noise = replace(noise_model(2), one_qubit=np.zeros(2), t1=np.full(2, 4e3), t2=np.full(2, 4e3))
    noise = replace(noise, read_0_of_1=np.zeros(2), read_1_of_0=np.zeros(2))
    _, noisy = predict(builder.build(), noise, trajectories=4000)
    assert_close(noisy, np.array([1 + np.exp(-50 * 30 / 4e3), 1 - np.exp(-50 * 30 / 4e3)]) / 2)


def test_work_and_progress_are_reported():
    circuits = [random_circuit(5, layers, seed=1) for layers in (2, 3)]
    work, steps = Work(), []
    list(distributions(circuits, noise_model(5), trajectories=32, work=work, progress=lambda *step: steps.append(step)))
    assert steps == [(1, 2), (2, 2)]
    assert (work.circuits, work.trajectories) == (2, 64)
    assert work.seconds > 0
    assert work.peak_bytes > 32 * 8 * 16
    assert work.rate == work.amplitudes / work.seconds
    assert "2 circuits, 64 trajectories" in work.text()


def test_what_cannot_be_predicted_is_refused():
    with pytest.raises(InputError, match="no measurement"):
        list(distributions([random_circuit(2, 1, seed=0, measure=False)], None))
    with pytest.raises(InputError, match="trajectories: found 0"):
        list(distributions([random_circuit(2, 1, seed=0)], noise_model(2), trajectories=0))
    with pytest.raises(InputError, match="the circuit's 2 qubits"):
        list(distributions([random_circuit(2, 1, seed=0)], noise_model(3)))
    with pytest.raises(InputError, match="trajectories of 10 qubits"):
        list(distributions([random_circuit(10, 1, seed=0)], noise_model(10), memory_limit=20000))

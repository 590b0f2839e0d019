"""Sampled error patterns: their weights, their scores, and the operators they change."""

from __future__ import annotations

import numpy as np
import pytest
from engine_cases import PAULIS, noise_model, random_circuit, turns_circuit

from rcbench.circuits.gates import VIRTUAL
from rcbench.engine.noise import SOURCES
from rcbench.engine.reference import apply_reference
from rcbench.engine.trajectories import changed_operators, draw_patterns, noisy_program
from rcbench.randomness import Draw

MAKERS = [random_circuit, turns_circuit]


def state_with_errors(noisy, errors: list[tuple[int, int]]) -> np.ndarray:
    """Row by row, each (place, pauli) put in right after its row: nothing fused, nothing shared with the engine."""
    rows, places, n = noisy.rows, noisy.places, noisy.rows.n_qubits
    state = np.zeros((1, 2**n), dtype=np.complex128)
    state[0, 0] = 1
    for row in range(-1, len(rows)):
        if row >= 0:
            qubits = [q for q in rows.qubits[row].tolist() if q >= 0]
            size = 2 ** len(qubits)
            state = apply_reference(state, rows.matrices[row][:size, :size], qubits)
        for place, pauli in errors:
            if places.row[place] == row:
                a, b = places.qubits[place]
                state = apply_reference(state, PAULIS[pauli if b < 0 else pauli // 4], (a,))
                if b >= 0:
                    state = apply_reference(state, PAULIS[pauli % 4], (b,))
    return state[0]


@pytest.mark.parametrize("make", MAKERS)
def test_changed_operators_give_the_state_with_the_errors_in(make):
    n = 5
    noisy = noisy_program(make(n, 5, seed=2), noise_model(n, 8.0), "complex128")
    patterns = draw_patterns(noisy, 60, 4, Draw(1, "test"))
    changes = changed_operators(noisy, patterns)
    assert np.diff(patterns.start).max() > 3
    for trajectory in range(len(patterns)):
        errors = slice(patterns.start[trajectory], patterns.start[trajectory + 1])
        part = slice(changes.start[trajectory], changes.start[trajectory + 1])
        matrices = noisy.program.matrices.copy()
        matrices[changes.op[part]] = changes.matrices[part]
        state = np.zeros((1, 2**n), dtype=np.complex128)
        state[0, 0] = 1
        for pair, matrix in zip(noisy.program.qubits.tolist(), matrices, strict=True):
            qubits = [q for q in pair if q >= 0]
            state = apply_reference(state, matrix[: 2 ** len(qubits), : 2 ** len(qubits)], qubits)
        pairs = list(zip(patterns.place[errors].tolist(), patterns.pauli[errors].tolist(), strict=True))
        overlap = abs(np.vdot(state[0], state_with_errors(noisy, pairs)))
        assert overlap == pytest.approx(1, abs=1e-12)


def test_the_weight_without_errors_is_the_product_over_all_places():
    circuit = random_circuit(4, 3, seed=1)
    noise = noise_model(4)
    noisy = noisy_program(circuit, noise)
    assert noisy.error_free == pytest.approx(np.prod(1 - noisy.places.probability), rel=1e-12)
    real = ~VIRTUAL[noisy.rows.kind]
    assert np.count_nonzero(noisy.places.source == 1) == np.count_nonzero(real & (noisy.rows.qubits[:, 1] >= 0))


def test_places_are_struck_as_often_as_their_probabilities_say():
    """4 sigma of a binomial count over all trajectories, each place given at least one error anywhere; fixed seed."""
    noisy = noisy_program(random_circuit(4, 4, seed=5), noise_model(4, 2.0))
    patterns = draw_patterns(noisy, 40000, 16, Draw(7, "test"))
    assert np.all(np.diff(patterns.start) >= 1)
    share = np.bincount(patterns.place, minlength=len(noisy.places)) / len(patterns)
    expected = noisy.places.probability / (1 - noisy.error_free)
    assert np.all(np.abs(share - expected) < 4 * np.sqrt(expected / len(patterns)))


def test_paulis_are_struck_as_often_as_their_shares_say():
    noisy = noisy_program(random_circuit(4, 4, seed=5), noise_model(4, 2.0))
    patterns = draw_patterns(noisy, 40000, 16, Draw(8, "test"))
    place = noisy.places.take(patterns.place)
    two = place.qubits[:, 1] >= 0
    counts = np.bincount(patterns.pauli[two], minlength=16)
    assert counts[0] == 0
    assert np.all(np.abs(counts[1:] - two.sum() / 15) < 4 * np.sqrt(two.sum() / 15))
    for source, columns in ((0, np.array([1, 1, 1]) / 3),):
        mine = place.source == source
        counts = np.bincount(patterns.pauli[mine], minlength=4)[1:]
        assert np.all(np.abs(counts - mine.sum() * columns) < 4 * np.sqrt(mine.sum() * columns))
    idle = place.source == 2
    z = float(place.share_z[idle].sum())
    assert abs(np.count_nonzero(patterns.pauli[idle] == 3) - z) < 4 * np.sqrt(z)


def test_scores_average_to_zero_over_all_patterns():
    """The weights of all patterns add up to 1 for every rate, so the mean score is 0: 4 sigma, fixed seed."""
    noisy = noisy_program(random_circuit(4, 4, seed=5), noise_model(4))
    patterns = draw_patterns(noisy, 20000, 16, Draw(9, "test"))
    struck = 1 - noisy.error_free
    for source in range(len(SOURCES)):
        scores = patterns.scores[:, source]
        mean = noisy.error_free * noisy.error_free_scores[source] + struck * scores.mean()
        assert abs(mean) < 4 * struck * scores.std() / np.sqrt(len(scores))


def test_patterns_depend_on_the_draw_alone():
    noisy = noisy_program(random_circuit(4, 3, seed=1), noise_model(4))
    one, two = (draw_patterns(noisy, 100, 8, Draw(3, "same")) for _ in range(2))
    assert one.place.tolist() == two.place.tolist()
    assert one.pauli.tolist() == two.pauli.tolist()
    assert draw_patterns(noisy, 100, 8, Draw(4, "same")).place.tolist() != one.place.tolist()
    assert len(draw_patterns(noisy, 101, 8, Draw(3, "same"))) == 104

import math

import numpy as np
import pytest

from rcbench.shots.evidence import identity
from rcbench.shots.evidence.finding import ALPHA
from rcbench.shots.evidence.seed import other_kit


def test_deep_circuits_overlap_by_two_to_the_minus_half_the_qubits():
    """Spread of D sum p p' - 1 over 66 pairs of Porter-Thomas outcomes of 10 qubits, within 30 %."""
    rng = np.random.default_rng(0)
    p = rng.exponential(size=(12, 2**10))
    assert identity.overlap_spread(p / p.mean(axis=1, keepdims=True), 10) == pytest.approx(2**-5, rel=0.3)


def test_an_overlap_from_some_outcomes_is_not_made_larger_by_their_choice():
    rng = np.random.default_rng(1)
    p = rng.exponential(size=(12, 2**16))
    p /= p.mean(axis=1, keepdims=True)
    picked = rng.integers(0, 2**16, 2**12)
    assert identity.overlap_spread(p[:, picked], 16) < 3 * 2**-8


def test_exchanged_runs_go_back_and_others_stay():
    value = np.full((4, 5), -np.inf)
    value[0, 1], value[1, 0], value[3, 4] = 40.0, 25.0, 30.0
    own = np.array([0.0, 0.0, 9.0, 2.0])
    goes = identity.assign(value, own)
    assert goes.tolist() == [1, 0, 2, 4]
    found = identity.moves(goes, value, own, circuits=20)
    assert [(move.runs, move.closed) for move in found] == [((3,), False), ((0, 1), True)]
    assert found[0].gain == 28.0
    assert found[0].limit == pytest.approx(math.log(4 * 20 / ALPHA))
    assert found[1].limit == pytest.approx(2 * math.log(4) - math.log(2) + math.log(1 / ALPHA))


def test_a_run_that_fits_nowhere_makes_room():
    value = np.full((2, 2), -np.inf)
    value[0, 1] = 60.0
    goes = identity.assign(value, np.zeros(2))
    assert goes.tolist() == [1, identity.NOWHERE]


def test_a_move_is_credited_with_no_more_than_its_place_allows():
    value = np.full((2, 2), -np.inf)
    value[0, 1], value[1, 0] = 500.0, 500.0
    goes = identity.assign(value, np.zeros(2))
    most = np.full(2, 4 * math.log(2))  # strings of four bits
    assert identity.moves(goes, value, np.zeros(2), 30, most) == []
    assert len(identity.moves(goes, value, np.zeros(2), 30, np.full(2, 20 * math.log(2)))) == 1


def test_ties_leave_runs_in_their_places():
    value = np.full((3, 3), 7.0)
    assert identity.assign(value, np.full(3, 7.0)).tolist() == [0, 1, 2]


def test_another_kit_needs_structure_and_no_match():
    none, strong = np.zeros(10, dtype=bool), np.full(10, 4.0)
    found = other_kit(strong, strong, np.full(10, 0.25), none, none)
    assert found is not None
    assert found.self_fidelity == pytest.approx(0.5)
    assert found.sigmas == pytest.approx(40 / math.sqrt(10))
    matched = none.copy()
    matched[0] = True
    assert other_kit(strong, strong, np.full(10, 0.25), matched, none) is None
    assert other_kit(np.zeros(10), np.zeros(10), np.zeros(10), none, none) is None
    assert other_kit(strong[:1], strong[:1], np.full(1, 0.25), none[:1], none[:1]) is None

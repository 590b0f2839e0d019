import numpy as np
import pytest
from scipy.stats import chi2, chi2_contingency, norm, poisson

from rcbench.shots.evidence import blocks, drift
from rcbench.shots.evidence.repeats import in_order


def test_a_block_within_a_run_is_found_where_it_is():
    rng = np.random.default_rng(0)
    run = rng.integers(0, 64, 1000)
    run[700:820] = run[100:220]
    [block] = blocks.repeated_blocks([run])
    found = (block.first, block.again_first, block.length)
    assert (found[1] - found[0], found[2] >= 120) == (600, True)
    assert found[0] <= 100 < 220 <= found[0] + found[2]


def test_a_block_of_another_run_is_found():
    rng = np.random.default_rng(1)
    runs = [rng.integers(0, 4096, 500) for _ in range(5)]
    runs[3][:60] = runs[1][200:260]
    [block] = blocks.repeated_blocks(runs)
    assert (block.run, block.again) in ((1, 3), (3, 1))
    assert block.length >= 60


def test_random_runs_hold_no_block_of_another():
    """300 sets of runs, of which at most ALPHA = 1e-3 each may be told."""
    rng = np.random.default_rng(2)
    found = sum(bool(blocks.repeated_blocks([rng.integers(0, 16, 400) for _ in range(4)])) for _ in range(300))
    assert found <= 2


def test_a_qubit_that_rests_is_no_block():
    rng = np.random.default_rng(3)
    run = rng.integers(0, 64, 2000)
    run[300:400] = 0
    run[1500:1600] = 0
    assert blocks.repeated_blocks([run]) == []


def test_runs_of_one_outcome_have_no_blocks():
    assert blocks.repeated_blocks([np.zeros(500, dtype=np.int64), np.zeros(500, dtype=np.int64)]) == []


def test_equal_counts_are_as_rare_as_equal_poisson_numbers():
    counts = np.array([3, 1, 7])
    expected = -sum(np.log((poisson.pmf(np.arange(200), c) ** 2).sum()) for c in counts)
    assert blocks.chance_of_equal(counts) == pytest.approx(expected, rel=1e-9)


def test_equal_tables_are_told_where_they_say_something():
    rng = np.random.default_rng(4)
    table = np.unique(rng.integers(0, 4096, 300), return_counts=True)
    other = np.unique(rng.integers(0, 4096, 300), return_counts=True)
    assert [pair[:2] for pair in blocks.same_tables([table, other, table])] == [(0, 2)]
    certain = (np.array([0]), np.array([1000]))  # two perfect echoes
    assert blocks.same_tables([certain, certain]) == []


def test_sorted_shots_have_no_order():
    rng = np.random.default_rng(5)
    run = rng.integers(0, 64, 1000)
    assert in_order(run)
    assert not in_order(np.sort(run))
    grouped = np.concatenate([np.full(20, value) for value in rng.permutation(50)])
    assert not in_order(grouped)


def test_change_of_a_bit_is_the_chi_square_of_its_table():
    rng = np.random.default_rng(6)
    run = rng.integers(0, 2, 800)
    table = np.array([[part.sum(), len(part) - part.sum()] for part in np.array_split(run, drift.PARTS)])
    change = drift.change_of_bits([run], 1)[0]
    assert change.chi2[0] == pytest.approx(chi2_contingency(table, correction=False).statistic, rel=1e-10)
    assert change.dof[0] == drift.PARTS - 1


def test_steady_shots_do_not_drift():
    """500 runs: sigmas of change beyond 2 no more often than 4 sigmas above chance."""
    rng = np.random.default_rng(7)
    change = drift.change_of_values([rng.normal(size=400) for _ in range(500)])
    above = (change.sigmas_by_run() > 2).mean()
    assert above < 0.023 + 4 * np.sqrt(0.023 / 500)


def test_sigmas_of_a_chi_square_are_those_of_its_tail_also_far_out():
    assert drift.chi2_sigmas(30.0, 7) == pytest.approx(norm.isf(chi2.sf(30.0, 7)))
    assert 60 < drift.chi2_sigmas(5000.0, 7) < 80
    assert drift.chi2_sigmas(3.0, 0) == 0.0


def test_the_same_circuit_in_two_batches_tells_them_apart():
    circuit, batch = ["a", "a", "b", "b", "c"], ["0", "1", "0", "1", "1"]
    value, error = np.array([0.5, 0.4, 0.3, 0.2, 0.9]), np.full(5, 0.01)
    found = drift.between_batches(circuit, batch, value, error)
    assert found is not None
    assert found.sigmas == pytest.approx(norm.isf(chi2.sf(2 * 2 * 25.0, 2)))
    assert (found.low[0], found.high[0]) == ("1", "0")
    assert found.high[1] - found.low[1] == pytest.approx(0.1)
    assert drift.between_batches(["a", "b"], ["0", "1"], value[:2], error[:2]) is None

import itertools

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import binom, multinomial

from rcbench.shots.evidence import orphans, scores

N = 6
SIZE = 2**N
ONE = np.zeros(1, dtype=np.int64)


def porter_thomas(rng, size=SIZE):
    p = rng.exponential(size=size)
    return p / p.sum()


def sample(rng, p, shots):
    counts = rng.multinomial(shots, p)
    index = np.flatnonzero(counts)
    return index, counts[index]


def test_the_floor_is_the_product_of_its_bits():
    bias = np.array([0.1, -0.3, 0.0, 0.5, 0.2, -0.05])
    expected = [
        np.prod([(1 + b) / 2 if bit == "0" else (1 - b) / 2 for bit, b in zip(bits, bias, strict=True)])
        for bits in (format(x, "06b") for x in range(SIZE))
    ]
    assert_allclose(scores.floor(bias), expected, rtol=1e-12)
    index = np.array([0, 5, 63, 17])
    assert_allclose(1 / scores.inverse_floor_at(index, bias), np.array(expected)[index], rtol=1e-12)


def test_log_likelihoods_are_those_of_the_multinomial_distribution():
    rng = np.random.default_rng(0)
    p, floor = porter_thomas(rng), scores.floor(rng.uniform(-0.2, 0.2, N))
    index, counts = sample(rng, p, 50)
    found = scores.log_likelihoods((p / floor)[index], counts, ONE)[0]
    full = np.zeros(SIZE, dtype=np.int64)
    full[index] = counts
    for fidelity, value in zip(scores.FIDELITIES, found, strict=True):
        mixed = fidelity * p + (1 - fidelity) * floor
        expected = multinomial.logpmf(full, 50, mixed) - multinomial.logpmf(full, 50, floor)
        assert value == pytest.approx(expected, abs=1e-6)


def test_strings_that_return_flip_bits_as_the_binomial_distribution_says():
    distance, counts = np.array([0, 1, 3, 6]), np.array([20, 7, 2, 1])
    found = scores.returned_log_likelihoods(distance, counts, ONE, N)[0].reshape(len(scores.FLIPS), -1)
    for row, flip in enumerate(scores.FLIPS):
        p = binom.pmf(distance, N, flip) / binom.pmf(distance, N, 0.5)  # the number of strings at a distance drops out
        expected = [counts @ np.log(f * p + 1 - f) for f in scores.FIDELITIES]
        assert_allclose(found[row], expected, rtol=1e-10)


def test_collisions_count_pairs_of_different_shots():
    rng = np.random.default_rng(1)
    bias = np.full(N, 0.15)
    shots = rng.integers(0, SIZE, 60)
    index, counts = np.unique(shots, return_counts=True)
    inverse = 1 / scores.floor(bias)
    expected = np.mean([inverse[a] * (a == b) for a, b in itertools.permutations(shots.tolist(), 2)]) - 1
    found = scores.collisions(inverse[index], counts, ONE, SIZE)
    assert found.excess[0] == pytest.approx(expected, rel=1e-10)
    assert found.pairs[0] == sum(a == b for a, b in itertools.combinations(shots.tolist(), 2))


@pytest.mark.parametrize("fidelity", [0.0, 0.3])
def test_structure_beyond_the_own_circuit_is_a_standard_normal_number(fidelity):
    """400 runs of 3000 shots: the mean within 4 sigmas of 0, no more than 4 sigmas too many above 2."""
    rng = np.random.default_rng(2)
    p = porter_thomas(rng)
    f = fidelity * p + (1 - fidelity) / SIZE
    runs = [sample(rng, f, 3000) for _ in range(400)]
    index = np.concatenate([run[0] for run in runs])
    counts = np.concatenate([run[1] for run in runs])
    starts = np.cumsum([0, *(len(run[0]) for run in runs[:-1])])
    v = SIZE * float(p @ p) - 1
    own = scores.crossed(SIZE * p[index], counts, starts, v)
    found = scores.collisions(np.full(len(index), float(SIZE)), counts, starts, SIZE)
    z = orphans.unexplained(found, own)
    assert abs(z.mean()) < 4 / 20 + 0.15  # the error of the explained part is counted as if it were independent
    assert z.std() < 1.2
    above = (z > 2).mean()
    assert above < 0.023 + 4 * np.sqrt(0.023 / 400)
    assert orphans.consistent(found, own).mean() > 0.98


def test_a_wrong_circuit_is_credited_with_t_nats_at_most_once_in_exp_t():
    """Markov's inequality for the mixture, 4 sigmas over 3000 runs of uniform shots, peaked circuit or flat."""
    rng = np.random.default_rng(3)
    for sharpness in (1.0, 6.0):
        p = porter_thomas(rng) ** sharpness
        p /= p.sum()
        counts = rng.multinomial(200, np.full(SIZE, 1 / SIZE), size=3000)
        gain = counts @ np.log1p(scores.FIDELITIES[:, None] * (SIZE * p - 1)).T
        mixed = scores.mixture(gain)
        for nats in (1.0, 2.0, 3.0):
            bound = np.exp(-nats)
            assert (mixed > nats).mean() < bound + 4 * np.sqrt(bound / 3000)


def test_biased_independent_bits_and_pairs_hold_no_many_bit_structure():
    """One run of 200,000 shots: readout bias and a correlated pair give much structure, none of it beyond pairs."""
    rng = np.random.default_rng(4)
    bits = (rng.random((200_000, N)) < [0.3, 0.45, 0.5, 0.6, 0.4, 0.35]).astype(np.int64)
    bits[:, 1] ^= bits[:, 0] & (rng.random(200_000) < 0.5)
    index, counts = np.unique(bits @ (1 << np.arange(N - 1, -1, -1)), return_counts=True)
    plain = scores.collisions(np.full(len(index), float(SIZE)), counts, ONE, SIZE)
    assert plain.excess[0] > 40 * plain.error[0]
    excess, error = orphans.many_bit_structure(index, counts, N)
    assert abs(excess) < 4 * error


def test_many_bit_structure_of_a_deep_circuit_is_nearly_all_its_structure():
    rng = np.random.default_rng(5)
    n, fidelity = 8, 0.6
    p = porter_thomas(rng, 2**n)
    index, counts = sample(rng, fidelity * p + (1 - fidelity) / 2**n, 40_000)
    excess, error = orphans.many_bit_structure(index, counts, n)
    v = 2**n * float(p @ p) - 1
    low = 1 - (n + n * (n - 1) / 2) / 2**n  # the share of all products of bits that are neither single bits nor pairs
    assert excess == pytest.approx(fidelity**2 * v * low, abs=4 * error + 0.03)


def test_shells_explain_whatever_depends_on_the_distance_alone():
    n, flip, fidelity = 5, 0.07, 0.8
    distance = np.bitwise_count(np.arange(2**n)).astype(np.int64)
    f = fidelity * flip**distance * (1 - flip) ** (n - distance) + (1 - fidelity) / 2**n
    share = np.array([[f[distance == k].sum() for k in range(n + 1)]])
    assert orphans.shell_excess(share, n)[0] == pytest.approx(2**n * float(f @ f) - 1, rel=1e-12)

import numpy as np
import pytest
from scipy import stats

from rcbench.randomness import Draw


def test_a_draw_depends_on_every_part_of_its_key_and_on_nothing_else():
    first = Draw(1, "a", 2).words(4)
    assert np.array_equal(first, Draw(1, "a", 2).words(4))
    for other in (Draw(2, "a", 2), Draw(1, "b", 2), Draw(1, "a", 3), Draw(1, "a", "2"), Draw(1, "a2")):
        assert not np.array_equal(first, other.words(4))


def test_the_raw_words_are_those_of_pcg64_seeded_by_sha256():
    """The key's SHA-256, worked out by hand, seeds PCG64: the published generator, none of numpy's distributions."""
    import hashlib

    digest = hashlib.sha256(b"7\x1fstr:x\x1fint:3").digest()
    expected = np.random.PCG64(int.from_bytes(digest, "big")).random_raw(5)
    assert np.array_equal(Draw(7, "x", 3).words(5), expected)


def test_integers_follow_from_the_high_half_of_each_word():
    words = Draw(1, "map").words(1000)
    expected = [(int(word) >> 32) * 24 >> 32 for word in words]
    assert Draw(1, "map").integers(24, 1000).tolist() == expected


@pytest.mark.parametrize("bound", [2, 3, 24, 11520])
def test_integers_are_uniform(bound):
    drawn = Draw(3, "uniform", bound).integers(bound, 40 * bound)
    counts = np.bincount(drawn, minlength=bound)
    assert len(counts) == bound
    assert stats.chisquare(counts).pvalue > 1e-4  # 3.9 sigma, fixed seed


def test_uniform_and_normal_numbers_pass_kolmogorov_smirnov():
    assert stats.kstest(Draw(1, "u").uniform(5000), "uniform").pvalue > 1e-4
    assert stats.kstest(Draw(1, "n").normal(5001), "norm").pvalue > 1e-4


def test_a_permutation_holds_each_place_once_and_all_orders_come_up():
    orders = {tuple(Draw(5, "order", k).permutation(3)) for k in range(200)}
    assert len(orders) == 6
    assert sorted(Draw(5, "long").permutation(50).tolist()) == list(range(50))
    assert Draw(5, "none").permutation(0).tolist() == []

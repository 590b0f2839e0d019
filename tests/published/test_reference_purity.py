"""Averaged purity and Choi purity of the Haar brickwork: exact numbers, four recursions, sampled circuits."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sampled_brickwork import assert_mean, choi, purities, sampled_states, sampled_unitaries

from rcbench.errors import InputError
from rcbench.reference import haar
from rcbench.reference.brickwork import choi as operators
from rcbench.reference.brickwork import purity

BITS = np.log(2)
CUTS = {  # (n, depth): cuts 1 .. n - 1, exact
    (4, 1): (4 / 5, 1, 4 / 5),
    (4, 2): (4 / 5, 16 / 25, 4 / 5),
    (4, 3): (82 / 125, 16 / 25, 82 / 125),
    (4, 4): (82 / 125, 328 / 625, 82 / 125),
    (4, 5): (1906 / 3125, 328 / 625, 1906 / 3125),
    (6, 3): (82 / 125, 16 / 25, 64 / 125, 16 / 25, 82 / 125),
    (6, 4): (82 / 125, 292 / 625, 64 / 125, 292 / 625, 82 / 125),
}


@pytest.mark.parametrize(("case", "values"), CUTS.items())
def test_purity_of_a_cut_is_the_exact_rational(case, values):
    """Nahum, Vijay and Haah, PRX 8, 021014 (2018); Zhou and Nahum, PRB 99, 174205 (2019)."""
    assert_allclose(purity.cut_purity(*case)[-1, 1:-1], values, rtol=1e-13)


@pytest.mark.parametrize("q", [2, 3])
@pytest.mark.parametrize(("n", "depth"), [(5, 4), (8, 6), (8, 7)])
def test_four_recursions_agree(n, depth, q):
    """One cut, contiguous regions, all subsets, and the compressed label sums: 1e-12."""
    cuts, regions = purity.cut_purity(n, depth, q=q)[-1], purity.region_purity(n, depth, q=q)
    subsets = purity.subset_purity(n, depth, q=q)
    assert_allclose(regions, regions.T, rtol=1e-13)
    assert_allclose(cuts, regions[0], rtol=1e-12)
    for x, y in ((0, 3), (1, 4), (2, 5), (1, n)):
        pattern = sum(1 << (n - 1 - site) for site in range(x, y))
        assert_allclose(subsets[pattern], regions[x, y], rtol=1e-12)
    for region in ((0, 2, 3), (1, n - 1), (), tuple(range(n))):
        pattern = sum(1 << (n - 1 - site) for site in region)
        assert_allclose(purity.pattern_purity(n, region, depth, q=q)[-1], subsets[pattern], rtol=1e-12)


def test_rings_agree_between_subsets_and_label_sums():
    subsets = purity.subset_purity(6, 4, ring=True)
    for region in ((0, 1, 2), (5, 0), (0, 2, 4)):
        pattern = sum(1 << (5 - site) for site in region)
        assert_allclose(purity.pattern_purity(6, region, 4, ring=True)[-1], subsets[pattern], rtol=1e-12)
    assert_allclose(subsets[0b110000], subsets[0b001100], rtol=1e-12)  # moved by one period


REGIONS = {  # (depth, region): exact value at 8 qubits
    (4, (2, 3, 4)): 0.288051,
    (6, (0, 1, 2, 3)): 0.280576,
    (10, (1, 2, 3, 4, 5, 6)): 0.288528,
    (10, (0, 3, 4, 6)): 0.140099,
}


@pytest.mark.parametrize(("case", "value"), REGIONS.items())
def test_purity_of_regions_of_sampled_brickworks(case, value):
    """8 qubits, 200 circuits simulated in numpy with Haar gates from scipy, 4 sigma."""
    depth, region = case
    exact = purity.pattern_purity(8, region, depth)[-1]
    assert_allclose(exact, value, atol=6e-7)
    assert_mean(purities(sampled_states(8, depth, 200, depth + len(region)), region), exact)


@pytest.mark.slow
@pytest.mark.parametrize(("n", "depth"), [(6, 3), (8, 5), (8, 10)])
def test_purity_of_every_cut_of_ten_thousand_sampled_brickworks(n, depth):
    """10^4 circuits, 4 sigma, every cut and every region of three neighbours."""
    states = sampled_states(n, depth, 10_000, 1000 * n + depth)
    table = purity.region_purity(n, depth)
    for x, y in [(0, cut) for cut in range(1, n)] + [(x, x + 3) for x in range(1, n - 2)]:
        assert_mean(purities(states, range(x, y)), table[x, y])


def test_purity_of_sampled_ring_and_of_sampled_qutrits():
    """Ring of 6 qubits, and 4 qutrits with 9 x 9 Haar gates; 300 circuits, 4 sigma."""
    states = sampled_states(6, 4, 300, 3, ring=True)
    assert_mean(purities(states, (5, 0)), purity.pattern_purity(6, (0, 5), 4, ring=True)[-1])
    states = sampled_states(4, 3, 300, 4, q=3)
    assert_mean(purities(states, (0, 1)), purity.cut_purity(4, 3, q=3)[-1, 2])
    assert_mean(purities(states, (1,)), purity.region_purity(4, 3, q=3)[1, 2])


def test_late_purity_is_that_of_haar_states():
    """Lubkin's value for every size of region; (16 + 16)/257 at 8 qubits."""
    table = purity.region_purity(8, 600)
    for x in range(9):
        for y in range(x, 9):
            assert_allclose(table[x, y], haar.purity(y - x, 8), rtol=1e-11)
    assert_allclose(purity.pattern_purity(9, (0, 4), 400)[-1], haar.purity(2, 9), rtol=1e-11)


def test_entropy_of_a_bulk_cut_grows_by_the_published_rate():
    """ln((q^2 + 1)/(2q)) a layer: 321.928 bits after 1000 layers of 1000 sites, in steps of two layers."""
    table = purity.cut_purity(1000, 1000)
    assert_allclose(-np.log2(table[-1, 500]), 321.928, atol=5e-4)
    assert_allclose(-np.log(table[1:200:2, 501]), purity.entanglement_rate() * np.arange(1, 200, 2), rtol=1e-9)
    assert_allclose(table[2:100:2, 501], table[1:99:2, 501])
    assert_allclose(purity.entanglement_rate(2) / BITS, 0.32193, atol=5e-6)
    assert_allclose(purity.entanglement_rate(3), np.log(10 / 6), rtol=1e-14)


def test_large_tables_hold_the_contiguous_regions():
    """1000 sites, 40 layers: a bulk region of many sites is two cuts, a short one is not."""
    table, cut = purity.region_purity(1000, 40), purity.cut_purity(1000, 40)[-1]
    assert_allclose(table[300, 700], cut[300] * cut[700], rtol=1e-9)
    assert table[300, 304] > 2 * cut[300] * cut[304]


@pytest.mark.parametrize(("n", "factor"), [(4, 0.56569), (6, 0.69282), (8, 0.73910), (12, 0.77274)])
def test_purity_approaches_haar_by_one_factor_a_layer(n, factor):
    """0.8 cos(pi/n), layers 40 to 42; to 1e-4."""
    table = purity.cut_purity(n, 42)[:, n // 2] - haar.purity(n // 2, n)
    assert_allclose(purity.relaxation_factor(n), factor, atol=6e-6)
    assert_allclose(np.sqrt(table[42] / table[40]), factor, rtol=1e-4)
    assert_allclose(purity.relaxation_factor(n, 3), 0.6 * np.cos(np.pi / n), rtol=1e-14)


def test_choi_purity_at_small_depth():
    """4 sites: 0.4000 (2 layers, halves), 0.304 (3, one site), 0.208 (5, halves), at last 2/17; sampled, 4 sigma."""
    halves = operators.operator_purity(4, (0, 1), (0, 1), 40)
    ones = operators.operator_purity(4, (0,), (0,), 3)
    assert_allclose([halves[2], ones[3], halves[5]], [0.4, 0.304, 0.208], rtol=1e-12)
    assert_allclose(halves[-1], 2 / 17, rtol=1e-9)
    state = choi(sampled_unitaries(4, 5, 200, 8))
    assert_mean(purities(state, (0, 1, 4, 5)), halves[5])
    state = choi(sampled_unitaries(4, 3, 200, 9))
    assert_mean(purities(state, (0, 4)), ones[3])
    # outputs 0 and 3 with input 1: a region that is not contiguous, outputs first in the Choi state
    assert_mean(purities(state, (0, 3, 5)), operators.operator_purity(4, (1,), (0, 3), 3)[-1])


def test_operator_tripartite_information_of_the_brickwork():
    """6 sites, halves, in bits; repeats on every second layer, ends at the Haar value -4.04474."""
    found = operators.operator_tmi_renyi2(6, (0, 1, 2), (0, 1, 2), 60) / BITS
    values = {1: -0.64386, 2: -0.64386, 3: -1.42377, 4: -1.42377, 6: -2.19587, 8: -2.85643, 12: -3.66675, 20: -4.02187}
    assert_allclose(found[list(values)], list(values.values()), atol=6e-6)
    assert found[0] == pytest.approx(0, abs=1e-14)
    assert_allclose(found[60], -4.04474, atol=6e-6)
    late = operators.operator_tmi_renyi2(6, (0, 1, 2), (3, 5), 300)[-1]
    assert_allclose(late, haar.operator_tmi_renyi2(3, 2, 6), rtol=1e-10)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: purity.cut_purity(1, 2), "n_qubits: found 1; allowed: a whole number, 2 or more"),
        (lambda: purity.subset_purity(23, 2), "n_qubits: found 23; allowed: a whole number from 2 to 22"),
        (lambda: purity.pattern_purity(33, (0,), 2), "n_qubits: found 33; allowed: a whole number from 2 to 32"),
        (lambda: purity.pattern_purity(6, (0, 0), 2), "region: found (0, 0); allowed: each qubit once"),
        (lambda: purity.pattern_purity(6, (6,), 2), "region: found 6; allowed: a whole number from 0 to 5"),
        (lambda: purity.pattern_purity(6, (0,), 2, noise=1.5), "noise: found 1.5; allowed: a number from 0 to 1"),
        (
            lambda: purity.pattern_purity(6, (0,), 2, noise=[0.1]),
            "noise: found (1,); allowed: one rate, or one for each",
        ),
        (lambda: purity.pattern_purity(6, (0,), 2, q=0), "q: found 0; allowed: a whole number, 2 or more"),
        (lambda: operators.operator_tmi_renyi2(4, (0,), (4,), 2), "region_out: found 4; allowed: a whole number"),
    ],
)
def test_impossible_sizes_are_refused_in_words(call, message):
    with pytest.raises(InputError) as error:
        call()
    assert message in str(error.value)

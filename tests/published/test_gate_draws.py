"""Random gates against published values: Haar 4 x 4 draws, and the Clifford groups."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.stats
import stim

from rcbench.circuits.cliffords import CLIFFORD1, ORDER, two_qubit_cliffords
from rcbench.circuits.ensembles import haar_unitaries
from rcbench.randomness import Draw

POWERS = np.arange(1, 6)


def eigenphases(unitaries: np.ndarray) -> np.ndarray:
    return np.sort(np.angle(np.linalg.eigvals(unitaries)), axis=1)


@pytest.mark.parametrize(("dimension", "values"), [(2, (1, 2, 5)), (4, (1, 2, 6))])
def test_haar_draws_have_the_published_frame_potentials(dimension, values):
    """E |tr U^dag V|^2k = number of permutations of k with no increasing subsequence longer than the dimension.

    Rains, Electron. J. Combin. 5, R12 (1998); Gross, Audenaert and Eisert, J. Math. Phys. 48, 052104 (2007). 4 sigma.
    """
    u = haar_unitaries(Draw(1, "published", dimension), 60_000, dimension)
    traces = np.abs(np.einsum("mij,mij->m", u[:30_000].conj(), u[30_000:])) ** 2
    for k, value in enumerate(values, start=1):
        moments = traces**k
        assert abs(moments.mean() - value) < 4 * moments.std() / np.sqrt(len(moments))


def test_haar_draws_have_the_spectral_form_factor_of_the_circular_unitary_ensemble():
    """E |tr U^t|^2 = min(t, 4): Haake et al., J. Phys. A 29, 3641 (1996). 4 sigma."""
    phases = eigenphases(haar_unitaries(Draw(2, "published"), 20_000, 4))
    for t in (1, 2, 3, 4, 5, 8):
        traces = np.abs(np.exp(1j * t * phases).sum(axis=1)) ** 2
        assert abs(traces.mean() - min(t, 4)) < 4 * traces.std() / np.sqrt(len(traces))


def spacing_density(s: np.ndarray, points: int = 96) -> np.ndarray:
    """Weyl's joint density of Haar eigenphases, integrated: the density of the gap s from one of four to the next.

    The two other phases lie between s and 2 pi. Gauss-Legendre points make it exact, since the
    density is a trigonometric polynomial of low degree.
    """
    nodes, weights = np.polynomial.legendre.leggauss(points)
    out = np.empty(len(s))
    for index, gap in enumerate(s):
        x = gap + (2 * np.pi - gap) * (nodes + 1) / 2
        w = weights * (2 * np.pi - gap) / 2
        a, b = np.meshgrid(x, x)
        phases = [np.zeros_like(a), np.full_like(a, gap), a, b]
        density = np.prod(
            [np.abs(np.exp(1j * p) - np.exp(1j * q)) ** 2 for i, p in enumerate(phases) for q in phases[:i]], axis=0
        )
        out[index] = (w[:, None] * w * density).sum()
    return out


def test_gaps_between_eigenphases_of_4x4_draws_follow_weyls_density():
    """Kolmogorov-Smirnov test against the gap density of Weyl's formula (Mehta, Random Matrices, ch. 10-11), p > 1e-4.

    One gap a matrix, so that the gaps are independent. Without the phase fix of the QR decomposition it fails.
    """
    u = haar_unitaries(Draw(3, "published"), 20_000, 4)
    grid = np.linspace(0, 2 * np.pi, 201)
    density = spacing_density(grid)
    cumulative = np.concatenate([[0], np.cumsum((density[1:] + density[:-1]) / 2)])
    cumulative /= cumulative[-1]
    phases = eigenphases(u)
    # the gap after the eigenphase of a random place: all four are alike
    gaps = np.diff(np.concatenate([phases, phases[:, :1] + 2 * np.pi], axis=1), axis=1)
    chosen = gaps[np.arange(len(gaps)), Draw(4, "place").integers(4, len(gaps))]
    assert scipy.stats.kstest(chosen, lambda x: np.interp(x, grid, cumulative)).pvalue > 1e-4


def test_gap_ratios_of_larger_draws_are_those_of_the_circular_unitary_ensemble():
    """Mean ratio of neighbouring gaps 0.5996: Atas et al., Phys. Rev. Lett. 110, 084101 (2013). Within 0.01."""
    phases = eigenphases(haar_unitaries(Draw(5, "published"), 150, 48))
    gaps = np.diff(phases, axis=1)
    ratios = np.minimum(gaps[:, 1:], gaps[:, :-1]) / np.maximum(gaps[:, 1:], gaps[:, :-1])
    assert abs(ratios.mean() - 0.5996) < 0.01


def test_columns_of_haar_draws_are_haar_states():
    """|U_ij|^2 is Beta(1, 3) for 4 x 4 and its phase uniform; Kolmogorov-Smirnov tests, each p > 1e-4."""
    u = haar_unitaries(Draw(6, "published"), 4000, 4).reshape(-1, 16)
    for entry in u.T:
        assert scipy.stats.kstest(np.abs(entry) ** 2, scipy.stats.beta(1, 3).cdf).pvalue > 1e-4
        assert scipy.stats.kstest(np.angle(entry) / (2 * np.pi) + 0.5, "uniform").pvalue > 1e-4


def test_cliffords_have_the_published_frame_potentials_exactly():
    """k = 1..5: 1, 2, 5, 15, 51 for one qubit and 1, 2, 6, 29, 219 for two.

    Zhu, Kueng, Grassl and Gross, arXiv:1609.08172; the mean over a group of |tr g|^2k is its frame potential.
    """
    for elements, values in (
        (CLIFFORD1, (1, 2, 5, 15, 51)),
        (two_qubit_cliffords(np.arange(ORDER)).matrices(), (1, 2, 6, 29, 219)),
    ):
        traces = np.abs(np.einsum("mii->m", elements)) ** 2
        found = [(np.round(traces, 9) ** k).mean() for k in POWERS]
        assert np.allclose(found, values, rtol=0, atol=1e-6)


def test_all_11520_two_qubit_cliffords_are_reached():
    """Compared with the tableaus that stim enumerates."""
    elements = two_qubit_cliffords(np.arange(ORDER)).matrices().astype(np.complex64)
    found = {str(stim.Tableau.from_unitary_matrix(u, endian="big")) for u in elements}
    assert len(found) == 11520
    assert found == {str(tableau) for tableau in stim.Tableau.iter_all(2)}


def test_drawn_clifford_numbers_are_uniform_over_the_group():
    """Chi-square over 96 equal parts of the group, p between 1e-4 and 1 - 1e-4."""
    index = Draw(7, "published").integers(ORDER, 48_000)
    p = scipy.stats.chisquare(np.bincount(index // 120, minlength=96)).pvalue
    assert 1e-4 < p < 1 - 1e-4

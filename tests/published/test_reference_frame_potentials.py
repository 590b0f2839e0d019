"""Frame potentials against counts made in other ways, and against sampled unitaries."""

from __future__ import annotations

from itertools import permutations
from math import factorial

import numpy as np
import pytest
import stim
from numpy.testing import assert_allclose
from sampled_brickwork import haar
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from rcbench.errors import InputError
from rcbench.reference import frame_potentials as reference

GROWTH = {  # k = 1 .. 7: Rains, Electron. J. Combin. 5, R12 (1998)
    2: (1, 2, 5, 14, 42, 132, 429),
    3: (1, 2, 6, 23, 103, 513, 2761),
    4: (1, 2, 6, 24, 119, 694, 4582),
}


@pytest.mark.parametrize("dimension", GROWTH)
def test_haar_frame_potentials_are_the_published_numbers(dimension):
    assert tuple(reference.unitary(k, dimension) for k in range(1, 8)) == GROWTH[dimension]


def longest_rise(order: tuple[int, ...]) -> int:
    ends: list[int] = []
    for value in order:
        place = sum(end < value for end in ends)
        ends[place : place + 1] = [value]
    return len(ends)


@pytest.mark.parametrize("k", range(1, 8))
def test_haar_frame_potentials_count_permutations_without_long_rises(k):
    """Every permutation of up to 7 looked at."""
    rises = np.array([longest_rise(order) for order in permutations(range(k))])
    for dimension in range(1, 8):
        assert reference.unitary(k, dimension) == np.sum(rises <= dimension)


def test_large_haar_frame_potentials():
    """k! where k <= d; the partition sum meets Catalan numbers at d = 2, and d = k - 1 lacks one permutation."""
    assert reference.unitary(30, 64) == factorial(30)
    assert reference.unitary(30, 2) == factorial(60) // factorial(30) // factorial(31)
    assert reference.unitary(20, 19) == factorial(20) - 1
    assert reference.unitary(0, 4) == 1


@pytest.mark.parametrize(("dimension", "values"), [(4, (4, 10, 20, 35)), (8, (8, 36, 120, 330))])
def test_haar_state_frame_potentials(dimension, values):
    """1/binomial(D + k - 1, k); Scott, J. Phys. A 41, 055308 (2008). Sampled k = 2 within 2 %, k = 4 within 8 %."""
    assert [reference.state(k, dimension) for k in range(1, 5)] == [1 / value for value in values]
    # |<psi|phi>|^2 of Haar states is the squared first amplitude of one of them
    draws = np.random.default_rng(3).exponential(size=(400_000, dimension))
    overlap = draws[:, 0] / draws.sum(axis=1)
    assert_allclose(np.mean(overlap**2), reference.state(2, dimension), rtol=0.02)
    assert_allclose(np.mean(overlap**4), reference.state(4, dimension), rtol=0.08)


CLIFFORD = {  # k = 1 .. 5: Zhu, Kueng, Grassl and Gross, arXiv:1609.08172
    1: (1, 2, 5, 15, 51),
    2: (1, 2, 6, 29, 219),
    3: (1, 2, 6, 30, 269),
    4: (1, 2, 6, 30, 270),
}


@pytest.mark.parametrize("n", CLIFFORD)
def test_clifford_frame_potentials_are_the_published_numbers(n):
    assert tuple(reference.clifford(k, n) for k in range(1, 6)) == CLIFFORD[n]


@pytest.mark.parametrize(("n", "order"), [(1, 24), (2, 11520), (3, 92897280)])
def test_orders_of_the_clifford_groups(n, order):
    assert reference.clifford_order(n) == order


@pytest.mark.parametrize("n", [1, 2])
def test_clifford_frame_potentials_by_enumeration_with_stim(n):
    """Every Clifford of stim: its trace is 0 or 2^(dim ker(S - 1)/2), and the Paulis before it are averaged by hand."""
    moments = np.zeros(5)
    count = 0
    for tableau in stim.Tableau.iter_all(n, unsigned=True):
        x2x, x2z, z2x, z2z, _, _ = tableau.to_numpy()
        s = np.block([[x2x, x2z], [z2x, z2z]]).astype(int)
        kernel = 2 * n - binary_rank((s + np.eye(2 * n, dtype=int)) % 2)
        moments += 2.0 ** (kernel * np.arange(5))
        count += 1
    assert count * 4**n == reference.clifford_order(n)
    assert tuple(moments / count) == CLIFFORD[n]


def test_clifford_frame_potentials_of_one_qubit_from_matrices():
    """24 matrices of stim, traces and all."""
    matrices = [tableau.to_unitary_matrix(endian="big") for tableau in stim.Tableau.iter_all(1)]
    traces = np.abs([np.trace(u) for u in matrices]) ** 2
    assert_allclose([np.mean(traces**k) for k in range(1, 6)], CLIFFORD[1], rtol=1e-6)


def binary_rank(matrix: np.ndarray) -> int:
    matrix, rank = matrix.copy(), 0
    for column in range(matrix.shape[1]):
        rows = np.flatnonzero(matrix[rank:, column])
        if rows.size:
            matrix[[rank, rank + rows[0]]] = matrix[[rank + rows[0], rank]]
            others = [row for row in range(len(matrix)) if row != rank and matrix[row, column]]
            matrix[others] ^= matrix[rank]
            rank += 1
            if rank == len(matrix):
                break
    return rank


@pytest.mark.parametrize(("n", "k"), [(2, 4), (2, 5), (3, 3), (3, 4), pytest.param(2, 6, marks=pytest.mark.slow)])
def test_clifford_frame_potentials_by_orbits(n, k):
    """Burnside: F(k) counts the orbits of (k - 1)-tuples of Paulis, here connected parts under H, S and CNOT."""
    assert orbits(n, k - 1) == reference.clifford(k, n)


def orbits(n: int, length: int) -> int:
    size, vectors = 4**n, np.arange(4**n)
    bit = [(vectors >> j) & 1 for j in range(2 * n)]  # x of qubit j, then z of qubit j
    moves = []
    for a in range(n):
        moves.append(vectors ^ ((bit[a] ^ bit[n + a]) * ((1 << a) | (1 << (n + a)))))  # H exchanges x and z
        moves.append(vectors ^ (bit[a] << (n + a)))  # S adds x to z
        moves += [vectors ^ (bit[a] << b) ^ (bit[n + b] << (n + a)) for b in range(n) if b != a]  # CNOT
    tuples = np.indices((size,) * length).reshape(length, -1)
    index = np.arange(size**length)
    edges = [np.ravel_multi_index(move[tuples], (size,) * length) for move in moves]
    rows, columns = np.tile(index, len(moves)), np.concatenate(edges)
    graph = coo_array((np.ones(len(rows), dtype=np.int8), (rows, columns)), shape=(len(index),) * 2)
    return connected_components(graph, directed=False)[0]


@pytest.mark.parametrize(("n", "k"), [(4, 5), (6, 7), (5, 3)])
def test_clifford_frame_potentials_of_many_qubits_are_a_product(n, k):
    """Product of 2^j + 1 for n >= k - 1; Gross, Nezami and Walter, arXiv:1712.08628."""
    assert reference.clifford(k, n) == np.prod([2**j + 1 for j in range(k - 1)])


def test_spread_of_the_estimator_for_haar_unitaries():
    """2 (F(2k) - F(k)^2)/(N (N - 1)): 0.02222 at d = 8, N = 10, k = 1, 3000 repeats. With i = j kept 411.4 (k = 2)."""
    repeats, n, d = 3000, 10, 8
    u = haar(d)(repeats * n, np.random.default_rng(4)).reshape(repeats, n, d * d)
    kernel = np.abs(u.conj() @ u.swapaxes(1, 2)) ** 2
    off = ~np.eye(n, dtype=bool)
    values = kernel[:, off].mean(axis=1)
    assert_allclose(reference.haar_estimator_variance(1, d, n), 2 / 90, rtol=1e-12)
    assert_allclose(values.var(), 2 / 90, rtol=0.1)
    assert_allclose(values.mean(), 1, atol=4 * np.sqrt(2 / 90 / repeats))
    assert_allclose(kernel.mean(), reference.with_diagonal(1, 1, d, n), atol=0.02)
    assert_allclose(reference.with_diagonal(2, 2, d, n), 411.4, rtol=1e-12)
    assert_allclose(reference.haar_estimator_variance(2, d, 20), 20 * 2 / 380, rtol=1e-12)


@pytest.mark.parametrize(("k", "error"), [(1, 0.1), (2, 0.02), (4, 0.05)])
def test_instances_needed_are_the_fewest(k, error):
    n = reference.instances_needed(k, 256, error)
    aim = (error * reference.unitary(k, 256)) ** 2
    assert reference.haar_estimator_variance(k, 256, n) <= aim < reference.haar_estimator_variance(k, 256, n - 1)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: reference.unitary(41, 8), "k: found 41; allowed: a whole number from 0 to 40 (for dimension 8"),
        (lambda: reference.unitary(-1, 8), "k: found -1; allowed: a whole number, 0 or more"),
        (lambda: reference.clifford(0, 2), "k: found 0; allowed: a whole number from 1 to 60"),
        (lambda: reference.instances_needed(2, 4, 0.0), "relative_error: found 0.0; allowed: a number above 0"),
        (lambda: reference.haar_estimator_variance(1, 4, 1), "instances: found 1; allowed: a whole number, 2 or more"),
    ],
)
def test_impossible_sizes_are_refused_in_words(call, message):
    with pytest.raises(InputError) as error:
        call()
    assert message in str(error.value)

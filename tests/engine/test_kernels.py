"""Every kernel against the numpy reference, for every pair of positions and both precisions."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from engine_cases import haar_unitary
from hypothesis import given, settings
from hypothesis import strategies as st

from rcbench.engine import kernels
from rcbench.engine.lanes import LANES
from rcbench.engine.reference import apply_reference

TOLERANCE = {"float32": 3e-6, "float64": 1e-14}
TURN = np.array([[1, -1], [1, 1]])


def to_block(state: np.ndarray, real: str) -> np.ndarray:
    """Chunks of real parts, then imaginary parts."""
    chunks = state.reshape(-1, LANES[real])
    parts = np.stack([chunks.real, chunks.imag], axis=1).reshape(-1)
    return np.concatenate([parts, np.zeros(8 * LANES[real])]).astype(real)  # the kernels need four chunks to work in


def from_block(block: np.ndarray, real: str) -> np.ndarray:
    parts = block[: -8 * LANES[real]].astype(np.float64).reshape(-1, 2, LANES[real])
    return (parts[:, 0] + 1j * parts[:, 1]).reshape(-1)


def operator(kind: int, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray]:
    """A random operator of a kind and the numbers its kernel takes."""
    phases = np.exp(1j * rng.uniform(0, 7, 4))
    if kind == kernels.ONE:
        matrix = haar_unitary(2, rng)
        given = matrix
    elif kind == kernels.DENSE:
        matrix = given = haar_unitary(4, rng)
    elif kind == kernels.DIAGONAL:
        matrix, given = np.diag(phases), phases
    elif kind == kernels.MIDDLE:
        matrix = np.diag(phases)
        matrix[1:3, 1:3] = haar_unitary(2, rng)
        given = matrix
    else:
        matrix, given = np.diag(phases / 2) @ np.kron(TURN, TURN), phases / 2
    numbers = np.zeros(32)
    flat = np.ascontiguousarray(given, dtype=np.complex128).reshape(-1).view(np.float64)
    numbers[: len(flat)] = flat
    return matrix, numbers


def difference(kind: int, n: int, first: int, second: int, real: str, seed: int) -> float:
    rng = np.random.default_rng(seed)
    state = rng.normal(size=2**n) + 1j * rng.normal(size=2**n)
    state /= np.linalg.norm(state)
    matrix, numbers = operator(kind, rng)
    block = to_block(state, real)
    low = n - 1 - (first if kind == kernels.ONE else second)
    kernels.apply_operator(block, n, kind, n - 1 - first, low, numbers.astype(real))
    qubits = (first,) if kind == kernels.ONE else (first, second)
    return float(np.abs(from_block(block, real) - apply_reference(state[None], matrix, qubits)[0]).max())


@pytest.mark.parametrize("real", ["float32", "float64"])
@pytest.mark.parametrize("kind", range(5))
def test_kernel_equals_reference_for_every_pair_of_seven_qubits(kind, real):
    for first, second in itertools.combinations(range(7), 2):
        assert difference(kind, 7, first, second, real, seed=first * 7 + second) < TOLERANCE[real]


@given(kind=st.integers(0, 4), n=st.integers(4, 10), pair=st.integers(0, 10**6), seed=st.integers(0, 2**32 - 1))
@settings(deadline=None, max_examples=60)
def test_kernel_equals_reference_for_any_size(kind, n, pair, seed):
    pairs = list(itertools.combinations(range(n), 2))
    assert difference(kind, n, *pairs[pair % len(pairs)], "float32", seed) < TOLERANCE["float32"]


def test_middle_kernel_leaves_outer_amplitudes_alone_when_their_factor_is_one():
    n, real = 7, "float64"
    rng = np.random.default_rng(5)
    state = rng.normal(size=2**n) + 1j * rng.normal(size=2**n)
    matrix = np.eye(4, dtype=np.complex128)
    matrix[1:3, 1:3] = haar_unitary(2, rng)
    block = to_block(state, real)
    kernels.apply_operator(block, n, kernels.MIDDLE, 6, 5, matrix.reshape(-1).view(np.float64))
    np.testing.assert_allclose(from_block(block, real), apply_reference(state[None], matrix, (0, 1))[0], atol=1e-14)

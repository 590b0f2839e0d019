"""Sampled circuits with plain numpy, for the tests of the averages: many instances at once, gates from scipy.

States are (instances, q, .., q) arrays, or (instances, q, .., q, anything) for operators; site 0 is the first axis.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from scipy.stats import unitary_group

PAULI = np.array([[[1, 0], [0, 1]], [[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
GateSource = Callable[[int, np.random.Generator], np.ndarray]


def haar(dimension: int) -> GateSource:
    """Haar unitaries from scipy."""
    return lambda count, rng: unitary_group.rvs(dimension, size=count, random_state=rng).reshape(
        count, dimension, dimension
    )


def dressed(gate: np.ndarray) -> GateSource:
    """A fixed two-qubit gate between Haar one-qubit gates."""

    def source(count: int, rng: np.random.Generator) -> np.ndarray:
        u = unitary_group.rvs(2, size=4 * count, random_state=rng).reshape(4, count, 2, 2)
        before, after = (np.einsum("mij,mkl->mikjl", u[i], u[i + 1]).reshape(count, 4, 4) for i in (0, 2))
        return after @ gate @ before

    return source


def wall(n: int, layer: int, *, ring: bool = False) -> list[tuple[int, int]]:
    """Pairs of a layer; layer 1 holds (0, 1). Written out again here, so that the tests do not lean on the package."""
    if layer % 2:
        return [(i, i + 1) for i in range(0, n - 1, 2)]
    return [(i, i + 1) for i in range(1, n - 1, 2)] + ([(n - 1, 0)] if ring else [])


def apply(states: np.ndarray, gates: np.ndarray, sites: Sequence[int]) -> np.ndarray:
    """Gates (instances, d, d) on one or two sites of each instance."""
    axes = [site + 1 for site in sites]
    moved = np.moveaxis(states, axes, range(1, len(axes) + 1))
    shape = moved.shape
    flat = gates @ moved.reshape(shape[0], gates.shape[-1], -1)
    return np.moveaxis(flat.reshape(shape), range(1, len(axes) + 1), axes)


def draw_gates(
    n: int, depth: int, instances: int, rng: np.random.Generator, source: GateSource, *, ring: bool = False
) -> list[tuple[tuple[int, int], np.ndarray]]:
    """All gates of the circuits in order: [(sites, (instances, d, d))]."""
    return [(pair, source(instances, rng)) for layer in range(1, depth + 1) for pair in wall(n, layer, ring=ring)]


def zeros(n: int, instances: int, q: int = 2) -> np.ndarray:
    """|0..0> many times."""
    states = np.zeros((instances,) + (q,) * n, dtype=complex)
    states[(slice(None), *(0,) * n)] = 1
    return states


def run(states: np.ndarray, gates: list) -> np.ndarray:
    for pair, matrices in gates:
        states = apply(states, matrices, pair)
    return states


def run_back(states: np.ndarray, gates: list) -> np.ndarray:
    for pair, matrices in reversed(gates):
        states = apply(states, matrices.conj().swapaxes(1, 2), pair)
    return states


def sampled_states(n, depth, instances, seed, *, q=2, ring=False) -> np.ndarray:
    """(instances, q, .., q) states after Haar brickworks."""
    gates = draw_gates(n, depth, instances, np.random.default_rng(seed), haar(q * q), ring=ring)
    return run(zeros(n, instances, q), gates)


def sampled_unitaries(n, depth, instances, seed, source=None) -> np.ndarray:
    """(instances, D, D) unitaries of brickworks."""
    start = np.tile(np.eye(2**n, dtype=complex), (instances, 1, 1)).reshape((instances,) + (2,) * n + (2**n,))
    gates = draw_gates(n, depth, instances, np.random.default_rng(seed), source or haar(4))
    return run(start, gates).reshape(instances, 2**n, 2**n)


def schmidt(states: np.ndarray, region: Sequence[int]) -> np.ndarray:
    """(instances, region) squared Schmidt coefficients of a region."""
    moved = np.moveaxis(states, [site + 1 for site in region], range(1, len(region) + 1))
    size = int(np.prod(moved.shape[1 : len(region) + 1]))
    return np.linalg.svd(moved.reshape(len(states), size, -1), compute_uv=False) ** 2


def purities(states: np.ndarray, region: Sequence[int]) -> np.ndarray:
    return np.sum(schmidt(states, region) ** 2, axis=1)


def entropies(states: np.ndarray, region: Sequence[int]) -> np.ndarray:
    """Von Neumann, in nats."""
    p = np.clip(schmidt(states, region), 1e-300, None)
    return -np.sum(p * np.log(p), axis=1)


def choi(unitaries: np.ndarray) -> np.ndarray:
    """Choi states: sites 0 to n - 1 are the outputs, n to 2n - 1 the inputs."""
    n = unitaries.shape[-1].bit_length() - 1
    return (unitaries / 2 ** (n / 2)).reshape((-1,) + (2,) * (2 * n))


def pauli_at(letter: int, site: int, n: int) -> np.ndarray:
    return np.kron(np.kron(np.eye(2**site), PAULI[letter]), np.eye(2 ** (n - site - 1)))


def otocs(unitaries: np.ndarray, w: np.ndarray, v: np.ndarray) -> np.ndarray:
    """(instances,) (1/D) tr(U V U^dag W U V U^dag W)."""
    evolved = unitaries @ v @ unitaries.conj().swapaxes(1, 2) @ w
    return np.einsum("mij,mji->m", evolved, evolved).real / len(w)


def assert_mean(samples: np.ndarray, value: float, sigmas: float = 4.0) -> None:
    """The mean is the value within some standard errors."""
    error = samples.std(ddof=1) / np.sqrt(len(samples))
    assert abs(samples.mean() - value) < sigmas * error, (samples.mean(), error, value)

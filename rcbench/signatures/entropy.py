"""Purities and entropies of regions of pure states; entropies in nats.

Every function takes one state or a batch, and a region as a list of qubits; the qubits outside it are traced out. The
smaller of the two sides is worked on, since both have the same spectrum.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.errors import InputError

_CHUNK = 2**24  # amplitudes of a batch brought into matrix form at once


def _as_matrices(states: ComplexArray, region: Sequence[int]) -> ComplexArray:
    """(batch, rows, columns) amplitudes, the smaller side of the cut as rows."""
    states = np.atleast_2d(states)
    n = states.shape[1].bit_length() - 1
    inside = [int(qubit) for qubit in region]
    if len(set(inside)) != len(inside) or not all(0 <= qubit < n for qubit in inside):
        raise InputError("region", tuple(inside), f"different qubits from 0 to {n - 1}")
    outside = [qubit for qubit in range(n) if qubit not in inside]
    small, large = sorted((inside, outside), key=len)
    tensor = states.reshape(-1, *(2,) * n).transpose(0, *(1 + q for q in small), *(1 + q for q in large))
    return tensor.reshape(len(states), 2 ** len(small), 2 ** len(large))


def _reduced(states: ComplexArray, region: Sequence[int]) -> ComplexArray:
    """(batch, d, d) reduced density matrices of the smaller side."""
    matrices = _as_matrices(states, region)
    return matrices @ matrices.conj().transpose(0, 2, 1)


def _over_chunks(states: ComplexArray, region: Sequence[int], value: str) -> FloatArray:
    states = np.atleast_2d(states)
    step = max(1, _CHUNK // states.shape[1])
    parts = []
    for start in range(0, len(states), step):
        if value == "purity":
            rho = _reduced(states[start : start + step], region)
            # tr rho^2 = sum |rho_ij|^2, in double precision since it sums many small squares
            parts.append(np.einsum("bij,bij->b", rho.real, rho.real, dtype=np.float64))
            parts[-1] += np.einsum("bij,bij->b", rho.imag, rho.imag, dtype=np.float64)
        else:
            parts.append(np.linalg.svd(_as_matrices(states[start : start + step], region), compute_uv=False))
    return np.concatenate(parts)


def purity(states: ComplexArray, region: Sequence[int]) -> FloatArray:
    """Purity tr rho^2 of a region's reduced state.

    Args:
        states: (batch, 2**n) or (2**n,) normalised amplitudes, qubit 0 the most significant bit.
        region: different qubits; empty or all of them give 1.
    Returns:
        (batch,) from 1 / d to 1, d the dimension of the smaller side. Haar-random states average
        (d_A + d_B) / (d_A d_B + 1).
    Raises:
        InputError: a qubit twice or outside the state.

    Source: Lubkin, J. Math. Phys. 19, 1028 (1978) (from memory).
    """
    return _over_chunks(states, region, "purity")


def renyi2_entropy(states: ComplexArray, region: Sequence[int]) -> FloatArray:
    """Renyi-2 entropy -ln tr rho^2 of a region, in nats; arguments as `purity`. Returns (batch,)."""
    return np.maximum(-np.log(purity(states, region)), 0.0)


def vonneumann_entropy(states: ComplexArray, region: Sequence[int]) -> FloatArray:
    """Von Neumann entropy -tr rho ln rho of a region, in nats; arguments as `purity`.

    Returns:
        (batch,) from the singular values of the amplitudes, so that small eigenvalues keep their digits. Haar-random
        states average sum_{k=d_B+1}^{d_A d_B} 1/k - (d_A - 1) / (2 d_B) for d_A <= d_B.

    Source: Page, Phys. Rev. Lett. 71, 1291 (1993).
    """
    weights = np.square(_over_chunks(states, region, "singular values"), dtype=np.float64)
    weights /= weights.sum(axis=1, keepdims=True)
    logs = np.log(weights, out=np.zeros_like(weights), where=weights > 0)
    entropy: FloatArray = np.maximum(-(weights * logs).sum(axis=1), 0.0)
    return entropy

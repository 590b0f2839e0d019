"""Two orthogonal inputs through one circuit: spread means no small region tells them apart, kept means the whole does.

On each region the trace distance (the best any measurement of the region can do) and the total variation of its bit
strings (what the computational basis shows). The overlap of the whole states stays 0 in every unitary circuit.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import exp, pi, sqrt

import numpy as np
from scipy.special import betaln

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.errors import InputError
from rcbench.signatures.entropy import disjoint

MOST_REGION_QUBITS = 12  # a reduced state of side 4096


def _pair(states: ComplexArray) -> tuple[ComplexArray, int]:
    if states.ndim != 2 or len(states) != 2 or states.shape[1] & (states.shape[1] - 1):
        raise InputError("states", states.shape, "(2, 2**n) amplitudes of the two branches")
    return states, states.shape[1].bit_length() - 1


def _region_states(states: ComplexArray, region: list[int], n: int) -> ComplexArray:
    """(2, d, D / d) amplitudes of both branches, the region as rows."""
    rest = [qubit for qubit in range(n) if qubit not in region]
    axes = [0, *(1 + q for q in region), *(1 + q for q in rest)]
    return states.reshape(2, *(2,) * n).transpose(axes).reshape(2, 2 ** len(region), -1)


def trace_distance(states: ComplexArray, region: Sequence[int]) -> float:
    """Trace distance of the region's two reduced states, half the sum of |eigenvalues| of their difference.

    Args:
        states: (2, 2**n) both branches, as `evolution.twins` gives them. region: qubits, at most 12 or all.
    Returns:
        From 0, no measurement of the region tells them apart, to 1.
    Raises:
        InputError: a region that is empty, outside or too large.

    Source: Nielsen and Chuang, Quantum Computation and Quantum Information (2000), section 9.2.
    """
    pair, n = _pair(states)
    inside = disjoint(region, n_qubits=n)[0]
    if len(inside) == n:
        return float(np.sqrt(max(0.0, 1 - overlap(states))))
    if len(inside) > MOST_REGION_QUBITS:
        raise InputError("region", f"{len(inside)} qubits", f"at most {MOST_REGION_QUBITS}, or all {n}")
    first, second = _region_states(pair, inside, n)
    if len(inside) <= n // 2 + 1:
        difference = first @ first.conj().T - second @ second.conj().T
        return float(np.abs(np.linalg.eigvalsh(difference.astype(np.complex128))).sum() / 2)
    # rank at most twice the dimension of the rest: the same non-zero eigenvalues from the small side
    joined = np.concatenate([first, second], axis=1).astype(np.complex128)
    signs = np.repeat([1.0, -1.0], first.shape[1])
    values = np.linalg.eigvals((joined.conj().T @ joined) * signs)
    return float(np.abs(values.real).sum() / 2)


def total_variation(states: ComplexArray, region: Sequence[int]) -> float:
    """Total variation distance of the region's bit strings from the two branches: 0 to the trace distance.

    Args, errors: as `trace_distance`, with regions of any size.
    """
    pair, n = _pair(states)
    inside = disjoint(region, n_qubits=n)[0]
    probabilities = np.square(np.abs(_region_states(pair, inside, n)), dtype=np.float64).sum(axis=2)
    return float(np.abs(probabilities[0] - probabilities[1]).sum() / 2)


def overlap(states: ComplexArray) -> float:
    """|<psi|phi>|^2 of the whole states: 0 for orthogonal inputs, at every depth of every circuit."""
    first, second = _pair(states)[0]
    return float(np.abs(np.vdot(first, second)) ** 2)


def marginal_differences(states: ComplexArray) -> FloatArray:
    """(n, 3) difference of <X>, <Y>, <Z> between the two branches at every qubit."""
    pair, n = _pair(states)
    out = np.empty((n, 3))
    for qubit in range(n):
        rows = _region_states(pair, [qubit], n)
        rho = (rows @ rows.conj().transpose(0, 2, 1)).astype(np.complex128)
        change = rho[0] - rho[1]
        out[qubit] = 2 * change[0, 1].real, -2 * change[0, 1].imag, (change[0, 0] - change[1, 1]).real
    return out


def haar_total_variation(n_region: int, n_qubits: int) -> float:
    """Mean total variation of a region's strings between the two branches when they are random orthogonal states.

    A string has probability Beta(m, D - m), m = D / d levels to a string; the mean absolute difference of two such is
    4 B(D, D) / (D B(m, m) B(D - m, D - m)). Orthogonality adds D / (D - 1) to the variance of the difference.

    Args:
        n_region: qubits of the region. n_qubits: of the state.
    Returns:
        1/2 for all qubits; about sqrt((d - 1) / (pi D) d) for small regions.
    Raises:
        InputError: n_qubits below 1 or above 1000, a region outside 1 to n_qubits.

    Source: Gini's mean difference of the beta distribution; Haar probabilities are Dirichlet distributed.
    """
    if not 1 <= n_qubits <= 1000 or not 1 <= n_region <= n_qubits:
        raise InputError("n_region, n_qubits", (n_region, n_qubits), "1 <= n_region <= n_qubits <= 1000")
    whole, strings = 2.0**n_qubits, 2.0**n_region
    m = whole / strings
    if min(m, whole - m) > 1e4:  # both shapes are normal then, and the exact form loses its digits
        mean = 2 * sqrt((1 - 1 / strings) * m / pi) / whole
    else:
        logs = betaln(whole, whole) - betaln(m, m) - betaln(whole - m, whole - m)
        mean = 4 / whole * exp(logs)
    return float(min(1.0, strings / 2 * mean * sqrt(whole / (whole - 1))))

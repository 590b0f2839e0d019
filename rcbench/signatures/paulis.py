"""Paulis on states, and the Pauli coefficients of operators: the one transform that OTOCs and sizes are read from.

Weights are arrays of n axes of length 4, the letters I, X, Y, Z of each qubit, qubit 0 first: |c_P|^2 of
O = sum_P c_P P. They sum to tr(O^dag O) / D, which is 1 for a unitary or an evolved Pauli.
"""

from __future__ import annotations

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.engine import memory
from rcbench.errors import InputError
from rcbench.signatures.evolution import LETTERS, check_pauli

# rows I, X, Y, Z of c = tr(P O) / 2, columns the entries 00, 01, 10, 11 of a one-qubit O
_TO_PAULIS = np.array([[1, 0, 0, 1], [0, 1, 1, 0], [0, 1j, -1j, 0], [1, 0, 0, -1]]) / 2
MATRICES = np.array([[[1, 0], [0, 1]], [[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])


def applied(state: ComplexArray, site: int, pauli: str) -> ComplexArray:
    """A Pauli at one qubit on states (..., D), as a new array.

    Raises:
        InputError: a qubit outside the state, or a letter other than X, Y, Z.
    """
    n = state.shape[-1].bit_length() - 1
    letter = check_pauli(site, pauli, n)
    view = state.reshape(-1, 2**site, 2, 2 ** (n - site - 1))
    out = np.empty_like(view)
    if letter == "Z":
        out[:, :, 0], out[:, :, 1] = view[:, :, 0], -view[:, :, 1]
    elif letter == "X":
        out[:, :, 0], out[:, :, 1] = view[:, :, 1], view[:, :, 0]
    else:
        out[:, :, 0], out[:, :, 1] = -1j * view[:, :, 1], 1j * view[:, :, 0]
    return out.reshape(state.shape)


def pauli_weights(operator: ComplexArray, *, memory_limit: int | None = None) -> FloatArray:
    """Squared Pauli coefficients of an operator.

    Cost: n passes over 4^n numbers; three arrays of that size.

    Args:
        operator: (D, D), D = 2**n. memory_limit: bytes, the free memory where None.
    Returns:
        (4,) * n weights, in the operator's real precision.
    Raises:
        InputError: a matrix of another shape, or too little memory.
    """
    side = len(operator)
    n = side.bit_length() - 1
    if operator.shape != (side, side) or side != 2**n or n < 1:
        raise InputError("operator", operator.shape, "a square matrix of side 2**n")
    memory.require(3 * 4**n * operator.dtype.itemsize, memory_limit, f"the Pauli coefficients of {n} qubits")
    pairs = [axis for qubit in range(n) for axis in (qubit, n + qubit)]
    table = np.ascontiguousarray(operator.reshape((2,) * (2 * n)).transpose(pairs)).reshape(-1)
    transform = _TO_PAULIS.astype(operator.dtype)
    for qubit in range(n):
        table = (transform @ table.reshape(4**qubit, 4, 4 ** (n - qubit - 1))).reshape(-1)
    weights = np.square(table.real) + np.square(table.imag)
    return weights.reshape((4,) * n)


def site_letters(weights: FloatArray) -> FloatArray:
    """(n, 4) share of the weight that has I, X, Y or Z at each qubit, in double precision."""
    n = weights.ndim
    total = weights.sum(dtype=np.float64)
    shares = np.empty((n, 4))
    for qubit in range(n):
        view = weights.reshape(4**qubit, 4, -1)
        shares[qubit] = view.sum(axis=(0, 2), dtype=np.float64) / total
    return shares


def letter_index(pauli: str) -> int:
    """Place of a letter in the axes of the weights: X 1, Y 2, Z 3."""
    return 1 + LETTERS.index(pauli)

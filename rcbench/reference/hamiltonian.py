"""Spin models by exact diagonalisation, to 12 qubits: what Trotter circuits tend to as their step gets shorter.

H = sum over couplers of (xx XX + yy YY + zz ZZ) + sum over qubits of (x_j X_j + z_j Z_j), Pauli operators, not spins.
All its matrix elements are real. Time is in units of 1 over the unit of these numbers. Thermal values are in
`signatures.thermal`.

Source: elementary.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.errors import InputError
from rcbench.reference.sizes import whole

MOST_QUBITS = 12  # 4096 states: 128 MiB for H and as much for its eigenvectors


def hamiltonian(
    n_qubits: int,
    couplers: Sequence[tuple[int, int]],
    *,
    xx: float = 0.0,
    yy: float = 0.0,
    zz: float = 0.0,
    x: FloatArray | float = 0.0,
    z: FloatArray | float = 0.0,
) -> FloatArray:
    """(2**n, 2**n) the matrix H, real and symmetric, qubit 0 the most significant bit.

    Args:
        n_qubits: n, 1 to 12. couplers: pairs of different qubits. xx, yy, zz: of every coupler.
        x, z: fields, (n,) or one number for all.
    Raises:
        InputError: values outside these, or fields of another length.
    """
    n = whole("n_qubits", n_qubits, 1, MOST_QUBITS)
    states = np.arange(2**n)
    sign = 1 - 2 * ((states[:, None] >> np.arange(n - 1, -1, -1)) & 1)  # (2**n, n)
    along = {key: _field(key, values, n) for key, values in (("x", x), ("z", z))}
    out = np.zeros((2**n, 2**n))
    diagonal = sign @ along["z"]
    for a, b in couplers:
        if a == b or not (0 <= a < n and 0 <= b < n):
            raise InputError("couplers", (a, b), f"pairs of different qubits, 0 to {n - 1}")
        both = sign[:, a] * sign[:, b]
        diagonal = diagonal + zz * both
        # YY turns |00> into -|11>, |01> into |10>
        out[states ^ (1 << (n - 1 - a)) ^ (1 << (n - 1 - b)), states] += xx - yy * both
    for site, field in enumerate(along["x"].tolist()):
        out[states ^ (1 << (n - 1 - site)), states] += field
    out[states, states] += diagonal
    return out


def _field(key: str, values: FloatArray | float, n: int) -> FloatArray:
    """One field a qubit."""
    array = np.asarray(values, dtype=np.float64)
    if array.shape not in ((), (n,)):
        raise InputError(key, array.shape, f"one number, or {n} of them")
    return np.broadcast_to(array, (n,))


@dataclass(frozen=True, slots=True)
class Spectrum:
    """H diagonalised. energies: (D,) rising; vectors: (D, D) real, an eigenstate a column."""

    energies: FloatArray
    vectors: FloatArray

    def evolved(self, states: ComplexArray, times: Sequence[float]) -> ComplexArray:
        """(times, D) exp(-i H t) applied to a state, (D,), at each time."""
        parts = self.vectors.T @ states
        phases = np.exp(-1j * np.outer(np.asarray(times, dtype=np.float64), self.energies))
        return np.asarray((phases * parts) @ self.vectors.T)

    def energy(self, state: ComplexArray) -> float:
        """Mean energy of a state, (D,)."""
        return float(np.abs(self.vectors.T @ state) ** 2 @ self.energies)


def diagonalise(matrix: FloatArray) -> Spectrum:
    """The spectrum of H from `hamiltonian`. Cost: 8 times as much a qubit; 12 qubits take about a minute.

    Raises:
        InputError: a matrix that is not symmetric.
    """
    from scipy.linalg import eigh

    if matrix.ndim != 2 or matrix.shape[0] != matrix.shape[1] or not np.array_equal(matrix, matrix.T):
        raise InputError("matrix", matrix.shape, "a real symmetric matrix")
    energies, vectors = eigh(matrix)
    return Spectrum(energies, vectors)

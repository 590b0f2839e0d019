"""The gate kinds that a circuit's rows may hold: one table, asked by every other part.

A two-qubit matrix is written in the order |00>, |01>, |10>, |11> with the row's first qubit as the first
(most significant) bit. Angles are in radians.

    rz(t)       exp(-i t Z / 2)
    r(t, p)     exp(-i t (cos p X + sin p Y) / 2), a rotation about an equatorial axis
    u(t, p, l)  the general one-qubit gate of OpenQASM: rows cos t/2, -e^{il} sin t/2 and
                e^{ip} sin t/2, e^{i(p+l)} cos t/2
    iswap       |01> <-> |10> with a factor i; sqrt_iswap is its principal root
    fsim(t, p)  |01> and |10> mixed by cos t and -i sin t, |11> multiplied by e^{-ip}
    zz(t)       exp(-i t ZZ / 2)
    matrix1, matrix2   any unitary, row by row, each entry as real and imaginary part (imported gates only)
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray

Structure = Literal["none", "dense", "diagonal", "swap-like"]


@dataclass(frozen=True, slots=True)
class GateKind:
    """One kind of row.

    matrices: (m, n_parameters) angles to (m, d, d) unitaries. virtual: takes no time and has no error.
    """

    name: str
    n_qubits: int
    n_parameters: int
    structure: Structure
    matrices: Callable[[FloatArray], ComplexArray] | None
    virtual: bool = False


def _fixed(rows: list[list[complex]]) -> Callable[[FloatArray], ComplexArray]:
    matrix = np.array(rows, dtype=np.complex128)

    def matrices(parameters: FloatArray) -> ComplexArray:
        return np.broadcast_to(matrix, (len(parameters), *matrix.shape)).copy()

    return matrices


def _rz(parameters: FloatArray) -> ComplexArray:
    half = parameters[:, 0] / 2
    out = np.zeros((len(half), 2, 2), dtype=np.complex128)
    out[:, 0, 0], out[:, 1, 1] = np.exp(-1j * half), np.exp(1j * half)
    return out


def _r(parameters: FloatArray) -> ComplexArray:
    half, phase = parameters[:, 0] / 2, parameters[:, 1]
    out = np.empty((len(half), 2, 2), dtype=np.complex128)
    out[:, 0, 0] = out[:, 1, 1] = np.cos(half)
    out[:, 0, 1] = -1j * np.exp(-1j * phase) * np.sin(half)
    out[:, 1, 0] = -1j * np.exp(1j * phase) * np.sin(half)
    return out


def _u(parameters: FloatArray) -> ComplexArray:
    half, phi, lam = parameters[:, 0] / 2, parameters[:, 1], parameters[:, 2]
    out = np.empty((len(half), 2, 2), dtype=np.complex128)
    out[:, 0, 0] = np.cos(half)
    out[:, 0, 1] = -np.exp(1j * lam) * np.sin(half)
    out[:, 1, 0] = np.exp(1j * phi) * np.sin(half)
    out[:, 1, 1] = np.exp(1j * (phi + lam)) * np.cos(half)
    return out


def _fsim(parameters: FloatArray) -> ComplexArray:
    theta, phi = parameters[:, 0], parameters[:, 1]
    out = np.zeros((len(theta), 4, 4), dtype=np.complex128)
    out[:, 0, 0] = 1
    out[:, 1, 1] = out[:, 2, 2] = np.cos(theta)
    out[:, 1, 2] = out[:, 2, 1] = -1j * np.sin(theta)
    out[:, 3, 3] = np.exp(-1j * phi)
    return out


def _zz(parameters: FloatArray) -> ComplexArray:
    half = parameters[:, 0] / 2
    out = np.zeros((len(half), 4, 4), dtype=np.complex128)
    out[:, 0, 0] = out[:, 3, 3] = np.exp(-1j * half)
    out[:, 1, 1] = out[:, 2, 2] = np.exp(1j * half)
    return out


def _stored(side: int) -> Callable[[FloatArray], ComplexArray]:
    def matrices(parameters: FloatArray) -> ComplexArray:
        pairs = parameters.reshape(-1, side, side, 2)
        return pairs[..., 0] + 1j * pairs[..., 1]

    return matrices


_I = 1j
_H = 0.5**0.5
KINDS: tuple[GateKind, ...] = (
    GateKind("barrier", 0, 0, "none", None, virtual=True),  # acts on all qubits; both qubit columns are -1
    GateKind("measure", 1, 0, "none", None),  # second qubit column: the classical bit
    GateKind("reset", 1, 0, "none", None),
    GateKind("x", 1, 0, "dense", _fixed([[0, 1], [1, 0]])),
    GateKind("y", 1, 0, "dense", _fixed([[0, -_I], [_I, 0]])),
    GateKind("z", 1, 0, "diagonal", _fixed([[1, 0], [0, -1]]), virtual=True),
    GateKind("h", 1, 0, "dense", _fixed([[_H, _H], [_H, -_H]])),
    GateKind("s", 1, 0, "diagonal", _fixed([[1, 0], [0, _I]]), virtual=True),
    GateKind("sdg", 1, 0, "diagonal", _fixed([[1, 0], [0, -_I]]), virtual=True),
    GateKind("sx", 1, 0, "dense", _fixed([[0.5 + 0.5j, 0.5 - 0.5j], [0.5 - 0.5j, 0.5 + 0.5j]])),
    GateKind("sxdg", 1, 0, "dense", _fixed([[0.5 - 0.5j, 0.5 + 0.5j], [0.5 + 0.5j, 0.5 - 0.5j]])),
    GateKind("rz", 1, 1, "diagonal", _rz, virtual=True),
    GateKind("r", 1, 2, "dense", _r),
    GateKind("u", 1, 3, "dense", _u),
    GateKind("matrix1", 1, 8, "dense", _stored(2)),
    GateKind("cz", 2, 0, "diagonal", _fixed([[1, 0, 0, 0], [0, 1, 0, 0], [0, 0, 1, 0], [0, 0, 0, -1]])),
    GateKind("cx", 2, 0, "dense", _fixed([[1, 0, 0, 0], [0, 1, 0, 0], [0, 0, 0, 1], [0, 0, 1, 0]])),
    GateKind("iswap", 2, 0, "swap-like", _fixed([[1, 0, 0, 0], [0, 0, _I, 0], [0, _I, 0, 0], [0, 0, 0, 1]])),
    GateKind(
        "sqrt_iswap", 2, 0, "swap-like", _fixed([[1, 0, 0, 0], [0, _H, _H * _I, 0], [0, _H * _I, _H, 0], [0, 0, 0, 1]])
    ),
    GateKind("fsim", 2, 2, "swap-like", _fsim),
    GateKind("zz", 2, 1, "diagonal", _zz),
    GateKind("matrix2", 2, 32, "dense", _stored(4)),
)
CODE: dict[str, int] = {kind.name: code for code, kind in enumerate(KINDS)}
N_QUBITS = np.array([kind.n_qubits for kind in KINDS])
N_PARAMETERS = np.array([kind.n_parameters for kind in KINDS])
VIRTUAL = np.array([kind.virtual for kind in KINDS])
UNITARY = np.array([kind.matrices is not None for kind in KINDS])


def gate_matrix(name: str, *parameters: float) -> ComplexArray:
    """(d, d) matrix of one gate by name, complex128."""
    matrices = KINDS[CODE[name]].matrices
    if matrices is None:
        raise KeyError(f"{name} has no matrix")
    return np.asarray(matrices(np.array([parameters], dtype=np.float64).reshape(1, -1))[0])


def gate_matrices(name: str, parameters: FloatArray) -> ComplexArray:
    """(..., d, d) matrices of gates of one kind from their (..., n_parameters) angles, complex128."""
    matrices = KINDS[CODE[name]].matrices
    if matrices is None:
        raise KeyError(f"{name} has no matrix")
    out = matrices(parameters.reshape(-1, parameters.shape[-1]))
    return out.reshape(*parameters.shape[:-1], *out.shape[1:])

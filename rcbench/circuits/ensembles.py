"""Random gates: Haar unitaries, and one-qubit layers by name.

    haar            uniform over the unitary group
    quarter-turns   pi/2 about X, Y or (X + Y)/sqrt(2); no axis twice running on a qubit
    azimuth         pi/2 about an axis anywhere on the equator
    clifford        uniform over the 24 one-qubit Cliffords

`quarter-turns` and `clifford` are discrete: raw random words are mapped to numbers of a table, so that the same draw
gives the same circuit on every machine. All gates hold up to a global phase.
"""

from __future__ import annotations

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.circuits.cliffords import CLIFFORD1
from rcbench.errors import InputError, suggest
from rcbench.randomness import Draw

LAYERS = ("haar", "quarter-turns", "azimuth", "clifford")


def haar_unitaries(draw: Draw, count: int, dimension: int) -> ComplexArray:
    """(count, dimension, dimension) unitaries from the Haar measure, complex128.

    The Q of a QR decomposition of complex normal matrices, each column multiplied by the phase of R's diagonal: without
    that, Q depends on the conventions of the linear algebra library and is not Haar distributed.

    Source: Mezzadri, Notices Am. Math. Soc. 54, 592 (2007), arXiv:math-ph/0609050.
    """
    parts = draw.normal(2 * count * dimension * dimension).reshape(count, dimension, dimension, 2)
    q, r = np.linalg.qr(parts[..., 0] + 1j * parts[..., 1])
    diagonal = np.einsum("mii->mi", r)
    return np.asarray(q * (diagonal / np.abs(diagonal))[:, None, :], dtype=np.complex128)


def one_qubit_layer(
    name: str, n_qubits: int, draw: Draw, previous: IntArray | None = None
) -> tuple[ComplexArray, IntArray]:
    """One layer of random one-qubit gates, one a qubit.

    Args:
        name: one of LAYERS.
        n_qubits: number of qubits, n.
        draw: random words; layer after layer from one draw.
        previous: (n,) the choice of the layer before, which `quarter-turns` does not repeat.
    Returns:
        (n, 2, 2) unitaries, and (n,) which gate of the table each one is; -1 for continuous gates.
    Raises:
        InputError: an unknown name.
    """
    if name == "haar":
        return haar_unitaries(draw, n_qubits, 2), np.full(n_qubits, -1)
    if name == "azimuth":
        return _half_pi_about(2 * np.pi * draw.uniform(n_qubits)), np.full(n_qubits, -1)
    if name == "clifford":
        choice = draw.integers(len(CLIFFORD1), n_qubits)
        return CLIFFORD1[choice], choice
    if name == "quarter-turns":
        choice = draw.integers(3, n_qubits) if previous is None else (previous + 1 + draw.integers(2, n_qubits)) % 3
        return QUARTER_TURNS[choice], choice
    raise InputError("one_qubit", name, suggest(name, LAYERS))


def _half_pi_about(phi: FloatArray) -> ComplexArray:
    """(n, 2, 2) turns by pi/2 about the equatorial axes at (n,) angles phi from X."""
    out = np.empty((len(phi), 2, 2), dtype=np.complex128)
    out[:, 0, 0] = out[:, 1, 1] = np.sqrt(0.5)
    out[:, 0, 1], out[:, 1, 0] = -1j * np.sqrt(0.5) * np.exp(-1j * phi), -1j * np.sqrt(0.5) * np.exp(1j * phi)
    return out


QUARTER_TURNS = _half_pi_about(np.array([0, np.pi / 2, np.pi / 4]))
QUARTER_TURNS.flags.writeable = False

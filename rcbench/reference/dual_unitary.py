"""Dual-unitary brickworks: unitary in space as in time, so that correlations live on the light rays only.

Gates (u1 x u2) V(J) (v1 x v2) with V(J) = exp(-i (pi/4 XX + pi/4 YY + J ZZ)) and any one-qubit gates; J = pi/4 is
SWAP, J = 0 the class of iSWAP. Averages are over independent random one-qubit gates; the two-point functions and the
speed hold for every instance.

Source: Bertini, Kos and Prosen, Phys. Rev. Lett. 123, 210601 (2019), arXiv:1904.02140; Claeys and Lamacraft, Phys. Rev.
Research 2, 033032 (2020), arXiv:2003.01133.
"""

from __future__ import annotations

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.errors import InputError
from rcbench.reference.brickwork import strings
from rcbench.reference.sizes import whole

BUTTERFLY_VELOCITY = 1.0  # sites a layer, the speed of the light cone
EDGE_OTOC = -1 / 3  # mean OTOC at the edge of the light cone, at every depth


def interaction(j: float) -> ComplexArray:
    """(4, 4) V(J) = exp(-i (pi/4 XX + pi/4 YY + J ZZ)); J in radians.

    Source: see the module.
    """
    same, other = np.exp(-1j * j), -1j * np.exp(1j * j)
    return np.array([[same, 0, 0, 0], [0, 0, other, 0], [0, other, 0, 0], [0, 0, 0, same]])


def departure(gates: ComplexArray) -> FloatArray:
    """Distance of two-qubit gates from dual unitarity: largest element of |G G^dag - 1|, G the gate regrouped in space.

    Args:
        gates: (..., 4, 4), first qubit the more significant.
    Returns:
        (...) 0 for dual-unitary gates.
    Raises:
        InputError: another shape.

    Source: see the module.
    """
    gates = np.asarray(gates)
    if gates.shape[-2:] != (4, 4):
        raise InputError("gates", gates.shape, "matrices of 4 x 4 on the last two axes")
    split = gates.reshape(*gates.shape[:-2], 2, 2, 2, 2)
    regrouped = np.moveaxis(split, -2, -3).reshape(gates.shape)  # (out a, in c; out b, in d)
    product = regrouped @ np.conj(np.swapaxes(regrouped, -1, -2))
    return np.asarray(np.abs(product - np.eye(4)).max(axis=(-1, -2)))


def occupation_rule(j: float) -> FloatArray:
    """(4, 4) chain [before, after] on occupations 00, 01, 10, 11 of V(J) between random one-qubit gates.

    One Pauli on the left leg moves to the right one with (1 + 2 sin^2 2J)/3 and grows to both with (2/3) cos^2 2J; it
    never stays.

    Source: see the module.
    """
    move = (1 + 2 * np.sin(2 * j) ** 2) / 3
    grow = 1 - move
    return np.array([[1, 0, 0, 0], [0, 0, move, grow], [0, move, 0, grow], [0, grow / 3, grow / 3, 1 - 2 * grow / 3]])


def otoc_map(n_qubits: int, site: int, depth: int, *, j: float, order: str = "forward") -> FloatArray:
    """(depth + 1, n) averaged OTOC after 0 to `depth` layers of V(J) between random one-qubit gates.

    At the edge that the operator is carried to it is -1/3 at every depth. Cost: n 2^n a layer, depth^2 of these.

    Args:
        n_qubits: open line, 2 to 22. site: 0 to n_qubits - 1. depth: layers. j: J in radians. order: "forward" or
        "backward".
    Raises:
        InputError: values outside these.

    Source: the chain of `brickwork.strings` with this gate.
    """
    rule, last = occupation_rule(j), whole("depth", depth, 0)
    chains = (strings.string_distribution(n_qubits, site, each, order=order, rule=rule) for each in range(last + 1))
    return np.array([strings.otoc(chain) for chain in chains])

"""Charge-conserving Haar brickwork, U(1): a random phase on charge 0, U(2) on charge 1, a phase on charge 2.

Charge cannot scramble: it diffuses, and the late OTOC of charges keeps a value of the order of 1/n.

Source: Khemani, Vishwanath and Huse, PRX 8, 031057 (2018), arXiv:1710.09835; Rakovszky, Pollmann and von Keyserlingk,
PRX 8, 031058 (2018), arXiv:1710.09827.
"""

from __future__ import annotations

from fractions import Fraction
from math import comb, fsum, pi, sqrt

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.reference.brickwork.layers import layer_pairs
from rcbench.reference.sizes import whole

CHARGE_VARIANCE = 1.0  # sites^2 a layer of the charge's random walk; the diffusion constant is half of it


def charge_correlator(n_qubits: int, site: int, depth: int) -> FloatArray:
    """(depth + 1, n) averaged (1/D) tr(Z_x(t) Z_site) after 0 to `depth` layers: a random walk of the charge.

    Every gate gives both its sites the mean of their two values. Tends to 1/n everywhere. Cost: n a layer.

    Args:
        n_qubits: open line, 2 or more. site: 0 to n_qubits - 1. depth: layers, 0 or more.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    n = whole("n_qubits", n_qubits, 2)
    table = np.zeros((whole("depth", depth, 0) + 1, n))
    table[0, whole("site", site, 0, n - 1)] = 1
    for layer in range(1, depth + 1):
        table[layer] = table[layer - 1]
        pairs = np.array(layer_pairs(n, layer), dtype=np.int64).reshape(-1, 2)
        table[layer, pairs] = table[layer - 1, pairs].mean(axis=1, keepdims=True)
    return table


def charge_return(depth: int) -> float:
    """Large-depth value of the charge correlator at its own site in an endless line: 1/sqrt(2 pi depth).

    Raises:
        InputError: depth below 1.

    Source: central limit of the walk.
    """
    return 1 / sqrt(2 * pi * whole("depth", depth, 1))


def late_otoc_of_charges(n_qubits: int) -> float:
    """Late-time mean of (1/D) tr(Z_x(t) Z_y Z_x(t) Z_y), x and y different: Haar-random in every charge sector.

    Tends to 2/n, against -1/(4^n - 1) without the charge.

    Args:
        n_qubits: 2 to 1000.
    Raises:
        InputError: n_qubits outside these.

    Source: the Haar formula of `haar.otoc_of` in each sector; re-derived.
    """
    n = whole("n_qubits", n_qubits, 2, 1000)
    # Z_x has the same traces for every x: so the formula for W = V
    return fsum(float(_sector(comb(n, m), comb(n - 1, m) - (comb(n - 1, m - 1) if m else 0), n)) for m in range(n + 1))


def _sector(d: int, trace: int, n: int) -> Fraction:
    """Haar mean of tr(W V W V) / 2^n in a sector of dimension d for W, V of this trace and of square 1."""
    if d == 1:
        return Fraction(1, 2**n)
    square = trace * trace
    return Fraction(2 * square * d * d - d * d - square * square, d * (d * d - 1) * 2**n)


def sector_dimension(n_qubits: int, charge: int) -> int:
    """Number of basis states with `charge` ones: binomial(n, charge).

    Raises:
        InputError: n_qubits below 1, charge outside 0 to n_qubits.

    Source: elementary.
    """
    n = whole("n_qubits", n_qubits, 1)
    return comb(n, whole("charge", charge, 0, n))

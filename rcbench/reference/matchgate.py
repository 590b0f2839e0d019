"""Matchgate (free-fermion) brickwork: operators spread, but never scramble.

By Jordan and Wigner along the line, site j carries two Majorana operators; a circuit turns the 2n of them by an SO(2n)
matrix, so a product of w of them stays a product of w. Operators are named by letter and site: X_j and Y_j are
products of 2j + 1 Majoranas, Z_j of two.

Source: Dias, Haque, Ribeiro and McClarty, arXiv:2102.09846, for the diffusive spreading; the averages are re-derived.
"""

from __future__ import annotations

from fractions import Fraction
from math import comb

from rcbench.arrays import FloatArray
from rcbench.reference.conserving import charge_correlator
from rcbench.reference.sizes import one_of, whole


def majorana_count(pauli: str, site: int) -> int:
    """Number of Majorana operators in a Pauli at one site: 2 for Z, 2 site + 1 for X and Y.

    Raises:
        InputError: a letter other than X, Y, Z, or a site below 0.

    Source: Jordan and Wigner, 1928.
    """
    site = whole("site", site, 0)
    return 2 if one_of("pauli", pauli, "XYZ") == "Z" else 2 * site + 1


def late_otoc(n_qubits: int, w: tuple[str, int], v: tuple[str, int]) -> float:
    """Mean of (1/D) tr(W(t) V W(t) V) over Haar-random SO(2n), the late value of deep matchgate circuits.

    W(t) is spread evenly over the products of as many Majoranas as W has; each commutes or anticommutes with V by
    how many they share. X_0 with X_(n-1): 1 - 1/n; Z_0 with Z_(n-1): 1 - 8 (n - 1)/(n (2n - 1)).

    Args:
        n_qubits: 1 to 500. w, v: letter X, Y or Z, and site from 0 to n_qubits - 1.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    n = whole("n_qubits", n_qubits, 1, 500)
    a, b = (majorana_count(pauli, whole(key, site, 0, n - 1)) for key, (pauli, site) in (("w site", w), ("v site", v)))
    signs = sum((-1) ** (a * b - shared) * comb(b, shared) * comb(2 * n - b, a - shared) for shared in range(a + 1))
    return float(Fraction(signs, comb(2 * n, a)))


def edge_otoc_map(n_qubits: int, depth: int) -> FloatArray:
    """(depth + 1, n) averaged OTOC of X_0 with Z at each site, after 0 to `depth` layers of Haar SO(4) gates, forward.

    X_0 is one Majorana and stays one; each gate spreads it evenly over its two sites. A random walk: 1 - 2 P(site).

    Args:
        n_qubits: open line, 2 or more. depth: layers, 0 or more.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    return 1 - 2 * charge_correlator(n_qubits, 0, depth)

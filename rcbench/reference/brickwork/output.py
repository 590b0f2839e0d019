"""Output distribution of the Haar brickwork: averaged collision probability and linear cross-entropy.

Source of all: Dalzell, Hunter-Jones and Brandao, PRX Quantum 3, 010333 (2022), arXiv:2011.12277; Barak, Chou and Gao,
arXiv:2005.02421.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import log

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.errors import InputError
from rcbench.reference.brickwork.labels import MOST_SITES, noise_rule, product_state, same_on_all, totals
from rcbench.reference.brickwork.layers import all_layers, check_sequence
from rcbench.reference.sizes import whole


def scaled_collisions(
    n_qubits: int, depth: int, *, q: int = 2, ring: bool = False, noise: float | Sequence[float] = 0.0
) -> FloatArray:
    """(depth + 1,) averaged D sum_x p(x) p'(x) after 0 to `depth` layers, p' from a noisy copy if noise is asked.

    Depth 0 is a layer of random one-qubit gates, (2q/(q + 1))^n. Cost: 2^(n/2) times n a layer (32 sites, 20 layers:
    about a second).

    Args:
        n_qubits: 2 to 32. depth: layers, 0 or more. q: local dimension. ring: closed line of even length.
        noise: p of rho -> (1 - p) rho + p 1/q on both sites after every gate; one number, or one a layer.
    Raises:
        InputError: values outside these.

    Source: see the module; noise as in Dalzell, Hunter-Jones and Brandao, arXiv:2111.14907.
    """
    q, layers = whole("q", q, 2), all_layers(n_qubits, depth, ring=ring, most=MOST_SITES)
    rules = [noise_rule(1 - p, q) for p in check_sequence("noise", noise, depth)]
    # each of q outcomes a site has overlap 1 with both labels; q once more a site for the factor D
    return totals(product_state(n_qubits, q), same_on_all(n_qubits, q * q, q * q), layers, q, rules)


def collision_probability(n_qubits: int, depth: int, *, q: int = 2, ring: bool = False) -> FloatArray:
    """(depth + 1,) averaged sum_x p(x)^2 after 0 to `depth` layers; tends to 2/(D + 1).

    Args, errors, cost: as `scaled_collisions`.

    Source: see the module.
    """
    return scaled_collisions(n_qubits, depth, q=q, ring=ring) / float(q) ** n_qubits


def linear_xeb(
    n_qubits: int, depth: int, *, q: int = 2, ring: bool = False, noise: float | Sequence[float] = 0.0
) -> FloatArray:
    """(depth + 1,) averaged linear cross-entropy, ideal or of a noisy device; the ideal one tends to (D - 1)/(D + 1).

    Args, errors, cost: as `scaled_collisions`.

    Source: see the module; noise as in Dalzell, Hunter-Jones and Brandao, arXiv:2111.14907.
    """
    return scaled_collisions(n_qubits, depth, q=q, ring=ring, noise=noise) - 1


def anticoncentration_depth(n_qubits: int, *, over_haar: float = 2.0, ring: bool = False, most: int = 200) -> float:
    """Depth at which the averaged collision probability falls to `over_haar` times its Haar value.

    Between whole layers ln of the ratio is taken as a straight line. Grows as n ln n gates, with a large negative
    offset.

    Args:
        n_qubits: 2 to 32. over_haar: above 1. ring: closed line of even length. most: layers tried.
    Raises:
        InputError: values outside these, or a ratio that `most` layers do not reach.

    Source: see the module.
    """
    if not over_haar > 1:
        raise InputError("over_haar", over_haar, "a number above 1")
    d = 2.0 ** whole("n_qubits", n_qubits, 2, MOST_SITES)
    depth = 8
    while True:
        ratio = scaled_collisions(n_qubits, min(depth, most), ring=ring) * (d + 1) / (2 * d)
        below = np.flatnonzero(ratio <= over_haar)
        if below.size:
            break
        if depth >= most:
            raise InputError("over_haar", over_haar, f"above {ratio[-1]:.6g}, which {most} layers reach")
        depth *= 2
    last = int(below[0])
    if last == 0:
        return 0.0
    before, after = np.log(ratio[last - 1 : last + 1])
    return last - 1 + float((before - log(over_haar)) / (before - after))

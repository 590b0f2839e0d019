"""Purity of regions after a Haar brickwork on a product state, averaged over circuits; and how fast it falls.

`cut_purity` (one cut, to thousands of sites), `region_purity` (any contiguous region, to 2000), `subset_purity` (all
subsets, to 20, rings too) and `pattern_purity` (one subset, to 32, with noise) agree where they overlap. -ln of these
is the annealed Renyi-2 entropy, in nats; the mean of -ln purity is a little more, the von Neumann entropy clearly
more.

Source of all: Nahum, Vijay and Haah, PRX 8, 021014 (2018), arXiv:1705.08975; Zhou and Nahum, PRB 99, 174205 (2019),
arXiv:1804.09737; Nahum, Ruhman, Vijay and Haah, PRX 7, 031016 (2017), arXiv:1608.06950.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import cos, log, pi

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.reference.brickwork.labels import MOST_SITES, noise_rule, product_state, same_on_all, totals
from rcbench.reference.brickwork.layers import all_layers, check_sequence, split_rate
from rcbench.reference.sizes import qubits_of, whole


def cut_purity(n_qubits: int, depth: int, *, q: int = 2) -> FloatArray:
    """(depth + 1, n + 1) averaged purity of the sites left of each cut, after 0 to `depth` layers.

    A layer that straddles cut x replaces P(x) by q/(q^2 + 1) (P(x - 1) + P(x + 1)). Cost: n a layer.

    Args:
        n_qubits: length of the open line, 2 or more. depth: layers, 0 or more. q: local dimension.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    n, rate = whole("n_qubits", n_qubits, 2), split_rate(q)
    table = np.ones((whole("depth", depth, 0) + 1, n + 1))
    for layer in range(1, depth + 1):
        table[layer] = table[layer - 1]
        cuts = np.arange(2 - layer % 2, n, 2)
        table[layer, cuts] = rate * (table[layer - 1, cuts - 1] + table[layer - 1, cuts + 1])
    return table


def region_purity(n_qubits: int, depth: int, *, q: int = 2) -> FloatArray:
    """(n + 1, n + 1) averaged purity [x, y] of the sites x to y - 1 after `depth` layers; symmetric.

    Cost: n^2 a layer (1000 sites, 60 layers: about a second).

    Args:
        n_qubits: length of the open line, 2 to 2000. depth: layers, 0 or more. q: local dimension.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    n, rate = whole("n_qubits", n_qubits, 2, 2000), split_rate(q)
    table = np.ones((n + 1, n + 1))
    for layer in range(1, whole("depth", depth, 0) + 1):
        start = 2 - layer % 2
        moved, below, above = slice(start, n, 2), slice(start - 1, n - 1, 2), slice(start + 1, n + 1, 2)
        np.add(table[below], table[above], out=table[moved])
        np.add(table[:, below], table[:, above], out=table[:, moved])
        table[moved] *= rate
        table[:, moved] *= rate
        np.fill_diagonal(table, 1.0)  # no sites, and both moves of a cut pair that met
    return table


def subset_purity(n_qubits: int, depth: int, *, q: int = 2, ring: bool = False) -> FloatArray:
    """(2^n,) averaged purity of every subset after `depth` layers; site 0 is the most significant bit.

    Cost: n 2^n a layer (20 sites: 8 MB).

    Args:
        n_qubits: 2 to 22. depth: layers, 0 or more. q: local dimension. ring: closed line of even length.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    layers = all_layers(n_qubits, depth, ring=ring, most=22)
    values = np.ones((2,) * n_qubits)
    for pairs in layers:
        for pair in pairs:
            view = np.moveaxis(values, pair, (0, 1))
            view[0, 1] = view[1, 0] = split_rate(q) * (view[0, 0] + view[1, 1])
    return values.reshape(-1)


def pattern_purity(
    n_qubits: int,
    region: Sequence[int],
    depth: int,
    *,
    q: int = 2,
    ring: bool = False,
    noise: float | Sequence[float] = 0.0,
) -> FloatArray:
    """(depth + 1,) averaged purity of one set of sites after 0 to `depth` layers, with depolarising noise if asked.

    Cost: 2^(n/2) times n a layer (32 sites, 20 layers: about a second).

    Args:
        n_qubits: 2 to 32. region: different sites, any. depth: layers, 0 or more. q: local dimension.
        ring: closed line of even length. noise: p of rho -> (1 - p) rho + p 1/q on both sites after every gate; one
        number, or one a layer.
    Raises:
        InputError: values outside these.

    Source: see the module; noise as in Dalzell, Hunter-Jones and Brandao, arXiv:2111.14907.
    """
    q, layers = whole("q", q, 2), all_layers(n_qubits, depth, ring=ring, most=MOST_SITES)
    end = same_on_all(n_qubits, q * q, q)
    end[list(qubits_of("region", region, n_qubits))] = q, q * q
    rules = [noise_rule((1 - p) ** 2, q) for p in check_sequence("noise", noise, depth)]
    return totals(product_state(n_qubits, q), end, layers, q, rules)


def entanglement_rate(q: int = 2) -> float:
    """Growth of the annealed Renyi-2 entropy of one bulk cut, in nats a layer: ln((q^2 + 1)/(2q)).

    ln(5/4) = 0.2231 nats or 0.3219 bits for qubits. An even cut grows in steps of two layers.

    Raises:
        InputError: q below 2.

    Source: see the module.
    """
    return -log(2 * split_rate(q))


def relaxation_factor(n_qubits: int, q: int = 2) -> float:
    """Factor a layer by which averaged purities and collision probabilities approach their Haar values, open line.

    2q/(q^2 + 1) cos(pi/n). Its square is that of the second frame potential.

    Raises:
        InputError: n_qubits or q below 2.

    Source: a walk of cuts with absorbing ends, re-derived; related: Bensa and Znidaric, PRA 107, 022604 (2023),
    arXiv:2211.13565.
    """
    return 2 * split_rate(q) * cos(pi / whole("n_qubits", n_qubits, 2))

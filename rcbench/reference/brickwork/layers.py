"""Which sites the gates of a layer join, and the rates that every average of the Haar brickwork is built from.

Layer 1 joins (0, 1), (2, 3), ..., layer 2 joins (1, 2), (3, 4), ..., and so on in turn; a ring has the gate (n - 1,
0) in even layers. One layer is one unit of depth. Cut x separates the sites x - 1 and x.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.errors import InputError
from rcbench.reference.sizes import between, one_of, whole

Pairs = tuple[tuple[int, int], ...]


def layer_pairs(n_qubits: int, layer: int, *, ring: bool = False) -> Pairs:
    """The pairs of sites that a layer joins; layers count from 1.

    Raises:
        InputError: fewer than two sites, a layer below 1, a ring of an odd number of sites or of fewer than four.

    Source: the usual brickwork, as in Nahum, Vijay and Haah, PRX 8, 021014 (2018), arXiv:1705.08975.
    """
    n = whole("n_qubits", n_qubits, 2)
    if ring and (n % 2 or n < 4):
        raise InputError("n_qubits", n, "an even number, 4 or more, for a ring of two layers in turn")
    first = (whole("layer", layer, 1) + 1) % 2
    pairs = tuple((site, site + 1) for site in range(first, n - 1, 2))
    return (*pairs, (n - 1, 0)) if ring and first else pairs


def all_layers(n_qubits: int, depth: int, *, ring: bool = False, most: int | None = None) -> list[Pairs]:
    """The pairs of layers 1 to depth; `most` is the largest n_qubits that the caller has memory for."""
    n = whole("n_qubits", n_qubits, 2, most)
    return [layer_pairs(n, layer, ring=ring) for layer in range(1, whole("depth", depth, 0) + 1)]


def met_layers(n_qubits: int, depth: int, order: str) -> list[int]:
    """Numbers of the layers in the order in which an operator meets them."""
    whole("n_qubits", n_qubits, 2)
    layers = list(range(1, whole("depth", depth, 0) + 1))
    return layers if one_of("order", order, ("forward", "backward")) == "forward" else layers[::-1]


def split_rate(q: int) -> float:
    """q / (q^2 + 1): weight with which a gate on unlike labels makes both alike, for each of the two labels."""
    q = whole("q", q, 2)
    return q / (q * q + 1)


def outward_rate(q: int) -> float:
    """q^2 / (q^2 + 1): probability that a gate moves the end of an operator outward."""
    q = whole("q", q, 2)
    return q * q / (q * q + 1)


def check_sequence(key: str, values: Sequence[float] | float, depth: int) -> list[float]:
    """One rate from 0 to 1 for every layer, from one rate or a sequence of them."""
    rates = np.asarray(values)
    if rates.ndim == 0:
        return [between(key, rates.item(), 0, 1)] * depth
    if rates.shape != (depth,):
        raise InputError(key, rates.shape, f"one rate, or one for each of the {depth} layers")
    return [between(key, rate, 0, 1) for rate in rates.tolist()]

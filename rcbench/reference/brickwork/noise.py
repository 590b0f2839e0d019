"""The Haar brickwork with noise after its gates, averaged over circuits: fidelity, echo, and how many errors count.

Two rates are in use and differ by a third: p of rho -> (1 - p) rho + p 1/2, and the probability eps = 3p/4 of a Pauli
error other than 1. Noisy cross-entropy is `output.linear_xeb`, noisy purity `purity.pattern_purity`, both with
`noise=p`.

Source of all but the echo: the label sums as in Dalzell, Hunter-Jones and Brandao, Commun. Math. Phys. (2024),
arXiv:2111.14907, and Gao et al., PRX Quantum 5, 010334 (2024), arXiv:2112.01657.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import log1p

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.errors import InputError
from rcbench.reference.brickwork.labels import MOST_SITES, noise_rule, product_state, same_on_all, totals
from rcbench.reference.brickwork.layers import all_layers, check_sequence, layer_pairs
from rcbench.reference.brickwork.output import linear_xeb
from rcbench.reference.brickwork.strings import echo_return
from rcbench.reference.sizes import between, one_of, whole


def fidelity(
    n_qubits: int, depth: int, noise: float | Sequence[float], *, q: int = 2, ring: bool = False
) -> FloatArray:
    """(depth + 1,) averaged fidelity of the noisy state with the ideal one after 0 to `depth` layers; tends to 1/D.

    Args:
        n_qubits: 2 to 32. depth: layers, 0 or more.
        noise: p of rho -> (1 - p) rho + p 1/q on both sites after every gate; one number, or one a layer.
        q: local dimension. ring: closed line of even length.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    q, layers = whole("q", q, 2), all_layers(n_qubits, depth, ring=ring, most=MOST_SITES)
    rules = [noise_rule(1 - p, q) for p in check_sequence("noise", noise, depth)]
    return totals(product_state(n_qubits, q), same_on_all(n_qubits, q, q * q), layers, q, rules)


def location_count(n_qubits: int, depth: int, *, ring: bool = False) -> int:
    """Places of error: two for each gate.

    Raises:
        InputError: sizes outside those of `fidelity`.

    Source: elementary.
    """
    return 2 * sum(len(pairs) for pairs in all_layers(n_qubits, depth, ring=ring))


def effective_share(
    n_qubits: int, depth: int, error: float, *, quantity: str = "linear_xeb", layer: int | None = None
) -> float:
    """Loss of an averaged quantity over what independent errors would take, from the exact averages.

    ln of noisy over ideal, divided by ln (1 - error)^locations: 1 where every error takes all, less where late or
    early errors are not seen. Normalised cross-entropy loses less than fidelity in shallow circuits.

    Args:
        n_qubits: 2 to 32. depth: layers, 1 or more. error: probability of a Pauli other than 1 at each place, 0 to 3/4.
        quantity: "linear_xeb", or "fidelity" with its floor 1/D removed.
        layer: with errors in one layer only (1 to depth), else in all.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    depth = whole("depth", depth, 1)
    if not 0 < error < 0.75:
        raise InputError("error", error, "a probability above 0 and below 3/4")
    p = 4 / 3 * error
    rates = [p] * depth
    count = location_count(n_qubits, depth)
    if layer is not None:
        layer = whole("layer", layer, 1, depth)
        rates = [p if number == layer else 0.0 for number in range(1, depth + 1)]
        count = 2 * len(layer_pairs(n_qubits, layer))
    if one_of("quantity", quantity, ("linear_xeb", "fidelity")) == "linear_xeb":
        left = linear_xeb(n_qubits, depth, noise=rates)[-1] / linear_xeb(n_qubits, depth)[-1]
    else:
        floor = 2.0**-n_qubits
        left = (fidelity(n_qubits, depth, rates)[-1] - floor) / (1 - floor)
    return float(np.log(left) / (count * log1p(-error)))


def echo_locations(n_qubits: int, depth: int) -> tuple[int, float]:
    """Places of error in a circuit and its inverse (two for each gate of both), and how many of them count.

    An error counts 1 less the probability that it goes unseen at the nearer end. An error after the very last gate of
    a site goes unseen with probability 1/3, a scrambled one with 1/(D + 1).

    Args:
        n_qubits: 2 to 22. depth: layers of the circuit, 0 or more.
    Raises:
        InputError: values outside these.

    Source: re-derived from the chain of Nahum, Vijay and Haah, PRX 8, 021014 (2018); checked by sampling.
    """
    unseen = echo_return(n_qubits, depth)
    count, counted = 0, 0.0
    for layer in range(1, depth + 1):
        sites = [site for pair in layer_pairs(n_qubits, layer) for site in pair]
        count += 2 * len(sites)
        # after the gate of the circuit `layer` layers lie between the error and the start, after its inverse one less
        counted += float(np.sum(2 - unseen[layer, sites] - unseen[layer - 1, sites]))
    return count, counted


def noisy_echo(n_qubits: int, depth: int, error: float) -> float:
    """Averaged return probability of a circuit and its inverse: exp(-error times the places that count).

    To first order in `error`; the exponential is good far beyond it (0.7 % at 6 sites, 8 layers, error 0.01).

    Args:
        n_qubits: 2 to 22. depth: layers of the circuit. error: probability of a Pauli other than 1 at each place, 0
        to 3/4.
    Raises:
        InputError: values outside these.

    Source: as `echo_locations`.
    """
    return float(np.exp(-between("error", error, 0, 0.75) * echo_locations(n_qubits, depth)[1]))

"""Second frame potential of the ensemble of Haar brickworks of a depth: how near it is to a 2-design.

The product of one circuit's inverse with another is a brickwork of twice the depth whose middle layers merge, so the
mean of |tr U^dag V|^4 is the trace of a product of layers acting on labels.

Source: Hunter-Jones, arXiv:1905.12053.
"""

from __future__ import annotations

import numpy as np

from rcbench.reference.brickwork.labels import LabelWeights, same_on_all
from rcbench.reference.brickwork.layers import all_layers
from rcbench.reference.sizes import whole

MOST_SITES = 20  # 2^10 x 2^11 weights: 16 MB; every two sites more take four times as much


def frame_potential_k2(n_qubits: int, depth: int, *, q: int = 2, ring: bool = False) -> float:
    """Mean of |tr U^dag V|^4 over independent Haar brickworks U and V, exact; tends to 2.

    A site that no gate has met yet bears one random one-qubit gate. Cost: 2^n times n times twice the depth.

    Args:
        n_qubits: 2 to 20. depth: layers, 1 or more. q: local dimension. ring: closed line of even length.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    depth = whole("depth", depth, 1)
    layers = all_layers(n_qubits, depth, ring=ring, most=MOST_SITES)
    first = layers[0]
    alone = [site for site in range(n_qubits) if all(site not in pair for pair in first)]
    groups = [*first, *((site,) for site in alone)]
    # T1 only leaves patterns with one label a gate: start from each of those, and count what comes back to it
    count = 1 << len(groups)
    labels = LabelWeights(same_on_all(n_qubits, 1, 1), q, batch=count)
    labels.weights = np.eye(count).ravel()
    labels.variables = list(range(len(groups)))
    for number, group in enumerate(groups):
        for site in group:
            labels.owner[site] = number
    labels._next = len(groups)
    for pairs in [*layers[1:], *reversed(layers[1:-1]), *([first] if depth > 1 else [])]:
        for pair in pairs:
            labels.gate(*pair)
    order = [labels.variables.index(_owner(labels, group[0])) for group in groups]
    back = labels.weights.reshape(count, *(2,) * len(groups)).transpose(0, *(axis + 1 for axis in order))
    return float(np.trace(back.reshape(count, count)))


def _owner(labels: LabelWeights, site: int) -> int:
    owner = labels.owner[site]
    assert owner is not None
    return owner


def approach_bound(n_qubits: int, depth: int, q: int = 2) -> float:
    """Upper bound on the second frame potential of the open brickwork: 2 (1 + (2q/(q^2+1))^(2(L-1)))^(floor(n/2)-1).

    Not tight; holds against the exact values up to 8 sites.

    Raises:
        InputError: n_qubits or q below 2, depth below 1.

    Source: Hunter-Jones, arXiv:1905.12053 (form from memory).
    """
    n, depth, q = whole("n_qubits", n_qubits, 2), whole("depth", depth, 1), whole("q", q, 2)
    factor: float = (2 * q / (q * q + 1)) ** (2 * (depth - 1))
    return float(2 * (1 + factor) ** (n // 2 - 1))

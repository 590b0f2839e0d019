"""Spreading of one local operator under the Haar brickwork, exact for lines to 1000 sites.

`otoc_profile`, `otoc_map` and `end_density` follow the probability that the operator is trivial on an interval;
`front_*`, `butterfly_velocity` and `light_cone_edge` are the closed forms of the front. For distributions over whole
strings, other gates and operator sizes see `strings`.

The operator starts at one site. `order="forward"` means U V U^dag, which meets layer 1 first; "backward" means U^dag
W U, which meets the last layer first. F is (1/D) tr(W(t) V W(t) V) for Paulis (q > 2: traceless, squaring to 1). At
the operator's own site, as long as no gate has met it, F is the mean over independent random Paulis, -1/(q^2 - 1):
circuits here end and begin in random one-qubit gates.

Source of all: Nahum, Vijay and Haah, PRX 8, 021014 (2018), arXiv:1705.08975; von Keyserlingk, Rakovszky, Pollmann and
Sondhi, PRX 8, 021013 (2018), arXiv:1705.08910.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterator
from math import sqrt

import numpy as np
from scipy.special import erfc

from rcbench.arrays import FloatArray
from rcbench.reference.brickwork.layers import met_layers, outward_rate
from rcbench.reference.sizes import one_of, whole

MOST_SITES = 2000  # the table has (n + 1)^2 numbers: 32 MB


def _trivial_on(n: int, site: int, q: int, layers: list[int]) -> Iterator[FloatArray]:
    """Tables (n + 1, n + 1) of the probability that the operator is trivial on [a, b), before and after each layer.

    A gate on non-trivial sites leaves one of them trivial with probability 1/(q^2 + 1), so an interval whose end a gate
    straddles takes q^2/(q^2 + 1) of the interval enlarged at that end and the rest of the one shrunk there.
    One table, changed in place: use it before the next.
    """
    out = outward_rate(q)
    cut = np.arange(n + 1)
    table = ((cut[:, None] > site) | (cut[None, :] <= site)).astype(np.float64)  # empty intervals count as trivial
    yield table
    for met, layer in enumerate(layers):
        moved = slice(1 + (layer + 1) % 2, n, 2)  # cuts that a gate straddles; 0 and n are none
        below, above = _beside(moved, -1), _beside(moved, 1)
        _mix(table[moved], table[below], table[above], out)
        _mix(table[:, moved], table[:, above], table[:, below], out)
        np.fill_diagonal(table, 1.0)  # both ends of an empty interval moved, apart
        if met % 32 == 31:
            table[table < 1e-200] = 0.0  # denormal numbers would make the sums ten times slower
        yield table


def _mix(target: FloatArray, wider: FloatArray, narrower: FloatArray, share: float) -> None:
    """Share of the one and the rest of the other, with no new array: fresh pages cost more than the sums."""
    np.subtract(wider, narrower, out=target)
    target *= share
    target += narrower


def _last(tables: Iterator[FloatArray]) -> FloatArray:
    return deque(tables, maxlen=1)[0]


def _beside(cuts: slice, by: int) -> slice:
    return slice(cuts.start + by, cuts.stop + by, cuts.step)


def _otoc(table: FloatArray, q: int) -> FloatArray:
    return 1 - (1 - np.diagonal(table, 1)) * q * q / (q * q - 1)


def otoc_profile(n_qubits: int, site: int, depth: int, *, q: int = 2, order: str = "forward") -> FloatArray:
    """(n,) averaged OTOC between an operator that starts at `site` and one at each site, after `depth` layers.

    Cost: n^2 numbers a layer (1000 sites, 1000 layers: 5 s).

    Args:
        n_qubits: length of the open line, 2 to 2000. site: 0 to n_qubits - 1. depth: layers, 0 or more.
        q: local dimension. order: "forward" or "backward", see the module.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    n, site = _sizes(n_qubits, site)
    table = _last(_trivial_on(n, site, q, met_layers(n, depth, order)))
    return _otoc(table, q)


def otoc_map(n_qubits: int, site: int, depth: int, *, q: int = 2, order: str = "forward") -> FloatArray:
    """(depth + 1, n) averaged OTOC after 0 to `depth` layers: the space-time map of the light cone.

    Cost: as one profile where forward; backward the layers differ for each depth, and the cost grows as depth^2.

    Args, errors: as `otoc_profile`.

    Source: see the module.
    """
    n, site = _sizes(n_qubits, site)
    if met_layers(n, depth, order) == met_layers(n, depth, "forward"):
        return np.array([_otoc(table, q) for table in _trivial_on(n, site, q, met_layers(n, depth, "forward"))])
    return np.array([otoc_profile(n, site, each, q=q, order=order) for each in range(depth + 1)])


def end_density(
    n_qubits: int, site: int, depth: int, *, q: int = 2, order: str = "forward", side: str = "right"
) -> FloatArray:
    """(n,) probability that the outermost non-trivial site, on one side, is each of the sites.

    Args, errors: as `otoc_profile`; side: "right" or "left".

    Source: see the module.
    """
    n, site = _sizes(n_qubits, site)
    table = _last(_trivial_on(n, site, q, met_layers(n, depth, order)))
    if one_of("side", side, ("right", "left")) == "right":
        return np.diff(table[:, n])
    return -np.diff(table[0, :])


def _sizes(n_qubits: int, site: int) -> tuple[int, int]:
    n = whole("n_qubits", n_qubits, 2, MOST_SITES)
    return n, whole("site", site, 0, n - 1)


def butterfly_velocity(q: int = 2) -> float:
    """Mean speed of an operator's end in the bulk, in sites a layer: (q^2 - 1)/(q^2 + 1), 3/5 for qubits.

    The light cone moves one site a layer.

    Raises:
        InputError: q below 2.

    Source: see the module.
    """
    return 2 * outward_rate(q) - 1


def front_variance(q: int = 2) -> float:
    """Growth of the variance of an operator's end, in sites^2 a layer: 4 q^2/(q^2 + 1)^2, 0.64 for qubits; 2 D.

    Raises:
        InputError: q below 2.

    Source: see the module.
    """
    out = outward_rate(q)
    return 4 * out * (1 - out)


def front_width(depth: int, q: int = 2) -> float:
    """Standard deviation of an operator's end after `depth` layers, in sites: 0.8 sqrt(depth) for qubits.

    Raises:
        InputError: depth below 0, q below 2.

    Source: see the module.
    """
    return sqrt(front_variance(q) * whole("depth", depth, 0))


def front_profile(distance: FloatArray, depth: int, q: int = 2) -> FloatArray:
    """Large-depth law of 1 - F at `distance` sites from the start: erfc of the distance from the front, over two.

    Known up to a shift of about one site, and good to 0.09 at 120 layers; `otoc_profile` is exact.

    Args:
        distance: any shape. depth: layers, 1 or more. q: local dimension.
    Raises:
        InputError: depth below 1, q below 2.

    Source: see the module.
    """
    depth = whole("depth", depth, 1)
    away = np.asarray(distance) - butterfly_velocity(q) * depth
    return np.asarray(erfc(away / sqrt(2 * front_variance(q) * depth)) / 2)


def light_cone_edge(depth: int, q: int = 2) -> float:
    """1 - F at the last site that a light cone reaches: q^2/(q^2 - 1) (q^2/(q^2 + 1))^depth, exact.

    Holds at site + depth for an operator on the left leg of its first gate, forward. At one layer it is above 1.

    Raises:
        InputError: depth below 1, q below 2.

    Source: see the module.
    """
    out = outward_rate(q)
    return q * q / (q * q - 1) * out ** whole("depth", depth, 1)

"""Whole operator strings under brickworks of random gates: a Markov chain over which sites are non-trivial.

Averaged over random one-qubit gates around a two-qubit gate, squared Pauli coefficients follow a chain on the
occupation of the two sites: 00 stays, the others mix. `HAAR_RULE` is that of Haar gates, `occupation_rule` that of any
fixed gate (CZ, iSWAP, fSim) between random one-qubit gates. Patterns are numbers below 2^n, site 0 the most significant
bit, so time and memory grow as 2^n: 20 sites take 8 MB.

`order` and the value at the operator's own site before any gate: as in `spreading`.

Source: Nahum, Vijay and Haah, PRX 8, 021014 (2018), arXiv:1705.08975; von Keyserlingk, Rakovszky, Pollmann and Sondhi,
PRX 8, 021013 (2018), arXiv:1705.08910.
"""

from __future__ import annotations

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.errors import InputError
from rcbench.reference.brickwork.layers import layer_pairs, met_layers
from rcbench.reference.sizes import whole

MOST_SITES = 22
# [before, after], occupation 00, 01, 10, 11: any of 15 non-identity pairs becomes any of the 15
HAAR_RULE: FloatArray = np.array([[1, 0, 0, 0], *[[0, 0.2, 0.2, 0.6]] * 3])
HAAR_RULE.flags.writeable = False


def occupation_rule(gate: ComplexArray) -> FloatArray:
    """(4, 4) chain [before, after] on occupations 00, 01, 10, 11 of a two-qubit gate between random one-qubit gates.

    The gate acts as P -> U P U^dag. The random gates may be Haar or Clifford.

    Args:
        gate: (4, 4) unitary; the first qubit the more significant.
    Raises:
        InputError: not a 4 x 4 unitary.

    Source: squared Pauli transfer matrix summed over classes; elementary.
    """
    gate = np.asarray(gate)
    if gate.shape != (4, 4) or not np.allclose(gate @ gate.conj().T, np.eye(4), atol=1e-8):
        raise InputError("gate", gate.tolist(), "a unitary matrix of 4 x 4")
    pauli = np.array([[[1, 0], [0, 1]], [[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
    pairs = np.einsum("aij,bkl->abikjl", pauli, pauli).reshape(16, 4, 4)
    coefficients = np.einsum("pij,qji->pq", gate @ pairs @ gate.conj().T, pairs).real / 4
    occupied = np.arange(16).reshape(4, 4)
    classes = [occupied[0, :1], occupied[0, 1:], occupied[1:, 0], occupied[1:, 1:].ravel()]
    squares = coefficients**2
    return np.array([[squares[np.ix_(a, b)].sum() / len(a) for b in classes] for a in classes])


def _step(weights: FloatArray, pair: tuple[int, int], n: int, rule: FloatArray) -> FloatArray:
    """Weights of patterns after one gate; with the rule transposed, values of patterns before it."""
    first = pair[0]  # an open line: the second is the next site
    shaped = weights.reshape(1 << first, 4, 1 << (n - first - 2))
    return np.asarray(np.einsum("xaz,ab->xbz", shaped, rule)).reshape(-1)


def string_distribution(
    n_qubits: int, site: int, depth: int, *, order: str = "forward", rule: FloatArray = HAAR_RULE
) -> FloatArray:
    """(2^n,) probability of each set of non-trivial sites of an operator that starts at `site`, after `depth` layers.

    Args:
        n_qubits: length of the open line, 2 to 22. site: 0 to n_qubits - 1. depth: layers, 0 or more.
        order: "forward" (U V U^dag) or "backward" (U^dag W U).
        rule: (4, 4) of every gate, for the direction in which the operator meets it.
    Raises:
        InputError: values outside these.

    Source: see the module.
    """
    n = whole("n_qubits", n_qubits, 2, MOST_SITES, "; `spreading` serves longer lines")
    weights: FloatArray = np.zeros(1 << n)
    weights[1 << (n - 1 - whole("site", site, 0, n - 1))] = 1
    for layer in met_layers(n, depth, order):
        for pair in layer_pairs(n, layer):
            weights = _step(weights, pair, n, rule)
    return weights


def occupation(distribution: FloatArray) -> FloatArray:
    """(n,) probability that each site is non-trivial, from (2^n,) probabilities of patterns.

    Raises:
        InputError: a length that is no power of two.

    Source: elementary.
    """
    n = _sites(distribution)
    return np.array([distribution.reshape(1 << site, 2, -1)[:, 1].sum() for site in range(n)])


def otoc(distribution: FloatArray) -> FloatArray:
    """(n,) averaged OTOC with a Pauli at each site: 1 - (4/3) of the probability that the site is non-trivial.

    Raises:
        InputError: as `occupation`.

    Source: see the module.
    """
    return 1 - 4 / 3 * occupation(distribution)


def size_distribution(distribution: FloatArray) -> FloatArray:
    """(n + 1,) probability of each operator size, from (2^n,) probabilities of patterns.

    Raises:
        InputError: as `occupation`.

    Source: elementary.
    """
    n = _sites(distribution)
    return np.asarray(np.bincount(_weight(n), weights=distribution, minlength=n + 1), dtype=np.float64)


def _sites(distribution: FloatArray) -> int:
    size = np.size(distribution)
    if np.ndim(distribution) != 1 or size < 2 or size & (size - 1):
        raise InputError("distribution", np.shape(distribution), "2^n probabilities of patterns")
    return size.bit_length() - 1


def _weight(n: int) -> np.ndarray:
    """(2^n,) number of non-trivial sites of each pattern."""
    return np.bitwise_count(np.arange(1 << n)).astype(np.int64)


def echo_return(n_qubits: int, depth: int, *, rule: FloatArray = HAAR_RULE) -> FloatArray:
    """(depth + 1, n) mean probability that U^dag P U leaves |0..0> in place, by depth and site of the Pauli P.

    The mean of 3^-(size) of U^dag P U over its strings; tends to 1/(D + 1). At depth 0 it is the mean over the random
    one-qubit gates, 1/3. The mean of <Z_i> after the same circuit is the OTOC at i, a different and larger number.

    Args:
        n_qubits: 2 to 22. depth: layers of U, 0 or more. rule: (4, 4) of every gate, as P -> U^dag P U.
    Raises:
        InputError: values outside these.

    Source: the chain of Nahum, Vijay and Haah; re-derived and checked by sampling.
    """
    n = whole("n_qubits", n_qubits, 2, MOST_SITES)
    values: FloatArray = 3.0 ** -_weight(n)
    starts = 1 << np.arange(n - 1, -1, -1)
    rows = [values[starts]]
    # a string meets the last layer first, so one more layer at the end is one more step at the start of the chain
    for layer in range(1, whole("depth", depth, 0) + 1):
        for pair in layer_pairs(n, layer):
            values = _step(values, pair, n, np.asarray(rule).T)
        rows.append(values[starts])
    return np.array(rows)

"""How well a circuit explains shots: likelihood ratios, cross-entropy and collisions against a floor of noise.

A run whose circuit has ideal probabilities p is modelled as f = F p + (1 - F) g: g is the floor, what is measured when
nothing of the circuit is left. The floor is a product over bits with the mean Z that is common to many circuits, so
that readout asymmetry and relaxation are not taken for structure; with equal bits it is uniform, and what follows are
the quantities of linear cross-entropy:

    X = <p(x) / g(x)> - 1          mean F v
    v = sum p^2 / g - 1
    C = sum over coincident pairs of shots of 1 / g(x), over all pairs, - 1         mean F^2 v

For a circuit that should return one bitstring, p is that string after independent flips of every bit.

A likelihood ratio is taken against the floor, with F over a grid: the `mixture` over it, which a wrong hypothesis
exceeds by t nats with probability at most e^-t whatever the shapes of p and g (Markov's inequality), and the `best`,
which is never below that of the truth. So mixture of one hypothesis minus best of another is safe evidence against
the other.

Sources: Arute et al., Nature 574, 505 (2019); Rinott, Shoham, Kalai, Stat. Sci. 37, 322 (2022); the floor and the
mixture are derived here.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rcbench.arrays import FloatArray, IntArray

FIDELITIES = np.array([0.01, 0.02, 0.05, 0.1, 0.2, 0.35, 0.5, 0.65, 0.8, 0.9, 0.97])
FLIPS = np.array([0.005, 0.02, 0.06, 0.15, 0.3])  # chance that a bit of a returned string is flipped
LEAST_EXCESS = 1e-3  # v below this: the ideal output is the floor itself, and nothing can be told
LARGEST_BIAS = 0.9


def floor(bias: FloatArray) -> FloatArray:
    """(2**n,) product distribution of bits with the given mean Z; bias: (n,), held within LARGEST_BIAS."""
    out = np.ones(1)
    for mean in np.clip(bias, -LARGEST_BIAS, LARGEST_BIAS):
        out = np.multiply.outer(out, np.array([(1 + mean) / 2, (1 - mean) / 2])).reshape(-1)
    return out


def inverse_floor_at(index: IntArray, bias: FloatArray) -> FloatArray:
    """(k,) 1 / g at some outcomes, for any number of bits; index: (k,), bias: (n,) as for `floor`."""
    n, out = len(bias), np.ones(len(index))
    for bit, mean in enumerate(np.clip(bias, -LARGEST_BIAS, LARGEST_BIAS)):
        out *= np.where(index >> (n - 1 - bit) & 1, 2 / (1 - mean), 2 / (1 + mean))
    return out


def log_likelihoods(ratio: FloatArray, counts: IntArray, starts: IntArray) -> FloatArray:
    """(runs, len(FIDELITIES)) log-likelihood ratio of F p + (1 - F) g to g, for each F.

    Args:
        ratio: (k,) p / g of each outcome. counts: (k,). starts: (runs,) where the outcomes of each run start.
    """
    found = np.empty((len(starts), len(FIDELITIES)))
    excess = np.asarray(ratio, dtype=np.float64) - 1
    for place, fidelity in enumerate(FIDELITIES):
        found[:, place] = np.add.reduceat(counts * np.log1p(fidelity * excess), starts)
    return found


def returned_ratio(distance: IntArray, n_bits: int) -> FloatArray:
    """(len(FLIPS), k) probability over the uniform one of outcomes at a Hamming distance from the string that
    returns.
    """
    log_ratio = n_bits * np.log(2 * (1 - FLIPS))[:, None] + np.multiply.outer(np.log(FLIPS / (1 - FLIPS)), distance)
    return np.asarray(np.exp(log_ratio))


def returned_log_likelihoods(distance: IntArray, counts: IntArray, starts: IntArray, n_bits: int) -> FloatArray:
    """(runs, len(FLIPS) * len(FIDELITIES)) as `log_likelihoods`, for a string that returns; the floor is uniform."""
    # by distance: there are n + 1 values, whatever the number of outcomes
    ratios = returned_ratio(np.arange(n_bits + 1), n_bits)
    table = np.log1p(FIDELITIES[:, None] * (ratios[:, None, :] - 1)).reshape(-1, n_bits + 1)
    return np.asarray(by_distance(distance, counts, starts, n_bits) @ table.T)


def by_distance(distance: IntArray, counts: IntArray, starts: IntArray, n_bits: int) -> FloatArray:
    """(runs, n_bits + 1) shots of each run at each Hamming distance."""
    run = np.repeat(np.arange(len(starts)), np.diff(np.append(starts, len(distance))))
    histogram = np.zeros((len(starts), n_bits + 1))
    np.add.at(histogram, (run, distance), counts)
    return histogram


def mixture(log_likelihood: FloatArray) -> FloatArray:
    """Log of the mean likelihood over the last axis."""
    top = log_likelihood.max(axis=-1)
    return np.asarray(top + np.log(np.exp(log_likelihood - top[..., None]).mean(axis=-1)))


def best(log_likelihood: FloatArray) -> FloatArray:
    """The largest over the last axis, the floor itself (0) included."""
    return np.asarray(np.maximum(log_likelihood.max(axis=-1), 0.0))


@dataclass(frozen=True, slots=True, eq=False)
class Crossed:
    """Cross-entropy of runs with one circuit each. mean, error: (runs,) X and its standard error. excess: (runs,) v."""

    mean: FloatArray
    error: FloatArray
    excess: FloatArray

    @property
    def fidelity(self) -> FloatArray:
        """(runs,) X / v, 0 where v vanishes."""
        return np.divide(self.mean, self.excess, out=np.zeros_like(self.mean), where=self.excess > LEAST_EXCESS)


def crossed(ratio: FloatArray, counts: IntArray, starts: IntArray, excess: FloatArray) -> Crossed:
    """X of each run; ratio: (k,) p / g of each outcome, excess: (runs,) or a number, v."""
    shots = np.maximum(np.add.reduceat(counts, starts), 1).astype(np.float64)  # a half of one shot may have none
    w = np.asarray(ratio, dtype=np.float64) - 1
    mean = np.add.reduceat(counts * w, starts) / shots
    square = np.add.reduceat(counts * w * w, starts) / shots
    v = np.broadcast_to(np.asarray(excess, dtype=np.float64), mean.shape).copy()
    # never below the variance of uniform shots: all shots of a run may agree
    variance = np.maximum(np.maximum(square - mean**2, 0.0), np.maximum(v, 1e-12))
    return Crossed(mean, np.sqrt(variance / shots), v)


@dataclass(frozen=True, slots=True, eq=False)
class Collisions:
    """Coincident pairs against the floor. excess, error: (runs,) C and its standard error.

    pairs: (runs,) coincident pairs seen; expected: (runs,) of the floor alone.
    """

    excess: FloatArray
    error: FloatArray
    pairs: FloatArray
    expected: FloatArray


def collisions(inverse_floor: FloatArray, counts: IntArray, starts: IntArray, dimension: float) -> Collisions:
    """C of each run, unbiased, with the standard error of the pair statistic.

    Args:
        inverse_floor: (k,) 1 / g of each outcome. dimension: 2**n, the number of outcomes that can be.
    """
    c = counts.astype(np.float64)
    shots = np.add.reduceat(c, starts)
    pairs = np.maximum(shots * (shots - 1), 1.0)
    triples = np.maximum(pairs * (shots - 2), 1.0)
    mean = np.add.reduceat(c * (c - 1) * inverse_floor, starts) / pairs
    second = np.add.reduceat(c * (c - 1) * inverse_floor**2, starts) / pairs
    third = np.add.reduceat(c * (c - 1) * (c - 2) * inverse_floor**2, starts) / triples
    variance = (2 * (second - mean**2) + 4 * (shots - 2) * np.maximum(third - mean**2, 0.0)) / pairs
    least = 2 * dimension / pairs  # of uniform shots
    seen = np.add.reduceat(c * (c - 1) / 2, starts)
    return Collisions(mean - 1, np.sqrt(np.maximum(variance, least)), seen, pairs / 2 / dimension)

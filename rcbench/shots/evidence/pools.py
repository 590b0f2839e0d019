"""Many runs at once, to ask in which order their bits come: one order fits all of them, so their evidence adds up."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Protocol

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.randomness import Draw
from rcbench.shots.evidence import scores
from rcbench.shots.evidence.finding import ALPHA
from rcbench.shots.evidence.orders import Order, identity

POOL_SIZE = 2**24  # probabilities held at once; more runs than that allows add nothing that matters
CLEAR = math.log(1 / ALPHA)


class Pool(Protocol):
    """Runs of one lane, whatever they should give."""

    n_bits: int

    def by_run(self, order: Order, rival: Order) -> FloatArray:
        """(runs, hypotheses) log-likelihood ratio to uniform shots if bits come in an order, held against a rival."""

    def depth_groups(self) -> IntArray:
        """(runs,) number of the depth of each: runs of one depth share their fidelity."""

    def split(self, draw: Draw) -> tuple[Pool, Pool]:
        """Two halves of the shots of every run."""

    def some(self, runs: Sequence[int]) -> Pool:
        """Some of the runs."""

    def most_gain(self, order: Order) -> float:
        """The most nats that an order can be credited with, however well it fits."""

    def matched(self) -> tuple[int, ...]:
        """The order that moves low-order correlations where the circuits have them."""

    def objective(self, source: Sequence[int]) -> Climb:
        """What a search climbs on, from a start."""

    def fidelity(self, order: Order) -> float:
        """How much of the circuits' signal is there if bits come in this order; for comparing orders."""

    def explains(self, order: Order) -> bool:
        """Whether the circuits explain what structure is surely there if bits come in this order."""


class Climb(Protocol):
    """A search's place: the score of an order, and of those that exchange two of its bits."""

    def score(self) -> float:
        """Score here."""

    def exchanged(self, a: int, b: int) -> float:
        """Score with the sources of bits a and b exchanged."""

    def exchange(self, a: int, b: int) -> None:
        """Go there."""


def evidence(pool: Pool, order: Order, rival: Order) -> tuple[float, float]:
    """Log-likelihood ratio to uniform shots, fidelity shared within a depth: mixture over it, and best."""
    found = pool.by_run(order, rival)
    total = np.zeros((int(pool.depth_groups().max()) + 1, found.shape[1]))
    np.add.at(total, pool.depth_groups(), found)
    return float(scores.mixture(total).sum()), float(scores.best(total).sum())


def preference(pool: Pool, order: Order) -> FloatArray:
    """(runs,) nats by which each run prefers an order to the one asked for."""
    asked = identity(pool.n_bits)
    return scores.mixture(pool.by_run(order, asked)) - scores.best(pool.by_run(asked, order))


def halves(counts: IntArray, draw: Draw) -> tuple[IntArray, IntArray]:
    """Each shot to one of two halves by the toss of a coin; counts: (k,)."""
    first = draw.generator().binomial(counts, 0.5)
    return first, counts - first


def match(single: FloatArray, pair: FloatArray | None) -> tuple[int, ...]:
    """Source of each bit: assignment on single bits, then exchanges that raise the agreement of pairs too.

    Args:
        single: (n, n) agreement of a delivered bit with an asked one. pair: (n, n, n, n), the same of two and two.
    """
    from scipy.optimize import linear_sum_assignment

    n = len(single)
    # of orders that match alike, the one that moves fewest bits
    stay = 1e-9 * (np.abs(single).max() + 1e-300) * np.eye(n)
    _, source = linear_sum_assignment(-(single + stay).T)
    source = np.asarray(source, dtype=np.int64)
    if pair is None:
        return tuple(source.tolist())
    bits = np.arange(n)

    def score(s: IntArray) -> float:
        return float(single[s, bits].sum() + pair[s[:, None], s, bits[:, None], bits].sum() / 2)

    here = score(source)
    for _ in range(4 * n):
        top, move = here, None
        for a in range(n):
            for b in range(a):
                source[[a, b]] = source[[b, a]]
                found = score(source)
                source[[a, b]] = source[[b, a]]
                if found > top + 1e-9 * abs(top):
                    top, move = found, (a, b)
        if move is None:
            break
        a, b = move
        source[[a, b]] = source[[b, a]]
        here = top
    return tuple(source.tolist())


def numbered(values: Sequence[int]) -> IntArray:
    """Whole numbers from 0 for different values."""
    return np.unique(np.array(values), return_inverse=True)[1].reshape(-1)

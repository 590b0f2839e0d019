"""Bits in another order than the kit asks for: which order, and how sure that is.

First the orders that software makes (`orders.named_orders`), then any permutation: correlations of single bits and
pairs are matched to those of the circuits, and from there and from random starts two bits at a time are exchanged
while the likelihood grows. One order is asked of all runs together, each depth with a fidelity of its own. An order
is told where

- half of the shots prefer it to the order asked for by more than ln(candidates / ALPHA) nats: candidates are the named
  ones, or all permutations that move as few bits, n! in the end;
- the other half, which had no part in the search, prefers it by more than ln(1 / ALPHA);
- the circuits fit clearly better: the shots as asked keep less than KEPT of the fidelity;
- the circuits then explain orphans.CLAIMED_SHARE of the structure of the runs that prefer it, and
  sampled_pool.POOLED_SHARE of that of all: shots of something else fit some order, too.

A deep circuit keeps 2^-(n - cycles) of its cross-entropy under a permutation, so one exchange halves it. Where
circuits are symmetric several orders fit alike: exchanges that change nothing are counted and told.

The search costs n^2 / 2 likelihoods of at most sampled_pool.SEARCH_ENTRIES outcomes a step, and some n steps a start.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

from rcbench.arrays import FloatArray
from rcbench.randomness import Draw
from rcbench.shots.evidence import scores
from rcbench.shots.evidence.finding import ALPHA
from rcbench.shots.evidence.orders import Order, identity, named_orders
from rcbench.shots.evidence.pools import CLEAR, Pool, evidence

KEPT = 0.8
RANDOM_STARTS = 3
SUBSET = math.log(100)  # a part of a lane in another order than the rest is rarer than all of it
TIE = 0.5  # nats: orders closer than this fit alike


@dataclass(frozen=True, slots=True)
class FoundOrder:
    """An order that fits better than the one asked for.

    gain, limit: nats in the half that was searched; held_out, held_limit: in the other half. alike: exchanges of two
    bits after which it fits as well.
    """

    order: Order
    gain: float
    limit: float
    held_out: float
    held_limit: float
    alike: tuple[tuple[int, int], ...] = ()


class Candidate(NamedTuple):
    """An order that may be told, and ln of the number of those that are as simple."""

    order: Order
    log_candidates: float


class Runs:
    """Runs of a lane of which some are doubtful, their shots split in two halves.

    One order of all runs, which those that are explained bear too, is the simplest; one of the doubtful runs alone pays
    SUBSET and ln of the number of ways to choose them.
    """

    def __init__(self, pool: Pool, doubtful: Sequence[int]) -> None:
        self.half, self.other = pool.split(Draw(0, "bit order", pool.n_bits))
        self.n_bits, self.chosen = pool.n_bits, list(doubtful)
        self.doubtful = self.half.some(doubtful)
        self.runs = len(pool.depth_groups())

    def told(self, order: Order, log_candidates: float, *, whole: bool = False) -> FoundOrder | None:
        """An order, if both halves prefer it clearly to the one asked for; whole: only as the order of all runs."""
        asked = identity(self.n_bits)
        if order.source == asked.source and not order.flipped:
            return None
        if self.doubtful.fidelity(asked) > KEPT * self.doubtful.fidelity(order) or not self.doubtful.explains(order):
            return None
        found = None
        if not (gains_by_run(self.half, order)[1] > CLEAR).any():
            found = _told(self.half, self.other, order, log_candidates)
        if found is None and not whole and len(self.chosen) < self.runs:
            k, n = len(self.chosen), self.runs
            choice = math.lgamma(n + 1) - math.lgamma(k + 1) - math.lgamma(n - k + 1) + SUBSET
            found = _told(self.doubtful, self.other.some(self.chosen), order, log_candidates + choice)
        return found


def _told(half: Pool, other: Pool, order: Order, log_candidates: float) -> FoundOrder | None:
    asked, held_limit = identity(half.n_bits), math.log(1 / ALPHA)
    limit = log_candidates + math.log(1 / ALPHA)
    gain = min(evidence(half, order, asked)[0] - evidence(half, asked, order)[1], half.most_gain(order))
    held_out = min(evidence(other, order, asked)[0] - evidence(other, asked, order)[1], other.most_gain(order))
    if gain <= limit or held_out <= held_limit:
        return None
    return FoundOrder(order, gain, limit, held_out, held_limit)


def best_told(found: Sequence[FoundOrder | None]) -> FoundOrder | None:
    """The one that exceeds its limit most."""
    told = [one for one in found if one is not None]
    return max(told, key=lambda one: one.gain - one.limit) if told else None


def candidate_orders(
    runs: Runs, labels: Sequence[str] = (), *, known: Sequence[Order] = (), thorough: bool = True
) -> list[Candidate]:
    """The orders that may be told of runs: the best named one, and the best that a search comes to.

    Args:
        runs: the runs. labels: the device's label of each bit's qubit.
        known: orders that were found in other runs. thorough: try any permutation, not only named ones.
    """
    pool = runs.doubtful
    # known ones first: where several fit alike, the same order everywhere is likeliest
    named = [*(one for one in known if len(one.source) == pool.n_bits), *named_orders(pool.n_bits, labels)]
    asked = identity(pool.n_bits)
    start = max(named, key=lambda order: evidence(pool, order, asked)[0])
    found = [Candidate(start, math.log(len(named)))]
    fits = runs.told(*found[0]) is not None
    if not thorough or (fits and start in known):
        return found
    # from a named order that fits, one may have to go on; from none, one starts where correlations lead
    flipped = start.flipped if fits else ()
    sources = [start.source] if fits else [start.source, pool.matched(), *_random_starts(pool.n_bits)]
    climbed = [Order("", climb(pool, source), flipped) for source in sources]
    top = max(climbed, key=lambda order: evidence(pool, order, asked)[0])
    # the runs that are not doubtful settle what the others leave open
    names = {(one.source, one.flipped): one for one in named}
    for source in dict.fromkeys((top.source, climb(runs.half, top.source))):
        order = names.get((source, flipped), Order("", source, flipped))
        found.append(Candidate(order, permutations(order, pool.n_bits)))
    return found


def permutations(order: Order, n_bits: int) -> float:
    """ln of the number of orders that are as simple: those that move as few bits, and which number that is."""
    moved = sum(bit != place for bit, place in enumerate(order.source))
    return math.lgamma(n_bits + 1) - math.lgamma(n_bits - moved + 1) + math.log(n_bits)


def climb(pool: Pool, start: Sequence[int]) -> tuple[int, ...]:
    """The source of each bit, exchanged two at a time while that helps most."""
    n, source = pool.n_bits, list(start)
    place = pool.objective(source)
    here = place.score()
    for _ in range(4 * n):
        found = [(place.exchanged(a, b), a, b) for a in range(n) for b in range(a)]
        top, a, b = max(found)
        if top <= here + 1e-6:
            break
        place.exchange(a, b)
        source[a], source[b] = source[b], source[a]
        here = top
    return tuple(source)


def _random_starts(n_bits: int) -> list[tuple[int, ...]]:
    draw = Draw(0, "bit order", "starts", n_bits)
    return [tuple(draw.permutation(n_bits).tolist()) for _ in range(RANDOM_STARTS)]


def with_ties(pool: Pool, found: FoundOrder) -> FoundOrder:
    """Name the exchanges of two bits that leave the fit as it is."""
    if found.order.flipped:
        return found
    place = pool.objective(found.order.source)
    here = place.score()
    pairs = [(b, a) for a in range(pool.n_bits) for b in range(a) if place.exchanged(a, b) > here - TIE]
    return replace(found, alike=tuple(pairs))


def gains_by_run(pool: Pool, order: Order) -> tuple[FloatArray, FloatArray]:
    """(runs,) nats by which each run prefers an order to the one asked for, and (runs,) the other way round."""
    before = identity(pool.n_bits)
    found, asked = pool.by_run(order, before), pool.by_run(before, order)
    return scores.mixture(found) - scores.best(asked), scores.mixture(asked) - scores.best(found)

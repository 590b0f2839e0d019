"""Bits in another order than the kit asks for: which order, and how sure that is.

First the orders that software makes (`orders.named_orders`), then any permutation: correlations of single bits and pairs
are matched to those of the circuits, and from there and from random starts two bits at a time are exchanged while the
likelihood grows. One order is asked of all runs together, each depth with a fidelity of its own. An order is told
where

- half of the shots prefer it to the order asked for by more than ln(candidates / ALPHA) nats: candidates are the named
  ones, or n! for any permutation;
- the other half, which had no part in the search, prefers it by more than ln(1 / ALPHA);
- the circuits fit clearly better: the shots as asked keep less than KEPT of the fidelity;
- the circuits then explain orphans.CLAIMED_SHARE of the structure that is there: shots of something else fit some order, too.

A deep circuit keeps 2^-(n - cycles) of its cross-entropy under a permutation, so one exchange halves it. Where
circuits are symmetric several orders fit alike: exchanges that change nothing are counted and told.

The search costs n^2 / 2 likelihoods of at most pools.SEARCH_ENTRIES outcomes a step, and some n steps a start.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from rcbench.arrays import FloatArray
from rcbench.randomness import Draw
from rcbench.shots.evidence.finding import ALPHA
from rcbench.shots.evidence.orders import Order, identity, named_orders
from rcbench.shots.evidence.pools import Pool, evidence
from rcbench.shots.evidence import scores

KEPT = 0.8
RANDOM_STARTS = 3
TIE = 0.5  # nats: orders closer than this fit alike


@dataclass(frozen=True, slots=True)
class FoundOrder:
    """An order that fits better than the one asked for.

    gain, limit: nats in the half that was searched; held_out, held_limit: in the other half. alike: exchanges of two bits
    after which it fits as well.
    """

    order: Order
    gain: float
    limit: float
    held_out: float
    held_limit: float
    alike: tuple[tuple[int, int], ...] = ()


def find_order(pool: Pool, labels: Sequence[str] = (), *, thorough: bool = True) -> FoundOrder | None:
    """The order in which the bits of all runs of a pool come, where it is another than asked.

    Args:
        pool: the runs. labels: the device's label of each bit's qubit. thorough: try any permutation, not only named ones.
    """
    half, other = pool.split(Draw(0, "bit order", pool.n_bits))
    named = named_orders(pool.n_bits, labels)
    start = max(named, key=lambda order: evidence(half, order)[0])
    found = accepted(half, other, start, math.log(len(named)))
    if not thorough:
        return found
    sources = [start.source] if found else [half.matched(), *_random_starts(pool.n_bits)]
    climbed = [climb(half, source) for source in sources]
    best = max(climbed, key=lambda source: evidence(half, Order("", source, start.flipped if found else ()))[0])
    names = {(order.source, order.flipped): order for order in named}
    flipped = start.flipped if found else ()
    order = names.get((best, flipped), Order("", best, flipped))
    if found and order.source == found.order.source:
        return _with_ties(pool, found)
    general = accepted(half, other, order, math.lgamma(pool.n_bits + 1), than=found.order if found else None)
    found = general or found
    return _with_ties(pool, found) if found else None


def accepted(half: Pool, other: Pool, order: Order, log_candidates: float, than: Order | None = None) -> FoundOrder | None:
    """The order, if both halves prefer it clearly to another one (the one asked for)."""
    before = than or identity(half.n_bits)
    if order.source == before.source and order.flipped == before.flipped:
        return None
    gain = evidence(half, order)[0] - evidence(half, before)[1]
    limit = log_candidates + math.log(1 / ALPHA)
    if gain <= limit:
        return None
    held_out, held_limit = evidence(other, order)[0] - evidence(other, before)[1], math.log(1 / ALPHA)
    if held_out <= held_limit or half.fidelity(before) > KEPT * half.fidelity(order) or not half.explains(order):
        return None
    return FoundOrder(order, gain, limit, held_out, held_limit)


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


def _with_ties(pool: Pool, found: FoundOrder) -> FoundOrder:
    """Name the exchanges of two bits that leave the fit as it is."""
    here = evidence(pool, found.order)[1]
    alike = []
    for a in range(pool.n_bits):
        for b in range(a):
            source = list(found.order.source)
            source[a], source[b] = source[b], source[a]
            if evidence(pool, Order("", tuple(source), found.order.flipped))[1] > here - TIE:
                alike.append((b, a))
    return FoundOrder(found.order, found.gain, found.limit, found.held_out, found.held_limit, tuple(alike))


def gains_by_run(pool: Pool, order: Order) -> tuple[FloatArray, FloatArray]:
    """(runs,) nats by which each run prefers an order to the one asked for, and (runs,) the other way round."""
    found, asked = pool.by_run(order), pool.by_run(identity(pool.n_bits))
    return scores.mixture(found) - scores.best(asked), scores.mixture(asked) - scores.best(found)

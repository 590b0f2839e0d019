"""Bits that do not move, and bits that come inverted."""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.shots.evidence.bit_order import Candidate, Runs
from rcbench.shots.evidence.finding import ALPHA
from rcbench.shots.evidence.orders import Order
from rcbench.shots.evidence.pools import Pool
from rcbench.shots.evidence.return_pool import ReturnPool
from rcbench.shots.evidence.sampled_pool import SampledPool, walsh_transform

FEWEST_RUNS = 3  # for any set of bits: two runs that are exchanged look like one, if each should return a string
MOST_MOVED = 0.03  # a bit that takes its other value more often is a bad qubit, not a stuck bit
SURVIVING = 0.2  # even a strong relaxation leaves this much of the other value's ideal share
LEAST_SHARE = 0.02
LOG_SIZE = 25  # of the probabilities that the search for inverted bits goes through


class StuckBit(NamedTuple):
    """A bit with one value. nats: log-likelihood ratio to a bit that moves at least a fifth of what it should."""

    bit: int
    value: int
    moved: float
    nats: float


def stuck_bits(ones: FloatArray, shots: FloatArray, ideal_ones: FloatArray, tests: int = 1) -> list[StuckBit]:
    """Bits that keep one value in all runs together although the circuits move them.

    Args:
        ones: (runs, n) share of shots with 1. shots: (runs,). ideal_ones: (runs, n) as the circuits have it.
        tests: how many such questions are asked, for the limit.
    """
    found = []
    n = ones.shape[1]
    limit = math.log(2 * n * tests / ALPHA)
    for value in (0, 1):
        moved = ones if value == 0 else 1 - ones
        ideal = ideal_ones if value == 0 else 1 - ideal_ones
        share = SURVIVING * np.minimum(ideal, 0.5)
        counts = share > LEAST_SHARE
        weights = shots[:, None] * counts
        total = weights.sum(axis=0)
        rate = np.divide((weights * moved).sum(axis=0), total, out=np.ones(n), where=total > 0)
        held = np.clip(rate, 1e-3, None)
        safe = np.where(counts, share, 0.5)
        gain = moved * np.log(held / safe) + (1 - moved) * np.log((1 - np.minimum(held, 0.5)) / (1 - safe))
        nats = (weights * gain).sum(axis=0)
        held_bits = np.flatnonzero((nats > limit) & (rate < MOST_MOVED)).tolist()
        found += [StuckBit(bit, value, float(rate[bit]), float(nats[bit])) for bit in held_bits]
    return sorted(found)


def inverted_bits(runs: Runs) -> list[Candidate]:
    """The bits that runs may have inverted, any number of them.

    Every set of bits is tried at once: the cross-entropy for all 2^n of them is a convolution, made by Walsh
    transforms. A set of w bits is one of n (n over w); one bit or all are one of n + 1.
    """
    pool = runs.doubtful
    found: list[Candidate] = []
    masks = _return_masks(pool) if isinstance(pool, ReturnPool) else _sampled_masks(pool)
    n = pool.n_bits
    for mask in masks:
        flipped = tuple(bit for bit in range(n) if mask >> (n - 1 - bit) & 1)
        simple = len(flipped) in (1, n)
        if not flipped or (not simple and len(pool.depth_groups()) < FEWEST_RUNS):
            continue
        candidates = math.log(n + 1) if simple else math.log(n) + math.log(math.comb(n, len(flipped)))
        name = f"bit {flipped[0]} inverted" if len(flipped) == 1 else f"bits {' '.join(map(str, flipped))} inverted"
        name = "every bit inverted" if len(flipped) == n else name
        found.append(Candidate(Order(name, tuple(range(n)), flipped), candidates))
    return found


def _return_masks(pool: ReturnPool) -> list[int]:
    """The bits that disagree with their target more often than not."""
    wrong = np.diagonal(pool.agreement()) < 0
    return [sum(1 << (pool.n_bits - 1 - bit) for bit in np.flatnonzero(wrong).tolist())]


def _sampled_masks(pool: Pool) -> list[int]:
    """The sets of inverted bits with the largest cross-entropy."""
    assert isinstance(pool, SampledPool)
    size, total = 2**pool.n_bits, np.zeros(2**pool.n_bits)
    ends = np.append(pool.starts[1:], len(pool.index))
    most = max(1, 2**LOG_SIZE // size)
    for run, (start, end) in enumerate(list(zip(pool.starts, ends, strict=True))[:most]):
        seen = np.zeros(size)
        np.add.at(seen, pool.index[start:end], pool.counts[start:end])
        p = pool.circuit(run).astype(np.float64)
        # one likelihood step at small fidelity: the cross-entropy, damped where single outcomes weigh much
        weight = np.log1p(0.2 * (p * size - 1))
        total += walsh_transform(walsh_transform(seen) * walsh_transform(weight - weight.mean())) / size
    return [int(mask) for mask in np.argsort(total)[::-1][:3]]

"""Many runs that should each return one string, to ask in which order their bits come."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.randomness import Draw
from rcbench.shots.evidence import orphans, scores
from rcbench.shots.evidence.cases import Case, entries
from rcbench.shots.evidence.orders import Order
from rcbench.shots.evidence.pools import CLEAR, Climb, Pool, halves, match, numbered, preference


@dataclass(slots=True, eq=False)
class ReturnPool:
    """Runs that should each return one string. bits: (k, n) outcomes; targets: (runs, n)."""

    n_bits: int
    bits: IntArray
    counts: IntArray
    starts: IntArray
    targets: IntArray
    depth: IntArray

    def by_run(self, order: Order, rival: Order) -> FloatArray:
        """As Pool."""
        distance = self._distance(order)
        return scores.returned_log_likelihoods(distance, self.counts, self.starts, self.n_bits)

    def explains(self, order: Order) -> bool:
        """As Pool: the targets are the commonest outcomes, and more common than independent bits make them."""
        at_target = np.add.reduceat(np.where(self._distance(order) == 0, self.counts, 0), self.starts)
        most = np.maximum.reduceat(self.counts, self.starts)
        sure = np.maximum(most - orphans.MODE_SIGMAS * np.sqrt(most), 0)
        shots = np.add.reduceat(self.counts, self.starts)
        ones = np.add.reduceat(self.bits * self.counts[:, None], self.starts) / np.maximum(shots, 1)[:, None]
        ones = ones[:, list(order.source)]
        flipped = np.isin(np.arange(self.n_bits), order.flipped)
        agree = np.where((self.targets == 1) != flipped, ones, 1 - ones)
        by_chance = float(shots @ agree.prod(axis=1))
        clear = orphans.stands_out(np.array([at_target.sum()]), np.array([by_chance]))
        return bool(clear[0] and at_target.sum() >= orphans.CLAIMED_SHARE * sure.sum())

    def _distance(self, order: Order) -> IntArray:
        mended = self.bits[:, list(order.source)]
        if order.flipped:
            mended = mended.copy()
            mended[:, list(order.flipped)] ^= 1
        return np.asarray((mended != self._target_of_each()).sum(axis=1))

    def depth_groups(self) -> IntArray:
        """As Pool."""
        return self.depth

    def split(self, draw: Draw) -> tuple[Pool, Pool]:
        """As Pool."""
        first, second = halves(self.counts, draw)
        return replace(self, counts=first), replace(self, counts=second)

    def some(self, runs: Sequence[int]) -> Pool:
        """As Pool."""
        picked, starts = entries(self.starts, len(self.counts), runs)
        return replace(
            self,
            bits=self.bits[picked],
            counts=self.counts[picked],
            starts=starts,
            targets=self.targets[list(runs)],
            depth=self.depth[list(runs)],
        )

    def most_gain(self, order: Order) -> float:
        """As Pool: a string of something else is the target by chance once in 2^n, so n ln 2 a run that gains."""
        return float((preference(self, order) > CLEAR).sum()) * self.n_bits * math.log(2)

    def agreement(self) -> FloatArray:
        """(n, n) sum over shots of the product of Z of a delivered bit and of a target bit."""
        z = (1.0 - 2.0 * self.bits) * self.counts[:, None]
        return np.asarray(z.T @ (1.0 - 2.0 * self._target_of_each()))

    def matched(self) -> tuple[int, ...]:
        """As Pool: exact here, since a return is a product over bits."""
        return match(self.agreement(), None)

    def objective(self, source: Sequence[int]) -> Climb:
        """As Pool; the match is the top already."""
        return ReturnClimb(self.agreement(), list(source))

    def fidelity(self, order: Order) -> float:
        """Mean of (-1/2) to the Hamming distance from the target, if bits come in this order."""
        return float((-0.5) ** self._distance(order) @ self.counts) / max(int(self.counts.sum()), 1)

    def _target_of_each(self) -> IntArray:
        return np.repeat(self.targets, np.diff(np.append(self.starts, len(self.bits))), axis=0)


@dataclass(slots=True, eq=False)
class ReturnClimb:
    """Search among orders of bits that should return strings."""

    table: FloatArray
    source: list[int]

    def score(self) -> float:
        """As Climb."""
        return float(self.table[self.source, np.arange(len(self.source))].sum())

    def exchanged(self, a: int, b: int) -> float:
        """As Climb."""
        s, t = self.source, self.table
        return self.score() + float(t[s[b], a] + t[s[a], b] - t[s[a], a] - t[s[b], b])

    def exchange(self, a: int, b: int) -> None:
        """As Climb."""
        self.source[a], self.source[b] = self.source[b], self.source[a]


def return_pool(cases: Sequence[Case]) -> ReturnPool:
    """A pool of runs that should return their targets."""
    n = cases[0].n_bits
    shifts = np.arange(n - 1, -1, -1)
    index = np.concatenate([case.index for case in cases])
    targets = np.array([case.target for case in cases], dtype=np.int64)
    return ReturnPool(
        n_bits=n,
        bits=(index[:, None] >> shifts & 1).astype(np.int8),
        counts=np.concatenate([case.counts for case in cases]),
        starts=np.concatenate([[0], np.cumsum([len(case.index) for case in cases])[:-1]]).astype(np.int64),
        targets=(targets[:, None] >> shifts & 1).astype(np.int8),
        depth=numbered([case.row.depth for case in cases]),
    )

"""Many runs at once, to ask in which order their bits come: one order fits all of them, so their evidence adds up."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.randomness import Draw
from rcbench.shots.evidence import orphans, scores
from rcbench.shots.evidence.cases import Case, entries
from rcbench.shots.evidence.finding import ALPHA
from rcbench.shots.evidence.orders import Order, identity

POOL_SIZE = 2**24  # probabilities held at once; more runs than that allows add nothing that matters
SEARCH_ENTRIES = 40_000  # outcomes that the search climbs on; the decision uses all
SEARCH_FIDELITY = 0.2
CLEAR = math.log(1 / ALPHA)
POOLED_SHARE = 0.4  # of the structure of all runs, where some may be of other circuits besides


class Pool(Protocol):
    """Runs of one lane, whatever they should give."""

    n_bits: int

    def by_run(self, order: Order) -> FloatArray:
        """(runs, hypotheses) log-likelihood ratio to the floor if bits come in this order."""

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


def evidence(pool: Pool, order: Order) -> tuple[float, float]:
    """Log-likelihood ratio to the floor, fidelity shared within a depth: mixture over it, and best."""
    found = pool.by_run(order)
    total = np.zeros((int(pool.depth_groups().max()) + 1, found.shape[1]))
    np.add.at(total, pool.depth_groups(), found)
    return float(scores.mixture(total).sum()), float(scores.best(total).sum())


def preference(pool: Pool, order: Order) -> FloatArray:
    """(runs,) nats by which each run prefers an order to the one asked for."""
    return scores.mixture(pool.by_run(order)) - scores.best(pool.by_run(identity(pool.n_bits)))


def halves(counts: IntArray, draw: Draw) -> tuple[IntArray, IntArray]:
    """Each shot to one of two halves by the toss of a coin; counts: (k,)."""
    first = draw.generator().binomial(counts, 0.5)
    return first, counts - first


@dataclass(slots=True, eq=False)
class SampledPool:
    """Runs of sampled circuits.

    Args:
        n_bits: bits. index, counts, at: (k,) outcomes, how often, 1 / g of each. starts: (runs,).
        first: (runs,) where the probabilities of the run's circuit start in `flat`, those of all circuits in turn.
        depth: (runs,) number of the depth. mean_z: (n,) of the floor.
    """

    n_bits: int
    index: IntArray
    counts: IntArray
    at: FloatArray
    starts: IntArray
    first: IntArray
    flat: FloatArray
    depth: IntArray
    mean_z: FloatArray

    @property
    def offset(self) -> IntArray:
        """(k,) where the probabilities of the outcome's circuit start in `flat`."""
        return np.repeat(self.first, np.diff(np.append(self.starts, len(self.index))))

    def some(self, runs: Sequence[int]) -> Pool:
        """As Pool."""
        picked, starts = entries(self.starts, len(self.index), runs)
        return replace(
            self,
            index=self.index[picked],
            counts=self.counts[picked],
            at=self.at[picked],
            starts=starts,
            first=self.first[list(runs)],
            depth=self.depth[list(runs)],
        )

    def most_gain(self, order: Order) -> float:
        """As Pool: a distribution of its own is matched by no other."""
        return math.inf

    def circuit(self, run: int) -> FloatArray:
        """(2**n,) ideal probabilities of a run."""
        return self.flat[self.first[run] : self.first[run] + 2**self.n_bits]

    def excess(self) -> FloatArray:
        """(runs,) v."""
        size = 2**self.n_bits
        runs = range(len(self.starts))
        return np.array([float(np.square(self.circuit(r), dtype=np.float64).sum()) * size - 1 for r in runs])

    def by_run(self, order: Order) -> FloatArray:
        """As Pool."""
        return scores.log_likelihoods(self._ratio(order.mended(self.index)), self.counts, self.starts)

    def depth_groups(self) -> IntArray:
        """As Pool."""
        return self.depth

    def split(self, draw: Draw) -> tuple[Pool, Pool]:
        """As Pool."""
        first, second = halves(self.counts, draw)
        return replace(self, counts=first), replace(self, counts=second)

    def objective(self, source: Sequence[int]) -> Climb:
        """As Pool."""
        step = max(1, -(-len(self.index) // SEARCH_ENTRIES))
        order = Order("", tuple(source))
        return SampledClimb(
            self.n_bits, order.mended(self.index[::step]), self.counts[::step], self.at[::step],
            self.offset[::step], self.flat,
        )  # fmt: skip

    def fidelity(self, order: Order) -> float:
        """X over v of all runs together, if bits come in this order."""
        ratio = self._ratio(order.mended(self.index))
        mean = float(self.counts @ (np.asarray(ratio, dtype=np.float64) - 1))
        shots = np.add.reduceat(self.counts, self.starts)
        return mean / max(float(shots @ self.excess()), 1e-12)

    def explains(self, order: Order) -> bool:
        """As Pool: the coincidences of all runs together."""
        cross = scores.crossed(self._ratio(order.mended(self.index)), self.counts, self.starts, self.excess())
        found = scores.collisions(self.at, self.counts, self.starts, 2.0**self.n_bits)
        explained, _ = orphans.explained_excess(cross)
        weight = 1 / np.square(found.error)  # by precision, or one run of few shots would decide

        def share_is(least: float, of: FloatArray) -> bool:
            error = float(of.sum()) ** -0.5
            there = float(of @ found.excess / of.sum()) - orphans.ONE_SIDED * error
            return bool(of @ explained / of.sum() >= least * there)

        gains = preference(self, order) > CLEAR
        if not gains.any():
            return share_is(orphans.CLAIMED_SHARE, weight)
        return share_is(orphans.CLAIMED_SHARE, weight * gains) and share_is(POOLED_SHARE, weight)

    def _ratio(self, index: IntArray) -> FloatArray:
        return np.asarray(self.flat[self.offset + index] * self.at)

    def matched(self) -> tuple[int, ...]:
        """As Pool: marginals by assignment, then pairs by exchanging."""
        n = self.n_bits
        ends = np.append(self.starts[1:], len(self.index))
        single = np.zeros((n, n))
        pair = np.zeros((n, n, n, n))
        places = 1 << (n - 1 - np.arange(n))
        joint = places[:, None] | places[None, :]
        for run, (start, end) in enumerate(zip(self.starts, ends, strict=True)):
            walsh = walsh_transform(self.circuit(run).astype(np.float64))
            z = 1.0 - 2.0 * ((self.index[start:end, None] & places) > 0)
            weights = self.counts[start:end].astype(np.float64)
            shots = max(float(weights.sum()), 1.0)
            m = (weights @ z) / shots - self.mean_z
            c = (z * weights[:, None]).T @ z / shots - np.multiply.outer(self.mean_z, self.mean_z)
            ideal = walsh[joint]
            np.fill_diagonal(c, 0.0)
            np.fill_diagonal(ideal, 0.0)
            single += shots * np.multiply.outer(m, walsh[places])
            pair += shots * np.multiply.outer(c, ideal)
        return match(single, pair)


@dataclass(slots=True, eq=False)
class SampledClimb:
    """Search among orders by exchanging two bits at a time."""

    n_bits: int
    index: IntArray
    counts: IntArray
    at: FloatArray
    offset: IntArray
    flat: FloatArray

    def score(self) -> float:
        """As Climb."""
        return self._of(self.index)

    def exchanged(self, a: int, b: int) -> float:
        """As Climb."""
        return self._of(self._swap(a, b))

    def exchange(self, a: int, b: int) -> None:
        """As Climb."""
        self.index = self._swap(a, b)

    def _swap(self, a: int, b: int) -> IntArray:
        high, low = self.n_bits - 1 - a, self.n_bits - 1 - b
        differ = (self.index >> high ^ self.index >> low) & 1
        return self.index ^ (differ << high | differ << low)

    def _of(self, index: IntArray) -> float:
        excess = self.flat[self.offset + index] * self.at - 1
        return float(self.counts @ np.log1p(SEARCH_FIDELITY * excess))


@dataclass(slots=True, eq=False)
class ReturnPool:
    """Runs that should each return one string. bits: (k, n) outcomes; targets: (runs, n)."""

    n_bits: int
    bits: IntArray
    counts: IntArray
    starts: IntArray
    targets: IntArray
    depth: IntArray

    def by_run(self, order: Order) -> FloatArray:
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


def walsh_transform(values: FloatArray) -> FloatArray:
    """(2**n,) sum over x of (-1)**(x.s) values[x], for every s."""
    out = values.copy()
    size, step = len(out), 1
    while step < size:
        view = out.reshape(-1, 2, step)
        view[:, 0], view[:, 1] = view[:, 0] + view[:, 1], view[:, 0] - view[:, 1]
        step *= 2
    return out


def sampled_pool(
    cases: Sequence[Case], probabilities: Sequence[FloatArray], inverse_floor: FloatArray, bias: FloatArray
) -> SampledPool:
    """A pool of sampled runs; probabilities: (2**n,) of each run's circuit."""
    n = cases[0].n_bits
    lengths = [len(case.index) for case in cases]
    index = np.concatenate([case.index for case in cases])
    return SampledPool(
        n_bits=n,
        index=index,
        counts=np.concatenate([case.counts for case in cases]),
        at=inverse_floor[index],
        starts=np.concatenate([[0], np.cumsum(lengths)[:-1]]).astype(np.int64),
        first=np.arange(len(cases), dtype=np.int64) << n,
        flat=np.concatenate(probabilities),
        depth=_numbered([case.row.depth for case in cases]),
        mean_z=bias,
    )


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
        depth=_numbered([case.row.depth for case in cases]),
    )


def _numbered(values: Sequence[int]) -> IntArray:
    return np.unique(np.array(values), return_inverse=True)[1].reshape(-1)

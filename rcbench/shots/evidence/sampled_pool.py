"""Many runs of sampled circuits, to ask in which order their bits come."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.randomness import Draw
from rcbench.shots.evidence import orphans, scores
from rcbench.shots.evidence.cases import Case, entries, marginal_ones
from rcbench.shots.evidence.orders import Order
from rcbench.shots.evidence.pools import CLEAR, Climb, Pool, halves, match, numbered, preference

SEARCH_ENTRIES = 20_000  # outcomes that the search climbs on; the decision uses all
SEARCH_FIDELITY = 0.2
FLOORS = 8  # floors of different orders that are kept
READOUT_BIAS = 0.1
POOLED_SHARE = 0.4  # of the structure of all runs, where some may be of other circuits besides


@dataclass(slots=True, eq=False)
class SampledPool:
    """Runs of sampled circuits.

    Each order has a floor of its own: what the runs share beyond their circuits is another in every order, and where
    circuits share much themselves, the floor of a wrong order would take that for its own.

    Args:
        n_bits: bits. index, counts: (k,) outcomes as delivered, and how often. starts: (runs,).
        first: (runs,) where the probabilities of the run's circuit start in `flat`, those of all circuits in turn.
        ideal_z: (runs, n) mean Z of the circuits' bits. square: (runs,) sum p^2. depth: (runs,) number of the depth.
    """

    n_bits: int
    index: IntArray
    counts: IntArray
    starts: IntArray
    first: IntArray
    flat: FloatArray
    ideal_z: FloatArray
    square: FloatArray
    depth: IntArray
    held: dict[tuple[tuple[int, ...], tuple[int, ...]], FloatArray] = field(default_factory=dict)
    seen_z: FloatArray | None = None

    @property
    def offset(self) -> IntArray:
        """(k,) where the probabilities of the outcome's circuit start in `flat`."""
        return np.repeat(self.first, np.diff(np.append(self.starts, len(self.index))))

    @property
    def shots(self) -> FloatArray:
        """(runs,) shots, at least 1."""
        return np.maximum(np.add.reduceat(self.counts, self.starts), 1).astype(np.float64)

    def some(self, runs: Sequence[int]) -> Pool:
        """As Pool."""
        picked, starts = entries(self.starts, len(self.index), runs)
        chosen = list(runs)
        return SampledPool(
            n_bits=self.n_bits,
            index=self.index[picked],
            counts=self.counts[picked],
            starts=starts,
            first=self.first[chosen],
            flat=self.flat,
            ideal_z=self.ideal_z[chosen],
            square=self.square[chosen],
            depth=self.depth[chosen],
        )

    def most_gain(self, order: Order) -> float:
        """As Pool: a distribution of its own is matched by no other."""
        return math.inf

    def circuit(self, run: int) -> FloatArray:
        """(2**n,) ideal probabilities of a run."""
        return self.flat[self.first[run] : self.first[run] + 2**self.n_bits]

    def mean_z(self) -> FloatArray:
        """(runs, n) mean Z of the bits as delivered."""
        if self.seen_z is None:
            shifts = range(self.n_bits - 1, -1, -1)
            ones = [np.add.reduceat((self.index >> shift & 1) * self.counts, self.starts) for shift in shifts]
            self.seen_z = np.asarray(1 - 2 * np.array(ones).T / self.shots[:, None])
        return self.seen_z

    def bias(self, order: Order) -> FloatArray:
        """(n,) mean Z of the floor, of the bits as delivered, if they come in this order."""
        key = order.source, order.flipped
        if key not in self.held:
            if len(self.held) >= FLOORS:
                self.held.clear()
            size = 2.0**self.n_bits
            seen = self.flat[self.offset + order.mended(self.index)].astype(np.float64)
            cross = size * np.add.reduceat(seen * self.counts, self.starts) / self.shots - 1
            share = np.clip(cross / np.maximum(size * self.square - 1, scores.LEAST_EXCESS), 0, 1)
            of_circuits = np.empty_like(self.ideal_z)
            of_circuits[:, list(order.source)] = self.ideal_z * self._signs(order)
            self.held[key] = np.median(self.mean_z() - share[:, None] * of_circuits, axis=0)
        return self.held[key]

    def _signs(self, order: Order) -> FloatArray:
        return np.where(np.isin(np.arange(self.n_bits), order.flipped), -1.0, 1.0)

    def inverse_floor(self, order: Order) -> FloatArray:
        """(2**n,) 1 / g, by the bits in order."""
        return 1 / scores.floor(self.bias(order)[list(order.source)] * self._signs(order))

    def _inverse_floor_at(self, order: Order) -> FloatArray:
        """(k,) 1 / g of each outcome: from a table, or bit by bit where that would be much larger than the outcomes."""
        if 2**self.n_bits <= 4 * len(self.index):
            return np.asarray(self.inverse_floor(order)[order.mended(self.index)])
        return scores.inverse_floor_at(self.index, self.bias(order))

    def by_run(self, order: Order, rival: Order) -> FloatArray:
        """As Pool: with the floor of either order, so that none wins by its floor alone; over uniform shots."""
        mended = order.mended(self.index)
        p = self.flat[self.offset + mended]
        found = []
        for owner in dict.fromkeys((order, rival)):
            at = self._inverse_floor_at(owner)
            base = -np.add.reduceat(self.counts * np.log(at / 2.0**self.n_bits), self.starts)[:, None]
            found += [base, base + scores.log_likelihoods(p * at, self.counts, self.starts)]
        return np.concatenate(found, axis=1)

    def depth_groups(self) -> IntArray:
        """As Pool."""
        return self.depth

    def split(self, draw: Draw) -> tuple[Pool, Pool]:
        """As Pool."""
        first, second = halves(self.counts, draw)
        return (
            replace(self, counts=first, held={}, seen_z=None),
            replace(self, counts=second, held={}, seen_z=None),
        )

    def objective(self, source: Sequence[int]) -> Climb:
        """As Pool."""
        step = max(1, -(-len(self.index) // SEARCH_ENTRIES))
        order = Order("", tuple(source))
        picked = slice(None, None, step)
        return SampledClimb(
            self.n_bits, order.mended(self.index[picked]), self.counts[picked], self.offset[picked], self.flat
        )

    def fidelity(self, order: Order) -> float:
        """The likeliest F of each depth, averaged over shots, if bits come in this order."""
        total = np.zeros((int(self.depth.max()) + 1, len(scores.FIDELITIES) + 1))
        np.add.at(total, self.depth, self.by_run(order, order))
        fidelities = np.concatenate([[0.0], scores.FIDELITIES])
        shots = np.bincount(self.depth, weights=self.shots)
        return float(shots @ fidelities[total.argmax(axis=1)] / shots.sum())

    def explains(self, order: Order) -> bool:
        """As Pool: the coincidences of all runs together."""
        mended, inverse = order.mended(self.index), self.inverse_floor(order)
        at = inverse[mended]
        v = np.array([float(np.square(self.circuit(r), dtype=np.float64) @ inverse) for r in range(len(self.starts))])
        cross = scores.crossed(self.flat[self.offset + mended] * at, self.counts, self.starts, v - 1)
        found = scores.collisions(at, self.counts, self.starts, 2.0**self.n_bits)
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

    def matched(self) -> tuple[int, ...]:
        """As Pool: marginals by assignment, then pairs by exchanging."""
        n = self.n_bits
        ends = np.append(self.starts[1:], len(self.index))
        single = np.zeros((n, n))
        pair = np.zeros((n, n, n, n))
        places = 1 << (n - 1 - np.arange(n))
        joint = places[:, None] | places[None, :]
        # what readout makes common to all bits; more of it may be the circuits' own
        common = np.clip(np.median(self.mean_z(), axis=0), -READOUT_BIAS, READOUT_BIAS)
        for run, (start, end) in enumerate(zip(self.starts, ends, strict=True)):
            walsh = walsh_transform(self.circuit(run).astype(np.float64))
            z = 1.0 - 2.0 * ((self.index[start:end, None] & places) > 0)
            weights = self.counts[start:end].astype(np.float64)
            shots = max(float(weights.sum()), 1.0)
            m = (weights @ z) / shots - common
            c = (z * weights[:, None]).T @ z / shots - np.multiply.outer(common, common)
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
        excess = self.flat[self.offset + index] * 2.0**self.n_bits - 1
        return float(self.counts @ np.log1p(SEARCH_FIDELITY * excess))


def walsh_transform(values: FloatArray) -> FloatArray:
    """(2**n,) sum over x of (-1)**(x.s) values[x], for every s."""
    out = values.copy()
    size, step = len(out), 1
    while step < size:
        view = out.reshape(-1, 2, step)
        view[:, 0], view[:, 1] = view[:, 0] + view[:, 1], view[:, 0] - view[:, 1]
        step *= 2
    return out


def sampled_pool(cases: Sequence[Case], probabilities: Sequence[FloatArray]) -> SampledPool:
    """A pool of sampled runs; probabilities: (2**n,) of each run's circuit."""
    n = cases[0].n_bits
    lengths = [len(case.index) for case in cases]
    return SampledPool(
        n_bits=n,
        index=np.concatenate([case.index for case in cases]),
        counts=np.concatenate([case.counts for case in cases]),
        starts=np.concatenate([[0], np.cumsum(lengths)[:-1]]).astype(np.int64),
        first=np.arange(len(cases), dtype=np.int64) << n,
        flat=np.concatenate(probabilities),
        ideal_z=np.array([1 - 2 * marginal_ones(p) for p in probabilities]),
        square=np.array([float(np.square(p, dtype=np.float64).sum()) for p in probabilities]),
        depth=numbered([case.row.depth for case in cases]),
    )

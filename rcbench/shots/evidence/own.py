"""What each run has to say about the circuit that it is filed under."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import BoolArray, FloatArray
from rcbench.shots.evidence import orphans, scores
from rcbench.shots.evidence.cases import Case, Ideals, Lane
from rcbench.shots.evidence.finding import ALPHA
from rcbench.shots.evidence.identity import at_mode
from rcbench.shots.evidence.scores import Collisions, Crossed


@dataclass(frozen=True, slots=True, eq=False)
class Own:
    """Runs of a lane against their own circuits; everything (runs,).

    Args:
        known: whether the ideal outcome is. mixed, best: nats over the floor, as in `scores`.
        cross: cross-entropy; zero for runs that should return a string. collided: coincidences.
        structure, unexplained: sigmas by which shots coincide, and beyond what the circuit explains.
        confirmed: the circuit explains the run. orphan: it leaves structure unexplained.
    """

    known: BoolArray
    mixed: FloatArray
    best: FloatArray
    cross: Crossed
    collided: Collisions
    structure: FloatArray
    unexplained: FloatArray
    confirmed: BoolArray
    orphan: BoolArray

    @property
    def doubtful(self) -> BoolArray:
        """(runs,) whether the circuit does not explain the run although it should."""
        return self.known & ~self.confirmed


def own_evidence(lane: Lane, ideals: Ideals, runs_in_all: int) -> Own:
    """Each run of a lane against its own circuit; runs_in_all: of the campaign, for the limits."""
    from scipy.stats import norm

    known, mixed, best, cross, can = _returned(lane) if lane.returns else _sampled(lane, ideals)
    collided = lane.collisions()
    limit = norm.isf(ALPHA / runs_in_all)
    unexplained = orphans.unexplained(collided, cross)
    structure = orphans.structure(collided)
    confirmed = known & can & (mixed > math.log(runs_in_all / ALPHA))
    if not lane.returns:
        confirmed &= orphans.consistent(collided, cross)
        orphan = known & orphans.is_orphan(collided, cross, limit)
    else:
        orphan = known & ~confirmed & (structure > limit)
    explained, _ = orphans.explained_excess(cross)
    for place in np.flatnonzero(orphan).tolist():
        case = lane.cases[place]
        excess, error = orphans.many_bit_structure(case.index, case.counts, case.n_bits)
        orphan[place] = excess > max(limit, orphans.LEAST_SIGMAS) * error and excess * orphans.SHARE > explained[place]
    return Own(known, mixed, best, cross, collided, structure, unexplained, confirmed & ~orphan, orphan)


def _sampled(lane: Lane, ideals: Ideals) -> tuple[BoolArray, FloatArray, FloatArray, Crossed, BoolArray]:
    inverse = lane.inverse_floor()
    runs = len(lane.cases)
    known = np.zeros(runs, dtype=np.bool_)
    mixed, best, mean, error, excess = (np.zeros(runs) for _ in range(5))
    error += 1.0
    zero = np.zeros(1, dtype=np.int64)
    for place, case in enumerate(lane.cases):
        p = ideals.get(case.row, lane.dropped)
        if p is None:
            continue
        known[place] = True
        ratio = p[case.index] * inverse[case.index]
        v = float(np.square(p, dtype=np.float64) @ inverse) - 1
        found = scores.crossed(ratio, case.counts, zero, np.array([v]))
        mean[place], error[place], excess[place] = found.mean[0], found.error[0], v
        if v > scores.LEAST_EXCESS:
            likelihood = scores.log_likelihoods(ratio, case.counts, zero)
            mixed[place], best[place] = scores.mixture(likelihood)[0], scores.best(likelihood)[0]
    return known, mixed, best, Crossed(mean, error, excess), known


def _returned(lane: Lane) -> tuple[BoolArray, FloatArray, FloatArray, Crossed, BoolArray]:
    runs, starts, counts = len(lane.cases), lane.starts, lane.counts
    lengths = np.diff(np.append(starts, len(counts)))
    targets = np.repeat(np.array([case.target for case in lane.cases], dtype=np.int64), lengths)
    distance = np.bitwise_count(lane.index ^ targets).astype(np.int64)
    likelihood = scores.returned_log_likelihoods(distance, counts, starts, lane.n_bits)
    nothing = Crossed(np.zeros(runs), np.ones(runs), np.zeros(runs))
    can = orphans.is_mode(*at_mode(distance, counts, starts))
    return np.ones(runs, dtype=np.bool_), scores.mixture(likelihood), scores.best(likelihood), nothing, can


def ideal_ones(cases: Sequence[Case], ideals: Ideals) -> FloatArray:
    """(runs, n_bits) probability of each bit to be 1; 0.5 where the ideal outcome is not known."""
    from rcbench.shots.evidence.cases import marginal_ones

    n = cases[0].n_bits
    shifts = np.arange(n - 1, -1, -1)
    out = np.full((len(cases), n), 0.5)
    for place, case in enumerate(cases):
        if case.target is not None:
            out[place] = case.target >> shifts & 1
        elif (p := ideals.get(case.row)) is not None:
            out[place] = marginal_ones(p)
    return out

"""Shots of one circuit filed under another: every doubtful run against every circuit, then an assignment.

A run is doubtful where its own circuit does not explain it. That run comes from a circuit c if

- its cross-entropy with c is significant, the null widened by the overlap of different ideal distributions: data of a
  foreign circuit have a cross-entropy of F s_off with c, s_off the spread of such overlaps, 2^(-n/2) for deep circuits;
- c explains orphans.CLAIMED_SHARE of the coincidences among its shots, or is its commonest outcome where it returns
  one;
- its likelihood under c exceeds that under its own circuit, and every other, by more than ln(candidates / ALPHA) nats.

The runs are assigned to places so that the total likelihood is greatest. Runs that exchange places vouch for each
other: a cycle of m among S runs is told where it gains more than m ln S - ln m + ln(1 / ALPHA) nats, and of these
circuits only half of the coincidences is asked, and no widened null. A string that returns is that of another
circuit by chance once in 2^n, so it is credited with n ln 2 nats at most.

Doubtful runs times circuits times outcomes set the cost; a campaign in which every run is explained pays only for the
circuits of the same instance, which all runs are compared with.

Sources: likelihood as in Rinott, Shoham, Kalai, Stat. Sci. 37, 322 (2022); the widened null and the limits are
derived here.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import BoolArray, FloatArray, IntArray
from rcbench.shots.evidence import orphans, scores
from rcbench.shots.evidence.cases import Lane, entries
from rcbench.shots.evidence.finding import ALPHA
from rcbench.shots.evidence.scores import Collisions

WORTH_LOOKING = 3.0  # sigmas of cross-entropy from which a likelihood is worked out
OWN_BONUS = 1e-6  # nats that break exact ties in favour of a run's own place
NOWHERE = -1
_NEVER = -1e12


@dataclass(frozen=True, slots=True, eq=False)
class Fit:
    """How runs fit one circuit each; everything (runs,).

    Args:
        mixed, best: nats over the floor; -inf and 0 where it is no candidate.
        sure: whether data of a foreign circuit could not look like it.
    """

    mixed: FloatArray
    best: FloatArray
    sure: BoolArray


def sampled_fit(
    lane: Lane, p: FloatArray, inverse_floor: FloatArray, found: Collisions, overlap: float, tests: int = 1
) -> Fit:
    """How runs of a lane fit a sampled circuit.

    Args:
        lane: the runs. p: (2**n,) ideal probabilities. inverse_floor: (2**n,) 1 / g. found: coincidences of the runs.
        overlap: spread of D sum p p' - 1 over pairs of different circuits. tests: candidates in all.
    """
    from scipy.stats import norm

    index, counts, starts = lane.index, lane.counts, lane.starts
    ratio = p[index] * inverse_floor[index]
    v = float(np.square(p, dtype=np.float64) @ inverse_floor) - 1
    runs = len(starts)
    mixed, best, sure = np.full(runs, -np.inf), np.zeros(runs), np.zeros(runs, dtype=np.bool_)
    if v < scores.LEAST_EXCESS:
        return Fit(mixed, best, sure)
    cross = scores.crossed(ratio, counts, starts, np.full(runs, v))
    self_fidelity = np.clip((found.excess + found.error) / v, 0, 1)
    z = cross.mean / np.sqrt(v / lane.shots + self_fidelity * overlap**2)
    look = np.flatnonzero(cross.mean > WORTH_LOOKING * np.sqrt(v / lane.shots))
    if not len(look):
        return Fit(mixed, best, sure)
    picked, sub_starts = entries(starts, len(index), look)
    likelihood = scores.log_likelihoods(ratio[picked], counts[picked], sub_starts)
    best[look] = scores.best(likelihood)
    can = orphans.consistent(found, cross)
    mixed[look] = np.where(can[look], scores.mixture(likelihood), -np.inf)
    sure = (z > norm.isf(ALPHA / tests)) & orphans.consistent(found, cross, orphans.CLAIMED_SHARE)
    return Fit(mixed, best, sure)


def returned_fit(lane: Lane, target: int) -> Fit:
    """How runs of a lane fit a circuit that should return a string."""
    counts, starts = lane.counts, lane.starts
    distance = np.bitwise_count(lane.index ^ target).astype(np.int64)
    likelihood = scores.returned_log_likelihoods(distance, counts, starts, lane.n_bits)
    if lane.bias.any():  # that was over the uniform floor; the lane's own is another
        likelihood += np.add.reduceat(counts * np.log(lane.inverse_floor_at(lane.bias) / 2.0**lane.n_bits), starts)[
            :, None
        ]
    at_target, most = at_mode(distance, counts, starts)
    chance = [orphans.product_chance(case.index, case.counts, case.n_bits, target) for case in lane.cases]
    found = lane.collisions()
    shells = orphans.shell_excess(
        scores.by_distance(distance, counts, starts, lane.n_bits) / lane.shots[:, None], lane.n_bits
    )
    can = orphans.is_mode(at_target, most) & orphans.stands_out(at_target, np.array(chance) * lane.shots)
    can &= shells >= orphans.CLAIMED_SHARE * (found.excess - orphans.ONE_SIDED * found.error)
    return Fit(np.where(can, scores.mixture(likelihood), -np.inf), scores.best(likelihood), can)


def at_mode(distance: IntArray, counts: IntArray, starts: IntArray) -> tuple[FloatArray, FloatArray]:
    """(runs,) shots at distance 0, and at the commonest outcome."""
    at_target = np.add.reduceat(np.where(distance == 0, counts, 0), starts)
    return at_target.astype(np.float64), np.maximum.reduceat(counts, starts).astype(np.float64)


def overlap_spread(samples: FloatArray, n_bits: int) -> float:
    """Spread of D sum p p' - 1 over pairs of different circuits, its tails included; at least 2^(-n/2).

    Args:
        samples: (circuits, k) D p at the same k outcomes drawn evenly, or at all of them.
    """
    least: float = 2.0 ** (-n_bits / 2)
    circuits, k = samples.shape
    gram = (samples - 1) @ (samples - 1).T / k
    if circuits < 3:  # too few to see; it is larger where the distributions are less even
        return least * max(1.0, float(np.diagonal(gram).mean()))
    pairs = gram[np.triu_indices(circuits, 1)]
    # of what a sample of the outcomes leaves uncertain
    noise = float(np.median(np.diagonal(gram))) / math.sqrt(k) if k < 2**n_bits else 0.0
    spread = max(float(pairs.std()), float(np.quantile(np.abs(pairs), 0.95)) / 1.96)
    return max(math.sqrt(max(spread**2 - noise**2, 0.0)), least)


def assign(value: FloatArray, own: FloatArray) -> IntArray:
    """(runs,) the place each run goes to so that the total is greatest; NOWHERE where no place fits.

    Args:
        value: (runs, places) nats of each run in each place, the first places those of the runs themselves; -inf:
            cannot be.
        own: (runs,) nats in its own place, at least 0.
    """
    from scipy.optimize import linear_sum_assignment

    runs, places = value.shape
    table = np.where(np.isfinite(value), value, _NEVER)
    table[np.arange(runs), np.arange(runs)] = own + OWN_BONUS
    table = np.concatenate([table, np.zeros((runs, runs))], axis=1)
    _, column = linear_sum_assignment(table, maximize=True)
    return np.where(column < places, column, NOWHERE)


@dataclass(frozen=True, slots=True)
class Move:
    """Runs that belong elsewhere, in the order in which each takes the place of the next. closed: a cycle.

    gain, limit: nats.
    """

    runs: tuple[int, ...]
    places: tuple[int, ...]
    closed: bool
    gain: float
    limit: float


def moves(
    goes: IntArray, value: FloatArray, own: FloatArray, circuits: int, most: FloatArray | None = None
) -> list[Move]:
    """The cycles and chains of an assignment that gain enough.

    Args:
        most: (places,) the most nats a move there can be credited with: n ln 2 where a string of something else is the
            target by chance once in 2^n.
        goes: (runs,) from `assign`. value, own: as there. circuits: candidates that each run was compared with.
    """
    runs = len(goes)
    moved = {run: int(goes[run]) for run in range(runs) if goes[run] not in (run, NOWHERE)}
    taken = set(moved.values())
    found = []
    starts = [run for run in moved if run not in taken] + list(moved)
    seen: set[int] = set()
    for start in starts:
        if start in seen:
            continue
        chain, here = [], start
        while here in moved and here not in seen:
            seen.add(here)
            chain.append(here)
            here = moved[here]
        closed = here == start
        gains = [(value[run, moved[run]] - own[run], math.inf if most is None else most[moved[run]]) for run in chain]
        gain = float(sum(min(pair) for pair in gains))
        m = len(chain)
        if closed:
            limit = m * math.log(runs) - math.log(m) + math.log(1 / ALPHA)
        else:
            limit = m * math.log(runs * circuits) + math.log(1 / ALPHA)
        if gain > limit:
            found.append(Move(tuple(chain), tuple(moved[run] for run in chain), closed, gain, limit))
    return found


def exchanged_with_reference(as_filed: Sequence[FloatArray], crosswise: Sequence[FloatArray]) -> float:
    """Nats by which an echo and its butterfly fit better exchanged, one fidelity for both: the reference gives it.

    Args:
        as_filed: log-likelihoods of the reference's and the butterfly's shots under their own circuits, each
            (hypotheses,).
        crosswise: (len(FIDELITIES),) each, the reference's shots under the butterfly's circuit and the other way round.
    """
    alone = sum(float(scores.best(one)) for one in as_filed)
    return float(scores.mixture(crosswise[0] + crosswise[1])) - alone

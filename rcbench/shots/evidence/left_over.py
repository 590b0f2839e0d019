"""What nothing explains: runs of another kit, orphans, and runs of which nothing can be told."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence

import numpy as np

from rcbench.arrays import BoolArray, IntArray
from rcbench.shots.evidence import wording
from rcbench.shots.evidence.finding import ALPHA, Finding
from rcbench.shots.evidence.seed import other_kit
from rcbench.shots.evidence.studies import LaneStudy
from rcbench.shots.shots import RunKey

LEAST_TOLD = 0.01  # v of a circuit below this: no number of shots one could ask for


def left_over(studies: Sequence[LaneStudy], runs_in_all: int, twice: set[RunKey]) -> list[Finding]:
    """Another kit, orphans, and what cannot be told; twice: runs whose shots are known to count twice."""
    findings: list[Finding] = []
    alone = []
    for study in studies:
        found = None
        places = np.flatnonzero(study.own.known)
        if len(places):
            explained = _explained(study)
            size = 2.0**study.lane.n_bits - 1
            v = np.where(study.own.cross.excess > 0.01, study.own.cross.excess, size)
            square = study.own.collided.excess / v
            own = study.own
            found = other_kit(
                own.structure[places], own.unexplained[places], square[places], explained[places], own.orphan[places]
            )
        if found is not None:
            findings.append(wording.of_another_kit(study.lane, found))
            continue
        alone.append(study)
    for study in alone:
        orphans = [p for p in study.doubtful if study.own.orphan[p] and study.lane.cases[p].key not in twice]
        if orphans:
            findings.append(wording.orphans(study.lane, study.own, orphans, runs_in_all))
        findings += _cannot_tell(study, runs_in_all)
    return findings


def _explained(study: LaneStudy) -> BoolArray:
    moved = [case.key in study.explained for case in study.lane.cases]
    return study.own.confirmed | np.array(moved, dtype=np.bool_)


def _cannot_tell(study: LaneStudy, runs_in_all: int) -> list[Finding]:
    """By depth, the runs of which nothing can be said, and what would tell."""
    by_depth: dict[int, list[int]] = defaultdict(list)
    for place in study.doubtful:
        if not study.own.orphan[place]:
            by_depth[study.lane.cases[place].row.depth].append(place)
    of_depth = np.array([case.row.depth for case in study.lane.cases])
    out = []
    for depth, places in sorted(by_depth.items()):
        alike = np.flatnonzero((of_depth == depth) & study.own.known)
        out.append(wording.cannot_tell(study.lane, places, shots_that_tell(study, places, alike, runs_in_all)))
    return out


def shots_that_tell(
    study: LaneStudy, places: Sequence[int], alike: IntArray, runs_in_all: int
) -> tuple[int | None, bool]:
    """Shots a circuit with which nine of ten such runs would be told; whether that is only a bound from below.

    None where no number would: the ideal outcome is the floor. For sampled circuits M = v ((z_a + z_b) / (F v))^2,
    with F the mean over the runs of that depth; where it is not clear of 0, its upper limit, and the answer is a bound.

    Args:
        places: the runs in question. alike: all runs of their depth.
    """
    own, lane = study.own, study.lane
    nats = math.log(runs_in_all / ALPHA) + math.log(10)  # ten fidelities were tried, about
    if lane.returns:
        found = float(own.best[alike].sum()) / float(lane.shots[alike].sum())
        return (math.ceil(1.5 * nats / found), False) if found > 0 else (int(10 * lane.shots[alike].max()), True)
    usable = alike[own.cross.excess[alike] > LEAST_TOLD]
    asked = own.cross.excess[list(places)]
    if not len(usable) or asked.max() < LEAST_TOLD:
        return None, False
    weight = np.square(own.cross.excess[usable] / own.cross.error[usable])
    mean, error = float(own.cross.fidelity[usable] @ weight / weight.sum()), float(weight.sum()) ** -0.5
    bound = mean < 2 * error
    fidelity = min(max(mean + 1.645 * error if bound else mean, 1e-4), 1.0)
    v = float(np.median(asked[asked > LEAST_TOLD]))
    return math.ceil(((math.sqrt(2 * nats) + 1.28) / fidelity) ** 2 / v), bound

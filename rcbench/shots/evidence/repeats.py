"""Shots that come twice, and change from shot to shot or batch to batch: the findings of `blocks` and `drift`."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.shots.evidence import blocks, drift, wording
from rcbench.shots.evidence.cases import Case, Ideals, make_lanes
from rcbench.shots.evidence.finding import ALPHA, Finding
from rcbench.shots.evidence.series import Series
from rcbench.shots.shots import RunKey, Shots

if TYPE_CHECKING:
    from rcbench.shots.evidence.studies import LaneStudy


def same_shots(cases: Sequence[Case], series: Series) -> list[Finding]:
    """Equal tables of counts of two runs, and blocks of shots that come again."""
    found = []
    by_size: dict[int, list[Case]] = defaultdict(list)
    for case in cases:
        by_size[case.n_bits].append(case)
    for members in by_size.values():
        limit = blocks.tables_limit(len(members))
        whole = set()
        for a, b, nats in blocks.same_tables([(case.index, case.counts) for case in members]):
            whole.add(frozenset((members[a].key, members[b].key)))
            found.append(wording.same_counts(members[a], members[b], nats, limit))
        ordered = [case for case in members if in_order(series.index.get(case.key))]
        for block in blocks.repeated_blocks([series.index[case.key] for case in ordered]):
            one, two = ordered[block.run], ordered[block.again]
            if frozenset((one.key, two.key)) not in whole:
                found.append(wording.same_block(one, two, block))
    return found


def in_order(index: IntArray | None) -> bool:
    """Whether shots came in the order they were taken, as far as can be seen: not sorted by outcome."""
    if index is None or len(index) < drift.PARTS:
        return False
    changes = int(np.count_nonzero(np.diff(index)))
    different = len(np.unique(index))
    return different == len(index) or changes >= different or different == 1


def drifting(
    cases: Sequence[Case], studies: Sequence[LaneStudy], ideals: Ideals, series: Series, shots: Shots
) -> list[Finding]:
    """Runs that change while they last, and circuits that score differently from batch to batch."""
    from scipy.stats import norm

    lanes = [[case for case in lane if in_order(series.index.get(case.key))] for lane in make_lanes(cases)]
    lanes = [lane for lane in lanes if lane]
    explained = {
        case.key
        for study in studies
        for place, case in enumerate(study.lane.cases)
        if study.own.confirmed[place] and case.key not in study.orders
    }
    tests = sum((len(lane) + 1) * (lane[0].n_bits + 1) for lane in lanes)
    found = []
    for lane in lanes:
        limit = float(norm.isf(ALPHA / tests))
        found += _within(lane, [series.index[case.key] for case in lane], explained, ideals, limit)
    groups = [study for study in studies if study.own.known.any()]
    for study in groups:
        found += _between(study, shots, float(norm.isf(ALPHA / len(groups))))
    return found


def _within(
    lane: Sequence[Case], index: Sequence[IntArray], explained: set[RunKey], ideals: Ideals, limit: float
) -> list[Finding]:
    n = lane[0].n_bits
    names = [f"bit {bit}" for bit in range(n)] + ["the match with the circuit"]
    changes = drift.change_of_bits(index, n)
    scored = [
        _scores(case, one, ideals) if case.key in explained else np.zeros(0)
        for case, one in zip(lane, index, strict=True)
    ]
    changes.append(drift.change_of_values(scored))
    by_run = np.array([change.sigmas_by_run() for change in changes])  # (bits + 1, runs)
    alone = np.flatnonzero(by_run.max(axis=0) > limit)
    found = []
    if 0 < len(alone) <= max(1, len(lane) // 2):
        for run in alone.tolist():
            what = int(np.argmax(by_run[:, run]))
            found.append(wording.changes_within([lane[run]], names[what], float(by_run[what, run]), limit, None))
        rest = [run for run in range(len(lane)) if run not in alone]
        changes = [drift.Change(c.chi2[rest], c.dof[rest], c.first, c.last) for c in changes]
        lane = [lane[run] for run in rest]
    strongest = max(range(len(changes)), key=lambda what: changes[what].sigmas())
    if lane and changes[strongest].sigmas() > limit:
        change = changes[strongest]
        ends = (change.first, change.last)
        found.append(wording.changes_within(list(lane), names[strongest], change.sigmas(), limit, ends))
    return found


def _scores(case: Case, index: IntArray, ideals: Ideals) -> FloatArray:
    """(shots,) how well each shot fits the circuit, tamed so that no single shot decides."""
    if case.target is not None:
        return np.asarray((-0.5) ** np.bitwise_count(index ^ case.target).astype(np.float64))
    p = ideals.get(case.row)
    if p is None:
        return np.zeros(0)
    return np.log1p(0.2 * (p[index].astype(np.float64) * len(p) - 1))


def _between(study: LaneStudy, shots: Shots, limit: float) -> list[Finding]:
    """Circuits of a lane that were run in several batches."""
    lane, own = study.lane, study.own
    circuit, batch, value, error = [], [], [], []
    for place, case in enumerate(lane.cases):
        if not own.confirmed[place] or case.key in study.explained:
            continue
        labels = shots.batches.get(case.key, (str(case.row.batch),))
        if len(labels) != 1:
            continue
        one = _returned_score(case) if case.target is not None else _sampled_score(study, place)
        circuit.append(case.base)
        batch.append(labels[0])
        value.append(one[0])
        error.append(one[1])
    found = drift.between_batches(circuit, batch, np.array(value), np.array(error)) if circuit else None
    if found is None or found.sigmas <= limit:
        return []
    again = [case for case in lane.cases if circuit.count(case.base) > 1]
    return [wording.changes_between(again, found, limit)]


def _sampled_score(study: LaneStudy, place: int) -> tuple[float, float]:
    v = float(study.own.cross.excess[place])
    return float(study.own.cross.mean[place]) / v, float(study.own.cross.error[place]) / v


def _returned_score(case: Case) -> tuple[float, float]:
    from rcbench.estimators.echo import polarization_weights

    assert case.target is not None
    w = polarization_weights(case.n_bits)[np.bitwise_count(case.index ^ case.target)]
    shots = case.shots
    mean = float(w @ case.counts) / shots
    spread = float(((w - mean) ** 2) @ case.counts) / shots
    return mean, max((spread / shots) ** 0.5, 1.0 / (shots + 1))

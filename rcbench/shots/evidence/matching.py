"""Which circuit doubtful runs are of: the candidates in turn, then the assignment, then what is told."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.randomness import Draw
from rcbench.shots.evidence import identity, wording
from rcbench.shots.evidence.cases import Case, Ideals, Lane, drop_bits, place_of, target_index
from rcbench.shots.evidence.finding import ALPHA, Finding
from rcbench.shots.evidence.identity import NOWHERE, Fit
from rcbench.shots.shots import RunKey, Shots

if TYPE_CHECKING:
    from rcbench.kit import Kit, RosterRow
    from rcbench.shots.evidence.studies import LaneStudy

ENSEMBLE = 12  # circuits of one depth that their overlap is worked out from
SAMPLED_OUTCOMES = 2**14  # and outcomes, where there are more
BATCH, BATCH_SHARE = 6, 2 / 3  # runs that make a shuffled batch, and their share of those that seem to be elsewhere
ALIKE = 1e-3  # nats: circuits with the same ideal outcomes


@dataclass(frozen=True, slots=True)
class Doubt:
    """A doubtful run: the study of its lane, and its place in it."""

    study: LaneStudy
    place: int

    @property
    def case(self) -> Case:
        """The run."""
        return self.study.lane.cases[self.place]


def match_circuits(
    kit: Kit,
    shots: Shots,
    studies: Sequence[LaneStudy],
    ideals: Ideals,
    runs_in_all: int,
    step: Callable[[int, int, str], None],
) -> list[Finding]:
    """Runs that are of another circuit than they are filed under; marks them as explained."""
    circuits = _circuits(kit.rows)
    findings: list[Finding] = []
    groups: dict[tuple[int, tuple[int, ...]], list[LaneStudy]] = defaultdict(list)
    for study in studies:
        groups[study.lane.n_bits + len(study.lane.dropped), study.lane.dropped].append(study)
    for (n_bits, dropped), members in groups.items():
        candidates = [row for row in circuits if len(row.measured_qubits) == n_bits]
        doubts = [Doubt(study, place) for study in members for place in study.doubtful]
        doubts += _nearer_to_siblings(members, candidates, ideals, runs_in_all)
        if not doubts:
            continue
        fits = _all_fits(doubts, candidates, ideals, dropped, step)
        empty = [
            (row, (row.circuit_id, row.repeat))
            for row in kit.rows
            if len(row.measured_qubits) == n_bits and (row.circuit_id, row.repeat) not in shots.returned
        ]
        findings += _Assignment(doubts, candidates, fits, empty).told()
    return findings


def _circuits(rows: Iterable[RosterRow]) -> list[RosterRow]:
    """The different circuits, those of an instance together."""
    found: dict[str, RosterRow] = {}
    for row in rows:
        found.setdefault(row.base_id, row)
    return sorted(found.values(), key=place_of)


def _fit(
    lane: Lane, row: RosterRow, ideals: Ideals, inverse: FloatArray | None, overlap: float, tests: int
) -> Fit | None:
    """How runs of a lane fit a circuit, None where nothing is known of it."""
    target = target_index(row.target)
    if target is not None:
        n_bits = lane.n_bits + len(lane.dropped)
        return identity.returned_fit(lane, int(drop_bits(np.array([target]), n_bits, lane.dropped)[0]))
    p = ideals.get(row, lane.dropped) if inverse is not None else None
    if p is None or inverse is None:
        return None
    return identity.sampled_fit(lane, p, inverse, lane.collisions(), overlap, tests)


def _inverse(lane: Lane) -> FloatArray | None:
    return lane.inverse_floor() if lane.n_bits <= 20 else None


def _nearer_to_siblings(
    studies: Sequence[LaneStudy], candidates: Sequence[RosterRow], ideals: Ideals, runs_in_all: int
) -> list[Doubt]:
    """Explained runs that another circuit of their instance explains better: other depths, roles or settings."""
    family: dict[tuple[str, int], list[RosterRow]] = defaultdict(list)
    for row in candidates:
        family[row.experiment, row.instance].append(row)
    found = []
    for study in studies:
        if study.lane.returns and len({case.target for case in study.lane.cases}) == 1:
            continue  # all the same: nothing to tell apart
        inverse = _inverse(study.lane)
        by_instance: dict[tuple[str, int], list[int]] = defaultdict(list)
        for place in np.flatnonzero(study.own.confirmed).tolist():
            row = study.lane.cases[place].row
            by_instance[row.experiment, row.instance].append(place)
        for key, places in by_instance.items():
            lane, own = study.lane.some(places), study.own.best[places]
            limit = math.log(runs_in_all * max(len(family[key]), 1) / ALPHA)
            better = np.zeros(len(places), dtype=np.bool_)
            for row in family[key]:
                fit = _fit(lane, row, ideals, inverse, 0.0, runs_in_all)
                if fit is not None:
                    other = np.array([case.base != row.base_id for case in lane.cases])
                    better |= other & (fit.mixed - own > limit)
            found += [Doubt(study, places[at]) for at in np.flatnonzero(better).tolist()]
    return found


def _all_fits(
    doubts: Sequence[Doubt],
    candidates: Sequence[RosterRow],
    ideals: Ideals,
    dropped: tuple[int, ...],
    step: Callable[[int, int, str], None],
) -> Fit:
    """(doubts, candidates) nats of every doubtful run under every circuit."""
    by_study: dict[int, list[int]] = defaultdict(list)
    for at, doubt in enumerate(doubts):
        by_study[id(doubt.study)].append(at)
    lanes = [
        (where, doubts[where[0]].study.lane.some([doubts[at].place for at in where])) for where in by_study.values()
    ]
    inverses = [_inverse(lane) for _, lane in lanes]
    overlaps = _overlaps(candidates, ideals, dropped)
    shape = (len(doubts), len(candidates))
    mixed, best, sure = np.full(shape, -np.inf), np.zeros(shape), np.zeros(shape, dtype=np.bool_)
    for column, row in enumerate(candidates):
        step(column, len(candidates), "all against all")
        for (where, lane), inverse in zip(lanes, inverses, strict=True):
            overlap = overlaps.get((row.experiment, row.depth), 0.0)
            fit = _fit(lane, row, ideals, inverse, overlap, len(doubts) * len(candidates))
            if fit is not None:
                mixed[where, column], best[where, column], sure[where, column] = fit.mixed, fit.best, fit.sure
    return Fit(mixed, best, sure)


def _overlaps(
    candidates: Sequence[RosterRow], ideals: Ideals, dropped: tuple[int, ...]
) -> dict[tuple[str, int], float]:
    """Spread of the overlap of ideal distributions, by experiment and depth."""
    ensembles: dict[tuple[str, int], list[FloatArray]] = defaultdict(list)
    n_bits = 0
    picked: IntArray | None = None
    for row in candidates:
        key = row.experiment, row.depth
        if row.target or len(ensembles[key]) >= ENSEMBLE:
            continue
        p = ideals.get(row, dropped)
        if p is None:
            continue
        if picked is None:
            n_bits = len(p).bit_length() - 1
            picked = np.arange(len(p))
            if len(p) > SAMPLED_OUTCOMES:
                picked = Draw(0, "overlap", n_bits).integers(len(p), SAMPLED_OUTCOMES)
        ensembles[key].append(p[picked].astype(np.float64) * len(p))
    return {key: identity.overlap_spread(np.array(found), n_bits) for key, found in ensembles.items() if found}


class _Assignment:
    """Doubtful runs and the places they could go to."""

    def __init__(
        self,
        doubts: Sequence[Doubt],
        candidates: Sequence[RosterRow],
        fits: Fit,
        empty: Sequence[tuple[RosterRow, RunKey]],
    ) -> None:
        self.doubts, self.candidates, self.fits = doubts, candidates, fits
        self.column = {row.base_id: column for column, row in enumerate(candidates)}
        self.own = np.array([max(float(d.study.own.best[d.place]), 0.0) for d in doubts])
        n_bits = doubts[0].study.lane.n_bits
        self.most = np.array([n_bits * math.log(2) if row.target else math.inf for row in candidates])
        self.slots = [d.case.key for d in doubts] + [key for _, key in empty]
        self.circuit_of_slot = [self.column[d.case.base] for d in doubts] + [
            self.column[row.base_id] for row, _ in empty
        ]

    def told(self) -> list[Finding]:
        """Exchanges and chains, then runs of a circuit whose place another run holds."""
        value = self.fits.mixed[:, self.circuit_of_slot]
        goes = identity.assign(value, self.own)
        most = self.most[self.circuit_of_slot]
        cycles = [m for m in identity.moves(goes, value, self.own, len(self.candidates), most) if m.closed]
        moved = {run: place for move in cycles for run, place in zip(move.runs, move.places, strict=True)}
        leave = {run: int(place) for run, place in enumerate(goes) if place not in (run, NOWHERE) and run not in moved}
        alone = {run: place for run, place in leave.items() if self._clear(run, self.circuit_of_slot[place])}
        settled, all_told = len(moved) + len(alone), len(moved) + len(leave)
        if settled >= max(BATCH, BATCH_SHARE * all_told):  # a shuffled batch: what is settled vouches for the rest
            alone = {run: place for run, place in leave.items() if self._stands_out(run, self.circuit_of_slot[place])}
        found = [wording.exchanged_runs(self._cases(m.runs), self._keys(m.places), m.gain, m.limit) for m in cycles]
        if alone:
            found.append(self._alone(alone, {**moved, **alone}))
        moved |= alone
        found += [copy for run in range(len(self.doubts)) if run not in moved and (copy := self._copy(run))]
        return found

    def _cases(self, runs: Iterable[int]) -> list[Case]:
        out = []
        for run in runs:
            self.doubts[run].study.explained.add(self.doubts[run].case.key)
            out.append(self.doubts[run].case)
        return out

    def _keys(self, places: Iterable[int]) -> list[RunKey]:
        return [self.slots[place] for place in places]

    def _alone(self, alone: Mapping[int, int], moved: Mapping[int, int]) -> Finding:
        """Runs that are clearly of another place each, and the runs that must leave these places with nowhere to go."""
        lead = sum(self._lead(run, self.circuit_of_slot[place]) for run, place in alone.items())
        limit = len(alone) * math.log(len(self.doubts) * len(self.candidates) / ALPHA)
        displaced = [place for place in alone.values() if place < len(self.doubts) and place not in moved]
        return wording.refiled(self._cases(alone), self._keys(alone.values()), self._keys(displaced), lead, limit)

    def _clear(self, run: int, column: int) -> bool:
        """Whether one circuit stands out for a run, and a foreign one could not look like it."""
        return bool(self.fits.sure[run, column]) and self._stands_out(run, column)

    def _stands_out(self, run: int, column: int) -> bool:
        """Whether one circuit leads for a run against its own and all others."""
        limit = math.log(len(self.doubts) * len(self.candidates) / ALPHA)
        return min(self._lead(run, column), float(self.most[column])) > limit

    def _lead(self, run: int, column: int) -> float:
        others = self.fits.best[run].copy()
        alike = np.abs(others - others[column]) < ALIKE  # circuits with the same outcomes do not compete
        alike[self.column[self.doubts[run].case.base]] = False
        others[alike] = 0.0
        return float(self.fits.mixed[run, column] - max(float(others.max()), self.own[run]))

    def _copy(self, run: int) -> Finding | None:
        """A run of a circuit that has its own shots already."""
        column = int(np.argmax(self.fits.mixed[run]))
        case = self.doubts[run].case
        if self.candidates[column].base_id == case.base or not self._clear(run, column):
            return None
        self._cases([run])
        limit = math.log(len(self.doubts) * len(self.candidates) / ALPHA)
        return wording.copied(case, self.candidates[column].circuit_id, self._lead(run, column), limit)

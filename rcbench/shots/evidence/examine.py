"""The examination: every question in turn, each with what the ones before have settled.

Stuck bits come first, since they are left out of what follows; then the order of bits, since nothing matches in a wrong
one; then which circuit a run is of; then what is left without an explanation. Repeated blocks and drift ask for
nothing of this. See `find_evidence`.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import BoolArray, IntArray
from rcbench.shots.evidence import exchange, repeats, wording
from rcbench.shots.evidence.bit_order import (
    Candidate,
    FoundOrder,
    Runs,
    best_told,
    candidate_orders,
    gains_by_run,
    with_ties,
)
from rcbench.shots.evidence.cases import (
    FEWEST_BITS,
    MAX_QUBITS,
    Case,
    Ideals,
    Lane,
    Probabilities,
    collect,
    lane_of,
    make_lanes,
)
from rcbench.shots.evidence.finding import ALPHA, Finding
from rcbench.shots.evidence.matching import match_circuits
from rcbench.shots.evidence.orders import Order
from rcbench.shots.evidence.own import Own, ideal_ones, own_evidence
from rcbench.shots.evidence.pools import CLEAR, POOL_SIZE, Pool, return_pool, sampled_pool
from rcbench.shots.evidence.seed import other_kit
from rcbench.shots.evidence.series import Series
from rcbench.shots.evidence.stuck import StuckBit, inverted_bits, stuck_bits
from rcbench.shots.evidence.wording import WrongOrder
from rcbench.shots.shots import RunKey, Shots

if TYPE_CHECKING:
    from rcbench.kit import Kit

Progress = Callable[[int, int, str], None]
MOSTLY = 0.5
LEAST_TOLD = 0.01  # v of a circuit below this: no number of shots one could ask for
MOST_ORDERS = 3  # different wrong orders in one lane
POOLED_STRUCTURE = 3.0  # sigmas of structure, all doubtful runs of a lane together, that make a search worth while


@dataclass(slots=True, eq=False)
class LaneStudy:
    """A lane and what has become known of it.

    Args:
        lane: its runs, bits in order as far as an order was found. own: against their own circuits.
        orders: the order found of each run that comes in another one. explained: runs that a circuit explains.
        searched: the orders that a search among some runs came to.
    """

    lane: Lane
    own: Own
    orders: dict[RunKey, Order] = field(default_factory=dict)
    explained: set[RunKey] = field(default_factory=set)
    searched: dict[tuple[tuple[int, ...], int], list[Candidate]] = field(default_factory=dict)

    @property
    def doubtful(self) -> list[int]:
        """Places of runs that nothing explains yet."""
        return [
            place
            for place in np.flatnonzero(self.own.doubtful).tolist()
            if self.lane.cases[place].key not in self.explained
        ]


def find_evidence(
    kit: Kit,
    shots: Shots,
    ideal: Probabilities,
    *,
    series: Series | None = None,
    max_qubits: int = MAX_QUBITS,
    progress: Progress | None = None,
) -> list[Finding]:
    """What the shots themselves say against the kit, worst first.

    Args:
        kit: the kit that was asked for. shots: what came back.
        ideal: circuit_id to (2**bits,) ideal probabilities over the measured bits, or None where they are not known.
        series: the shots in order and the files they came from, where they were read so; without it nothing is said
            about the order of shots, and files are named only where there is one.
        max_qubits: larger circuits are left out, and it is said so; those that return a string need no simulation.
        progress: called with (done, in all, what).

    Cost: the ideal circuits are simulated once (again where they do not fit cases.CACHE_BYTES); all else grows with the
    number of shots, and, for runs that their own circuit does not explain, with their number times that of the
    circuits.
    """
    step = progress or (lambda done, total, what: None)
    series = series or Series()
    cases, notes = collect(kit.rows, shots, max_qubits, series.files)
    ideals = Ideals(ideal, max_qubits)
    findings = [wording.not_examined(note) for note in notes]
    studies = []
    lanes = make_lanes(cases)
    for number, members in enumerate(lanes):
        step(number, len(lanes), members[0].row.experiment)
        lane, stuck = _without_stuck_bits(members, ideals, len(lanes))
        findings += [wording.stuck(members, bit, len(lanes)) for bit in stuck]
        if lane is None or lane.n_bits < FEWEST_BITS:
            continue
        studies.append(LaneStudy(lane, own_evidence(lane, ideals, len(cases))))
    twice = repeats.same_shots(cases, series)
    aside = {key for finding in twice for key in finding.runs}
    # the order of whole lanes, then runs that are misfiled, then the order of single runs: the simplest comes first
    orders = _all_orders(studies, ideals, len(cases), aside, [], whole=True)
    few = [study for study in studies if len(study.doubtful) <= MOSTLY * len(study.lane.cases)]
    findings += match_circuits(kit, shots, few, ideals, len(cases), step)
    left = len(orders)
    orders += _all_orders(studies, ideals, len(cases), aside, orders, whole=False)
    findings += wording.wrong_orders(orders)
    if len(few) < len(studies) or len(orders) > left:
        findings += match_circuits(kit, shots, studies, ideals, len(cases), step)
    settled = {key for finding in findings if finding.kind == "other-circuit" for key in finding.runs}
    findings += exchange.with_reference(cases, ideals, settled)
    findings += twice
    findings += _left_over(studies, len(cases), aside)
    findings += repeats.drifting(cases, studies, ideals, series, shots)
    findings += wording.refused(ideals.refused)
    return sorted(findings, key=lambda f: (not f.told, f.kind == "not-examined", f.kind == "drift"))


def _without_stuck_bits(members: Sequence[Case], ideals: Ideals, lanes: int) -> tuple[Lane | None, list[StuckBit]]:
    """A lane without the bits that keep one value in it, and these."""
    ones = np.array([case.ones() for case in members])
    shots = np.array([case.shots for case in members], dtype=np.float64)
    stuck = stuck_bits(ones, shots, ideal_ones(members, ideals), lanes)
    dropped = tuple(bit.bit for bit in stuck)
    if len(dropped) == members[0].n_bits:
        return None, stuck
    return lane_of(members, ideals, dropped), stuck


def make_pool(lane: Lane, places: Sequence[int], ideals: Ideals) -> tuple[Pool, list[int]] | None:
    """A pool of some runs of a lane, as many as fit, and their places; None where nothing can be said of any."""
    if lane.returns:
        return return_pool([lane.cases[place] for place in places]), list(places)
    held, probabilities = [], []
    for place in places[: max(1, POOL_SIZE >> lane.n_bits)]:
        p = ideals.get(lane.cases[place].row, lane.dropped)
        if p is not None:
            held.append(place)
            probabilities.append(p)
    if not held:
        return None
    cases = [lane.cases[place] for place in held]
    return sampled_pool(cases, probabilities, lane.inverse_floor(), lane.bias), held


def _all_orders(
    studies: Sequence[LaneStudy],
    ideals: Ideals,
    runs_in_all: int,
    aside: set[RunKey],
    before: Sequence[WrongOrder],
    *,
    whole: bool,
) -> list[WrongOrder]:
    """The wrong orders of all lanes; aside: runs whose shots are spoilt otherwise; whole: only those of whole lanes."""
    found: list[WrongOrder] = []
    known = list(dict.fromkeys(one.found.order for one in before))
    open_lanes = []
    for study in sorted(studies, key=lambda study: not study.lane.returns):  # strings that return tell most
        if study.lane.returns and len(studies) > 1:
            asked = _one_order(study, ideals, known, aside, whole)
            if asked is not None and asked.alike:  # another lane may settle what these strings leave open
                known.append(asked.order)
                study.searched.clear()
                open_lanes.append(study)
                continue
        found += _orders(study, ideals, runs_in_all, known, aside, whole)
        known = list(dict.fromkeys([*(one.found.order for one in found), *known]))
    for study in open_lanes:
        found += _orders(study, ideals, runs_in_all, known, aside, whole)
    return found


def _orders(
    study: LaneStudy, ideals: Ideals, runs_in_all: int, known: Sequence[Order], aside: set[RunKey], whole: bool
) -> list[WrongOrder]:
    """The wrong orders of a lane: found, and applied to what is examined further; known: those of other lanes."""
    wrong = []
    for _ in range(MOST_ORDERS):
        found = _one_order(study, ideals, known, aside, whole)
        takes = _who_takes(study, found.order, ideals) if found else []
        if found is None or not takes:
            break
        before = [study.lane.cases[place] for place in takes]
        for place in takes:
            study.lane.cases[place] = study.lane.cases[place].mended(found.order)
        over_all = _over_all_bits(found.order, study.lane.dropped)
        study.orders |= {case.key: over_all for case in before}
        study.own = own_evidence(study.lane, ideals, runs_in_all)
        wrong.append(WrongOrder(found, before, over_all, len(before) == len(study.lane.cases)))
    return wrong


def _one_order(
    study: LaneStudy, ideals: Ideals, known: Sequence[Order], aside: set[RunKey], whole: bool
) -> FoundOrder | None:
    own, lane = study.own, study.lane
    free = [key not in study.orders and key not in aside for key in (case.key for case in lane.cases)]
    doubtful = [place for place in study.doubtful if free[place]]
    if not doubtful:
        return None
    # those with most structure first: not all may fit into a pool
    doubtful.sort(key=lambda place: -float(own.structure[place]))
    rest = [place for place in np.flatnonzero(own.confirmed).tolist() if free[place]]
    made = make_pool(lane, doubtful + rest, ideals)
    asked = [at for at, place in enumerate(made[1]) if place in doubtful] if made else []
    if made is None or not asked:
        return None
    runs = Runs(made[0], asked)
    key = tuple(made[1]), len(asked)
    if key not in study.searched:
        strength = float(own.structure[doubtful].sum()) / math.sqrt(len(doubtful))
        thorough = lane.returns or strength > POOLED_STRUCTURE or bool(own.orphan[doubtful].any())
        candidates = inverted_bits(runs)
        if any(len(one.order.flipped) == 1 and runs.told(*one) for one in candidates):
            thorough = False  # the long search only where no simple answer is at hand
        candidates += candidate_orders(runs, _labels(lane), known=known, thorough=thorough)
        study.searched[key] = candidates
    found = best_told([runs.told(*one, whole=whole) for one in study.searched[key]])
    return with_ties(runs.doubtful, found) if found else None


def _labels(lane: Lane) -> list[str]:
    row = lane.cases[0].row
    if not row.physical_qubits:
        return []
    labels = [row.physical_qubits[qubit] for qubit in row.measured_qubits]
    return [label for bit, label in enumerate(labels) if bit not in lane.dropped]


def _over_all_bits(order: Order, dropped: Sequence[int]) -> Order:
    """An order of the bits that were kept as one of all bits."""
    if not dropped:
        return order
    kept = [bit for bit in range(len(order.source) + len(dropped)) if bit not in dropped]
    source = list(range(len(kept) + len(dropped)))
    for bit, place in enumerate(order.source):
        source[kept[bit]] = kept[place]
    return Order(order.name, tuple(source), tuple(kept[bit] for bit in order.flipped))


def _who_takes(study: LaneStudy, order: Order, ideals: Ideals) -> list[int]:
    """Places of the runs that come in an order: those that prefer it, and the undecided where nearly all others do."""
    lane, size = study.lane, max(1, POOL_SIZE >> study.lane.n_bits)
    open_places = [p for p, case in enumerate(lane.cases) if case.key not in study.orders and study.own.known[p]]
    gain = np.full(len(lane.cases), -np.inf)
    loss = np.full(len(lane.cases), -np.inf)
    step = len(open_places) if lane.returns else size
    for start in range(0, len(open_places), max(step, 1)):
        part = open_places[start : start + step]
        made = make_pool(lane, part, ideals)
        if made is not None:
            pool, places = made
            gain[places], loss[places] = gains_by_run(pool, order)
    takes, keeps = gain > CLEAR, loss > CLEAR
    if takes.sum() >= 9 * keeps.sum():
        takes = takes | ((gain > -np.inf) & ~keeps)
    return np.flatnonzero(takes).tolist()


def _left_over(studies: Sequence[LaneStudy], runs_in_all: int, twice: set[RunKey]) -> list[Finding]:
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

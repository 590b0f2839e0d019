"""The order of bits of each lane: asked of all its runs, then of some, and applied to what is examined further."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from rcbench.shots.evidence.bit_order import (
    FoundOrder,
    Runs,
    best_told,
    candidate_orders,
    gains_by_run,
    with_ties,
)
from rcbench.shots.evidence.cases import Case, Ideals, Lane, refloored
from rcbench.shots.evidence.orders import Order, by_name
from rcbench.shots.evidence.own import own_evidence
from rcbench.shots.evidence.pools import CLEAR, POOL_SIZE, Pool
from rcbench.shots.evidence.return_pool import return_pool
from rcbench.shots.evidence.sampled_pool import sampled_pool
from rcbench.shots.evidence.stuck import inverted_bits
from rcbench.shots.evidence.studies import LaneStudy
from rcbench.shots.evidence.wording import WrongOrder
from rcbench.shots.shots import RunKey

MOST_ORDERS = 3  # different wrong orders in one lane
POOLED_STRUCTURE = 3.0  # sigmas of structure, all doubtful runs of a lane together, that make a search worth while


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
    return sampled_pool(cases, probabilities), held


def all_orders(
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
        study.lane = refloored(study.lane, ideals)
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


def taken_alike(
    studies: Sequence[LaneStudy], cases: Sequence[Case], wrong: Sequence[WrongOrder]
) -> dict[RunKey, Order]:
    """The order of runs that cannot show it, where all that can come in one and the same.

    Strings of equal bits look alike in many orders, and a few bits have no cross-entropy; what reads single bits still
    needs them in place. A general order goes to runs of the same measured qubits; one that is known by name to all.
    """
    known = {case.key: order for study in studies for case in study.lane.cases if (order := study.orders.get(case.key))}
    orders = set(known.values())
    names = {order.name for order in orders}
    able = [case.key for study in studies if not is_blind(study) for case in study.lane.cases]
    if not wrong or len(names) != 1 or ("" in names and len(orders) != 1) or any(key not in known for key in able):
        return {}
    name = next(iter(names))
    of_qubits = {case.row.measured_qubits: known[case.key] for case in cases if case.key in known}
    found = {}
    for case in cases:
        if case.key in known:
            continue
        order = of_qubits.get(case.row.measured_qubits) or by_name(name, case.n_bits)
        if order is not None and not order.is_identity:
            found[case.key] = order
    return found


def is_blind(study: LaneStudy) -> bool:
    """Whether no run of a lane could show another order."""
    return study.lane.returns and len({case.target for case in study.lane.cases}) == 1

"""Findings in words: what was found, where, how sure it is, and what mends it."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import NamedTuple

import numpy as np

from rcbench.shots.evidence.bit_order import FoundOrder
from rcbench.shots.evidence.blocks import Block
from rcbench.shots.evidence.cases import Case, Lane
from rcbench.shots.evidence.drift import Between
from rcbench.shots.evidence.finding import ALPHA, APPLY, NATS, Finding, Repair, some
from rcbench.shots.evidence.orders import Order, words
from rcbench.shots.evidence.own import Own
from rcbench.shots.evidence.seed import OtherKit
from rcbench.shots.evidence.stuck import StuckBit
from rcbench.shots.shots import RunKey

UNFILED = "unfiled-"  # before the id of a circuit, for shots that are of none


def named(cases: Sequence[Case]) -> str:
    """How many runs, and the first few."""
    ids = tuple(dict.fromkeys(case.key[0] for case in cases))
    return f"{len(ids)} circuit{'' if len(ids) == 1 else 's'} ({some(ids)})"


def files_of(cases: Sequence[Case]) -> tuple[str, ...]:
    """The files that runs came from, as far as known."""
    return tuple(dict.fromkeys(name for case in cases for name in case.files))


def keys_of(cases: Sequence[Case]) -> tuple[RunKey, ...]:
    """The runs."""
    return tuple(case.key for case in cases)


def not_examined(note: str) -> Finding:
    """What was left out."""
    return Finding(kind="not-examined", text=note, told=False)


def refused(circuits: Mapping[str, str]) -> list[Finding]:
    """Circuits that could not be simulated."""
    if not circuits:
        return []
    reason = next(iter(circuits.values()))
    return [not_examined(f"{len(circuits)} circuits ({some(tuple(circuits))}) that cannot be simulated ({reason})")]


def stuck(members: Sequence[Case], bit: StuckBit, lanes: int) -> Finding:
    """A bit with one value; lanes: how many were asked for such bits."""
    row = members[0].row
    qubit = row.measured_qubits[bit.bit]
    label = f", device qubit {row.physical_qubits[qubit]}" if row.physical_qubits else ""
    text = (
        f"bit {bit.bit} (qubit {qubit}{label}) reads {bit.value} in {1 - bit.moved:.1%} of the shots of "
        f"{row.experiment}, where the circuits set it to both"
    )
    return Finding(
        kind="stuck-bit",
        text=text,
        runs=keys_of(members),
        files=files_of(members),
        evidence=bit.nats,
        limit=math.log(2 * members[0].n_bits * lanes / ALPHA),
        measure=NATS,
        mend="send the shots again once the bit is read; or plan the experiment on qubits without this one",
    )


class WrongOrder(NamedTuple):
    """Runs of one lane whose bits come in another order. whole: over all bits; in_all: all runs of the lane."""

    found: FoundOrder
    cases: Sequence[Case]
    whole: Order
    in_all: bool


def wrong_orders(
    wrong: Sequence[WrongOrder], alike: Mapping[RunKey, Order], by_key: Mapping[RunKey, Case]
) -> list[Finding]:
    """Bits in another order, or inverted; one finding an order, wherever it was found.

    alike: the order of runs that cannot show it and are taken to be like the others. by_key: every run.
    """
    groups: dict[str, list[WrongOrder]] = {}
    for one in wrong:
        groups.setdefault(words(one.whole), []).append(one)
    found = [_wrong_order(members) for members in groups.values()]
    if not alike or len(found) != 1:
        return found
    [told] = found
    cases = [by_key[key] for key in alike]
    return [
        replace(
            told,
            text=f"{told.text}; {named(cases)} cannot show it and are taken to be alike",
            runs=(*told.runs, *alike),
            files=tuple(dict.fromkeys((*told.files, *files_of(cases)))),
            repair=Repair(orders={**told.repair.orders, **alike}),
        )
    ]


def _wrong_order(members: Sequence[WrongOrder]) -> Finding:
    order = members[0].whole
    cases = [case for member in members for case in member.cases]
    if order.flipped and order.source == tuple(range(len(order.source))):
        kind, what = "flipped-bits", f"{words(order)} in the shots of {named(cases)}"
    else:
        kind, what = "bit-order", f"the bits of {named(cases)} come in another order than declared: {words(order)}"
    alike = [member.found.alike for member in members]
    same = sorted(set(alike[0]).intersection(*alike[1:]))
    if same:
        pairs = ", ".join(f"{a} and {b}" for a, b in same[:3])
        more = f" and {len(same) - 3} more pairs" if len(same) > 3 else ""
        what += f"; exchanging bits {pairs}{more} fits as well, so these are not told apart"
    held_out = sum(member.found.held_out for member in members)
    what += f"; the half of the shots that had no part in the search agrees ({held_out:.0f} nats)"
    mend = APPLY
    if order.name == "reversed" and all(member.in_all for member in members):
        mend = f"if all shots are written so, state the other bit_order in shots.toml; or {APPLY}"
    return Finding(
        kind=kind,
        text=what,
        runs=keys_of(cases),
        files=files_of(cases),
        evidence=sum(member.found.gain for member in members),
        limit=sum(member.found.limit for member in members),
        measure=NATS,
        mend=mend,
        repair=Repair(orders={case.key: member.whole for member in members for case in member.cases}),
    )


def exchanged_runs(cases: Sequence[Case], places: Sequence[RunKey], gain: float, limit: float) -> Finding:
    """Runs that stand in each other's places."""
    moves = dict(zip(keys_of(cases), places, strict=True))
    if len(cases) == 2:
        text = f"the shots of {_run(cases[0].key)} and {_run(cases[1].key)} are exchanged"
    else:
        text = f"the shots of {len(cases)} circuits are filed under one another: {_listed(moves)}"
    return _misfiled(text, cases, moves, gain, limit)


def refiled(
    cases: Sequence[Case], places: Sequence[RunKey], displaced: Sequence[RunKey], gain: float, limit: float
) -> Finding:
    """Runs that are of another place each; displaced: runs that stand in these places and are of none."""
    moves = dict(zip(keys_of(cases), places, strict=True))
    if len(cases) == 1:
        text = f"the shots filed under {_run(cases[0].key)} are of {_run(places[0])}"
    else:
        text = f"the shots of {len(cases)} circuits are filed under other circuits: {_listed(moves)}"
    if displaced:
        there = some(tuple(map(_run, displaced)))
        text += f"; what is filed under {there} is of no circuit of this kit that can be told"
        moves |= {key: (UNFILED + key[0], key[1]) for key in displaced}
    return _misfiled(text, cases, moves, gain, limit)


def _listed(moves: Mapping[RunKey, RunKey]) -> str:
    shown = "; ".join(f"{_run(a)} holds {_run(b)}" for a, b in list(moves.items())[:3])
    return shown + (f" and {len(moves) - 3} more" if len(moves) > 3 else "")


def _misfiled(text: str, cases: Sequence[Case], moves: Mapping[RunKey, RunKey], gain: float, limit: float) -> Finding:
    there = [place for place in moves.values() if place not in moves and not place[0].startswith(UNFILED)]
    return Finding(
        kind="other-circuit",
        text=text,
        runs=(*moves, *there),
        files=files_of(cases),
        evidence=gain,
        limit=limit,
        measure=NATS,
        mend=APPLY,
        repair=Repair(moves=moves),
    )


def copied(case: Case, circuit_id: str, lead: float, limit: float) -> Finding:
    """A run of a circuit that has shots of its own."""
    return Finding(
        kind="other-circuit",
        text=f"the shots filed under {_run(case.key)} are of {circuit_id}, which has shots of its own too",
        runs=(case.key,),
        files=case.files,
        evidence=lead,
        limit=limit,
        measure=NATS,
        mend=f"send the shots of {case.key[0]} again, and leave these out",
    )


def exchanged(reference: Case, butterfly: Case, gain: float, limit: float) -> Finding:
    """A reference and a butterfly the other way round."""
    return Finding(
        kind="other-circuit",
        text=(
            f"the shots of {_run(reference.key)} and {_run(butterfly.key)} fit better exchanged: the echo without the "
            "butterfly returns less than the one with it"
        ),
        runs=(reference.key, butterfly.key),
        files=files_of([reference, butterfly]),
        evidence=gain,
        limit=limit,
        measure=NATS,
        mend=APPLY,
        repair=Repair(moves={reference.key: butterfly.key, butterfly.key: reference.key}),
    )


def orphans(lane: Lane, own: Own, places: Sequence[int], runs_in_all: int) -> Finding:
    """Runs with structure that nothing explains."""
    from scipy.stats import norm

    cases = [lane.cases[place] for place in places]
    strongest = max(places, key=lambda place: float(own.unexplained[place]))
    v = own.cross.excess[list(places)]
    too_many = (own.collided.excess - 3 * own.collided.error)[list(places)] > np.where(v > 0.01, v, np.inf)
    text = (
        f"{named(cases)} of {lane.cases[0].row.experiment} hold structure that neither their circuit nor another of "
        "this kit explains, in any bit order: shots of something else, a circuit that was compiled anew, or a coherent "
        "error"
    )
    if too_many.any():
        text += "; there are more coincidences than even a perfect device gives, so shots may count twice"
    return Finding(
        kind="orphan",
        text=text,
        runs=keys_of(cases),
        files=files_of(cases),
        evidence=float(own.unexplained[strongest]),
        limit=max(float(norm.isf(ALPHA / runs_in_all)), 3.0),
        mend="ask which circuits these shots are of, and whether they ran verbatim; leave them out until then",
    )


def of_another_kit(lane: Lane, found: OtherKit) -> Finding:
    """A whole experiment that matches nothing."""
    from rcbench.shots.evidence.seed import LEAST_SIGMAS

    text = (
        f"the shots of {lane.cases[0].row.experiment} hold structure (a self-fidelity of some "
        f"{found.self_fidelity:.2f}), and not one of {named(lane.cases)} matches a circuit of this kit, in any bit "
        "order: a kit of another seed, or circuits that were compiled anew"
    )
    return Finding(
        kind="other-kit",
        text=text,
        runs=keys_of(lane.cases),
        files=files_of(lane.cases),
        evidence=found.sigmas,
        limit=LEAST_SIGMAS,
        mend="check the shots with the kit that was run: its HANDOVER.md quotes the kit hash, execution.toml can too",
    )


def cannot_tell(lane: Lane, places: Sequence[int], needed: tuple[int | None, bool]) -> Finding:
    """Runs of one depth that cannot be told from noise; needed: shots that would tell, and whether that is a bound."""
    cases = [lane.cases[place] for place in places]
    row = cases[0].row
    shots = int(np.median([case.shots for case in cases]))
    text = f"{row.experiment} depth {row.depth}: whether {named(cases)} are what they should be, at {shots} shots each"
    count, bound = needed
    if count is None:
        text += "; the ideal outcome is the same as noise, so no number of shots tells"
    else:
        text += f"; {'more than ' if bound else 'about '}{_round(max(count, shots + 1))} shots a circuit would tell"
    return Finding(
        kind="identity", text=text, told=False, runs=keys_of(cases), files=files_of(cases), shots_needed=count
    )


def same_counts(one: Case, two: Case, nats: float, limit: float) -> Finding:
    """Two runs with the very same counts."""
    return Finding(
        kind="same-shots",
        text=f"{_run(one.key)} and {_run(two.key)} have the very same counts",
        runs=(one.key, two.key),
        files=files_of([one, two]),
        evidence=nats,
        limit=limit,
        measure=NATS,
        mend="find out which of the two the shots are of, and send those of the other",
    )


def same_block(one: Case, two: Case, block: Block) -> Finding:
    """Shots that come again in order."""
    last, again_last = block.first + block.length, block.again_first + block.length
    if one.key == two.key:
        text = f"shots {block.again_first + 1}-{again_last} of {_run(one.key)} are shots {block.first + 1}-{last} again"
    else:
        text = (
            f"shots {block.again_first + 1}-{again_last} of {_run(two.key)} are shots {block.first + 1}-{last} of "
            f"{_run(one.key)} again"
        )
    return Finding(
        kind="same-shots",
        text=text,
        runs=tuple(dict.fromkeys((one.key, two.key))),
        files=files_of([one, two]),
        evidence=block.nats,
        limit=math.log(1 / ALPHA),
        measure=NATS,
        mend="take the second copy out: it makes errors look smaller than they are",
    )


def changes_within(
    cases: Sequence[Case], what: str, sigmas: float, limit: float, ends: tuple[float, float] | None
) -> Finding:
    """Runs that change while they last."""
    text = f"{what} changes from the first to the last shot of {named(cases)}"
    if ends is not None and what.startswith("bit"):
        text += f": its share of ones goes from {ends[0]:.3f} to {ends[1]:.3f}"
    return Finding(
        kind="drift",
        text=text,
        runs=keys_of(cases),
        files=files_of(cases),
        evidence=sigmas,
        limit=limit,
        mend="look at the log of that time; where one run changes alone, its file may hold shots of two circuits",
    )


def changes_between(cases: Sequence[Case], found: Between, limit: float) -> Finding:
    """Circuits that score differently from batch to batch."""
    text = (
        f"the same circuits score differently from batch to batch: {named(cases)}, from {found.low[1]:+.3f} in batch "
        f"{found.low[0]} to {found.high[1]:+.3f} in batch {found.high[0]} around their mean"
    )
    return Finding(
        kind="drift",
        text=text,
        runs=keys_of(cases),
        files=files_of(cases),
        evidence=found.sigmas,
        limit=limit,
        mend="compare what stands in one batch; the uncertainties of the report do not hold this change",
    )


def _run(key: RunKey) -> str:
    return f"{key[0]} (repeat {key[1]})" if key[1] and not key[0].endswith(f"-r{key[1]}") else key[0]


def _round(count: int) -> str:
    """Two digits are enough of a number of shots."""
    digits = max(len(str(count)) - 2, 0)
    return f"{-(-count // 10**digits) * 10**digits:,}"

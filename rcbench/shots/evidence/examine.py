"""The examination: every question in turn, each with what the ones before have settled.

Stuck bits come first, since they are left out of what follows; then the order of bits, since nothing matches in a wrong
one; then which circuit a run is of; then what is left without an explanation. Repeated blocks and drift ask for
nothing of this. See `find_evidence`.

False alarms. The limits are set for finding.ALPHA = 1e-3 a kind and campaign. Measured on shots drawn by Cirq, with
tests/shots/fault_table.py (25 runs a set at 6 qubits, 8 at 12; 2000 shots each, F = 0.6, 0.2 and 0.05, readout flips
of 1 % and 3 %):

- 6 qubits: 0 of 75 clean sets with a finding, and 0 of 825 sets, clean or with one planted fault, with a wrong one;
- 12 qubits: 0 of 24 clean sets. Of 8 sets with two files exchanged at F = 0.05, one had a repair that was half right:
  it moved one run to its place, and the other to none. tests/shots/test_evidence_table.py makes the whole table;
- depolarising gates and amplitude damping, by Cirq's density matrices of 6 qubits, 300 to 50,000 shots: 0 of 48 sets.

What cannot show: runs that return the same string exchanged among themselves, and circuits with equal outcomes.
Foreign shots in one file need about 4 sqrt(2 D) / F^2 shots: 2000 are enough at F = 0.6, not at 0.2.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

import numpy as np

from rcbench.shots.evidence import exchange, repeats, wording
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
from rcbench.shots.evidence.finding import Finding
from rcbench.shots.evidence.left_over import left_over
from rcbench.shots.evidence.matching import match_circuits
from rcbench.shots.evidence.ordering import all_orders, taken_alike
from rcbench.shots.evidence.own import ideal_ones, own_evidence
from rcbench.shots.evidence.series import Series
from rcbench.shots.evidence.stuck import StuckBit, stuck_bits
from rcbench.shots.evidence.studies import LaneStudy
from rcbench.shots.shots import Shots

if TYPE_CHECKING:
    from rcbench.kit import Kit

Progress = Callable[[int, int, str], None]
MOSTLY = 0.5


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
    simulated = len({case.base for case in cases if case.target is None})
    ideals = Ideals(ideal, max_qubits, lambda done: step(min(done, simulated), simulated, "ideal circuits"))
    findings = [wording.not_examined(note) for note in notes]
    studies = []
    lanes = make_lanes(cases)
    for members in lanes:
        lane, stuck = _without_stuck_bits(members, ideals, len(lanes))
        findings += [wording.stuck(members, bit, len(lanes)) for bit in stuck]
        if lane is None or lane.n_bits < FEWEST_BITS:
            continue
        studies.append(LaneStudy(lane, own_evidence(lane, ideals, len(cases))))
    twice = repeats.same_shots(cases, series)
    aside = {key for finding in twice for key in finding.runs}
    # the order of whole lanes, then runs that are misfiled, then the order of single runs: the simplest comes first
    orders = all_orders(studies, ideals, len(cases), aside, [], whole=True)
    few = [study for study in studies if len(study.doubtful) <= MOSTLY * len(study.lane.cases)]
    findings += match_circuits(kit, shots, few, ideals, len(cases), step)
    left = len(orders)
    orders += all_orders(studies, ideals, len(cases), aside, orders, whole=False)
    findings += wording.wrong_orders(orders, taken_alike(studies, cases, orders), {case.key: case for case in cases})
    if len(few) < len(studies) or len(orders) > left:
        findings += match_circuits(kit, shots, studies, ideals, len(cases), step)
    settled = {key for finding in findings if finding.kind == "other-circuit" for key in finding.runs}
    findings += exchange.with_reference(cases, ideals, settled)
    findings += twice
    findings += left_over(studies, len(cases), aside)
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

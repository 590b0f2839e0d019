"""The bottom line: from which depth it has spread, up to which depth it is kept, and for what that is said.

The rule, fixed here and printed in every report (`RULE`): a report never calls a device scrambled because it agrees
with a model of its noise, and never calls information kept because an echo returned.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from rcbench.campaign import Experiment
from rcbench.report.curves import Curve, Crossing, compared_curve, crossing, mean_over_regions
from rcbench.report.printed import fixed, percent
from rcbench.report.source import Group, Source, groups
from rcbench.report.spreading import anticoncentration, reference_alive, scrambled_value, spread_margin

KEPT_ABOVE = 0.5
RULE = (
    "Spread is complete at the first depth at which the mean over (butterfly, probe) pairs of |OTOC - scrambled value|, "
    "each pair averaged over instances first, lies within the OTOC margin and does not leave it again, while every "
    "probe's reference echo stands more than five of its standard errors above zero. The scrambled value is "
    "-1/(4^n - 1). Where a control that cannot spread falls as well, spread is undecided.",
    "Without an OTOC, spread is read from the circuits: the first depth at which their ideal collision probability is "
    "within 10 % of the Porter-Thomas one, provided the cross-entropy fidelity shows that the device ran them. That "
    "is a weaker statement, about outcomes and not operators, and is marked as such.",
    "Kept ends where the collision-based self-fidelity first falls below the threshold p. Where collisions decide "
    "nothing, the cross-entropy fidelity bounds it from below. An echo alone never supports kept.",
    "Each interval holds the depths at which the confidence band of the curve meets the level, with straight lines "
    "between measured depths; ends are given as whole layers. What the data do not settle is called undecided.",
)
DISCLAIMER = (
    "Agreeing with the noise model means performing to budget. It is not evidence of scrambling: a device that only "
    "decoheres can agree with its noise model at every depth."
)
LIMITS = (
    "It shows what these circuits did on these qubits on these dates. It does not extend to other qubits, couplers, "
    "depths or days.",
    "A small OTOC or a uniform qubit is no evidence of spreading on its own: a decohered qubit looks the same. Only "
    "the spread and kept axes together say something.",
    "It tests the stated error budget, not causes. Where a row departs, the budget or the circuit is wrong; which "
    "one, and why, needs other measurements.",
    "Preparation and readout errors are in every number; readout correction is not applied unless a row says so.",
    "It is no acceptance decision. It defers to the laboratory's own acceptance procedure, its limits and its guard "
    "bands.",
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """What is said on one axis.

    status: complete, not-complete (spread); until, throughout, never, at-least (kept, faithful); undecided or
    not-measured. depth: whole layers, or None. crossing: unrounded. text: the clause. detail: what it rests on.
    """

    axis: str
    status: str
    text: str
    detail: str
    depth: int | None = None
    crossing: Crossing | None = None
    evidence: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class BottomLine:
    """The bottom line of one group of experiments."""

    group: Group
    spread: Line
    kept: Line
    faithful: Line
    window: str
    scope: str

    @property
    def sentence(self) -> str:
        """The statement in one sentence."""
        text = f"{self.spread.text}; {self.kept.text}."
        return text[0].upper() + text[1:]

    @property
    def lines(self) -> tuple[Line, ...]:
        """All three axes; a report always shows all three."""
        return self.spread, self.kept, self.faithful


def bottom_lines(source: Source, threshold: float = KEPT_ABOVE) -> list[BottomLine]:
    """One bottom line for each set of qubits and circuits; threshold: the p of `kept above p`."""
    found = []
    for group in groups(source):
        spread = _spread(source, group)
        kept, faithful = _kept(source, group, threshold), _faithful(source, group, threshold)
        found.append(
            BottomLine(
                group=group,
                spread=spread,
                kept=kept,
                faithful=faithful,
                window=_window(spread, kept, threshold),
                scope=_scope(source, group),
            )
        )
    return found


def _spread(source: Source, group: Group) -> Line:
    lines = [
        _spread_from_otoc(source, group, experiment)
        for experiment in group.experiments
        if not source.compared(experiment.name, "otoc")["measured"].dropna().empty
    ]
    if lines:  # several butterfly experiments: the one that spreads last counts
        order = {"complete": 0, "undecided": 1, "not-complete": 2}
        return max(lines, key=lambda line: (order[line.status], line.depth or 0))
    lines = [line for e in group.experiments if (line := _spread_from_collisions(source, e)) is not None]
    if lines:
        return lines[0]
    return Line(
        axis="spread",
        status="not-measured",
        text="spread not measured",
        detail="No OTOC and no output statistics of these circuits are in the data.",
    )


def _spread_from_otoc(source: Source, group: Group, experiment: Experiment) -> Line:
    target = scrambled_value(experiment.n_qubits)
    margin = spread_margin(source, experiment)
    full, from_scatter = mean_over_regions(source, experiment.name, "otoc", from_value=target)
    points = full.only([reference_alive(source, experiment.name, depth) for depth in full.depth])
    level = percent(source.campaign.confidence)
    kind = f"{level} interval over instances" if from_scatter else "shot noise only, these circuits only"
    what = f"{experiment.name}: mean |OTOC - scrambled value| over pairs, margin {margin:g}, {kind}"

    def line(status: str, text: str, detail: str, depth: int | None = None, at: Crossing | None = None) -> Line:
        return Line(
            axis="spread",
            status=status,
            text=text,
            detail=f"{what}. {detail}",
            depth=depth,
            crossing=at,
            evidence="otoc",
        )

    if len(points) == 0:
        return line("undecided", "spread undecided", "No depth has a reference echo that is still alive.")
    last = f"{points.value[-1]:.2f} [{points.low[-1]:.2f}, {points.high[-1]:.2f}] at depth {points.depth[-1]:g}"
    beyond = "" if len(points) == len(full) else f" The reference echo is not alive beyond depth {points.depth[-1]:g}."
    if points.low[-1] > margin:
        text = f"spread not complete by depth {points.depth[-1]:g}"
        return line("not-complete", text, f"It is still {last}.{beyond}")
    above = [at for at in range(len(points)) if points.low[at] > margin]
    at = crossing(points, margin, start=above[-1] if above else 0)
    if not math.isfinite(at.high) and at.high > 0:
        detail = f"It is {last}: the band does not fall inside the margin.{beyond} More instances or shots would settle it."
        return line("undecided", "spread undecided", detail)
    fallen = _fallen_controls(source, group, margin, at.high)
    if fallen:
        return line("undecided", "spread undecided", f"The control that cannot spread ({fallen}) fell as well.")
    depth = int(points.depth[0]) if at.value == -math.inf else math.ceil(at.value)
    text = f"spread complete by depth {depth} {_ends(at, points, level, up=True)}"
    return line("complete", text, f"It is {last}.{beyond}", depth, at)


def _fallen_controls(source: Source, group: Group, margin: float, depth: float) -> str:
    """The controls whose band does not exclude the margin once the experiment itself has crossed it."""
    fallen = []
    for family, experiments in group.controls.items():
        for experiment in experiments:
            target = scrambled_value(experiment.n_qubits)
            points, _ = mean_over_regions(source, experiment.name, "otoc", from_value=target)
            alive = [d >= depth and reference_alive(source, experiment.name, d) for d in points.depth]
            if any(points.only(alive).low <= margin):
                fallen.append(f"{family}, {experiment.name}")
    return "; ".join(fallen)


def _spread_from_collisions(source: Source, experiment: Experiment) -> Line | None:
    points = anticoncentration(source, experiment)
    if len(points) == 0:
        return None
    what = f"{experiment.name}: collision probability of the ideal circuits against Porter-Thomas, computed"
    at = crossing(points, 0.1)
    fidelity = source.compared(experiment.name, "xeb_fidelity")
    ran = fidelity[(fidelity["ci_low"] - fidelity["null_value"].fillna(0.0) > fidelity["margin"])]["depth"].dropna()
    settled = [float(depth) for depth in ran if depth >= at.high]

    def line(status: str, text: str, detail: str, depth: int | None = None) -> Line:
        return Line(
            axis="spread",
            status=status,
            text=text,
            detail=f"{what}. {detail}",
            depth=depth,
            crossing=at,
            evidence="collisions",
        )

    if at.high == math.inf:
        return line("undecided", "spread undecided", "The circuits do not reach Porter-Thomas within the depths tested.")
    if not settled:
        detail = "Where the circuits reach Porter-Thomas, no cross-entropy fidelity shows that the device ran them."
        return line("undecided", "spread undecided", detail)
    depth = int(points.depth[0]) if at.value == -math.inf else math.ceil(at.value)
    ends = _ends(at, points, percent(source.campaign.confidence), up=True)
    text = f"outcomes spread by depth {depth} {ends} (computed from the circuits; no OTOC was measured)"
    return line("complete", text, f"Cross-entropy fidelity excludes no signal at depth {min(settled):g}.", depth)


def _kept(source: Source, group: Group, threshold: float) -> Line:
    level = percent(source.campaign.confidence)
    for experiment in group.experiments:
        points = compared_curve(source, experiment.name, "self_fidelity")
        if len(points) == 0:
            continue
        line = _above("kept", points, threshold, level, f"{experiment.name}: collision-based self-fidelity")
        if line.status != "undecided":
            return line
    for experiment in group.experiments:
        points = compared_curve(source, experiment.name, "xeb_fidelity")
        if len(points) == 0:
            continue
        line = _above("kept", points, threshold, level, f"{experiment.name}: cross-entropy fidelity, a bound from below")
        if line.depth is not None and line.status in ("until", "throughout"):
            text = f"kept above {threshold:g} until at least depth {line.depth}"
            return Line(
                axis="kept",
                status="at-least",
                text=text,
                detail=line.detail,
                depth=line.depth,
                crossing=line.crossing,
                evidence="xeb_fidelity",
            )
        return Line(axis="kept", status="undecided", text=f"kept above {threshold:g} undecided", detail=line.detail)
    echoes = any("echo" in key or key == "polarization" for e in group.experiments for key in source.signatures(e.name))
    why = "Only echoes were measured, and an echo hides errors that reverse: it never supports kept alone."
    return Line(
        axis="kept",
        status="not-measured",
        text=f"kept above {threshold:g} undecided" if echoes else "kept not measured",
        detail=why if echoes else "No signature of the kept axis is in the data.",
    )


def _faithful(source: Source, group: Group, threshold: float) -> Line:
    level = percent(source.campaign.confidence)
    names = {
        "xeb_fidelity": "cross-entropy fidelity",
        "polarization": "effective polarization of an echo of twice the depth",
        "echo_return": "return of an echo of twice the depth",
    }
    for key, name in names.items():
        for experiment in group.experiments:
            points = compared_curve(source, experiment.name, key)
            if len(points):
                return _above("faithful", points, threshold, level, f"{experiment.name}: {name}")
    return Line(axis="faithful", status="not-measured", text="faithful not measured", detail="No fidelity was measured.")


def _above(axis: str, points: Curve, threshold: float, level: str, what: str) -> Line:
    """How long a falling curve stays above a threshold."""
    at = crossing(points, threshold)
    first, last = points.depth[0], points.depth[-1]
    ends = (
        f"{fixed(points.value[0], 2)} [{fixed(points.low[0], 2)}, {fixed(points.high[0], 2)}] at depth {first:g}, "
        f"{fixed(points.value[-1], 2)} [{fixed(points.low[-1], 2)}, {fixed(points.high[-1], 2)}] at depth {last:g}"
    )
    status, depth = "until", None
    if at.low == -math.inf and at.high == math.inf:
        status, text = "undecided", f"{axis} above {threshold:g} undecided"
    elif at.high == -math.inf:
        status, text = "never", f"{axis} above {threshold:g} at no depth tested"
    elif at.low == math.inf:
        status, depth, text = "throughout", int(last), f"{axis} above {threshold:g} at every depth tested, to {last:g}"
    elif at.value == -math.inf:
        text = f"{axis} above {threshold:g} until before depth {first:g} {_ends(at, points, level, up=False)}"
    else:
        depth = int(last) if at.value == math.inf else math.floor(at.value)
        text = f"{axis} above {threshold:g} until depth {depth} {_ends(at, points, level, up=False)}"
    return Line(
        axis=axis,
        status=status,
        text=text,
        detail=f"{what}, {level} interval: {ends}.",
        depth=depth,
        crossing=at,
        evidence=what,
    )


def _ends(at: Crossing, points: Curve, level: str, *, up: bool) -> str:
    """The interval of a crossing in whole layers; up: the first layer below the level, else the last above it."""
    rounded = math.ceil if up else math.floor
    first, last = points.depth[0], points.depth[-1]
    low = str(rounded(at.low)) if math.isfinite(at.low) else f"{'≤' if up else '<'} {first:g}"
    high = str(rounded(at.high)) if math.isfinite(at.high) else (f"> {last:g}" if at.high > 0 else f"≤ {first:g}")
    return f"[{level}: {low} to {high}]" if low != high else f"[{level}: {low}]"


def _window(spread: Line, kept: Line, threshold: float) -> str:
    """Whether some depth is both spread and kept, which is the question behind the campaign."""
    if spread.status == "not-complete" and kept.depth is not None:
        return f"No depth tested was seen to be both spread and kept above {threshold:g}."
    if spread.depth is None or spread.crossing is None or kept.crossing is None:
        return "Whether some depth is both spread and kept is undecided."
    if kept.status == "never":
        return f"No depth tested is both spread and kept above {threshold:g}."
    start, end = spread.depth, kept.depth if kept.depth is not None else -1
    sure_start, sure_end = spread.crossing.high, kept.crossing.low
    if sure_start <= sure_end:
        upper = str(end)
        return f"Both hold from depth {start} to {upper}, and at both ends' least favourable values." if end > start else (
            f"Both hold at depth {start}."
        )
    if spread.crossing.low > kept.crossing.high:
        return f"No depth does both: when spreading is complete, less than {threshold:g} is kept."
    return "Whether some depth is both spread and kept is undecided: the two intervals overlap."


def _scope(source: Source, group: Group) -> str:
    names = ", ".join(source.qubit_name(qubit) for qubit in group.qubits)
    depths = sorted({depth for experiment in group.experiments for depth in experiment.depths})
    device = source.campaign.device
    invented = ", an invented device" if device.invented else ""
    listed = f"{depths[0]} to {depths[-1]}" if len(depths) > 1 else str(depths[0])
    return (
        f"For qubits {names} of {device.name}{invented}; {group.circuits.gates} circuits; depths {listed} tested; "
        f"{dates(source)}."
    )


def dates(source: Source) -> str:
    """When the data were taken, as far as it was stated."""
    start = source.execution("started", "start", "first_shot", "start_time", "date")
    end = source.execution("ended", "finished", "end", "last_shot", "end_time")
    days = list(dict.fromkeys(text[:10] for text in (start, end) if text != "not stated"))
    return f"data taken {' to '.join(days)}" if days else "date of the data not stated"

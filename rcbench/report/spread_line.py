"""The spread axis of the bottom line: by OTOCs, or by output statistics where none was measured."""

from __future__ import annotations

import math

from rcbench.campaign import Experiment
from rcbench.report.axis_line import Line, ends, first_layer
from rcbench.report.curves import Crossing, crossing, mean_over_regions
from rcbench.report.printed import percent
from rcbench.report.source import Group, Source
from rcbench.report.spreading import anticoncentration, reference_alive, scrambled_value, spread_margin


def spread_line(source: Source, group: Group) -> Line:
    """From which depth a group has spread; of several butterfly experiments the one that spreads last counts."""
    lines = [
        _spread_from_otoc(source, group, experiment)
        for experiment in group.experiments
        if not source.compared(experiment.name, "otoc")["measured"].dropna().empty
    ]
    if lines:
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
    margin = spread_margin(experiment)
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
    gone = points.depth[-1] < max(experiment.depths)
    beyond = f" The reference echo is not alive beyond depth {points.depth[-1]:g}." if gone else ""
    if points.low[-1] > margin:
        text = f"spread not complete by depth {points.depth[-1]:g}"
        return line("not-complete", text, f"It is still {last}.{beyond}")
    above = [at for at in range(len(points)) if points.low[at] > margin]
    at = crossing(points, margin, start=above[-1] if above else 0)
    if not math.isfinite(at.high) and at.high > 0:
        detail = (
            f"It is {last}: the band does not fall inside the margin.{beyond} More instances or shots would settle it."
        )
        return line("undecided", "spread undecided", detail)
    fallen = _fallen_controls(source, group, margin, at.high)
    if fallen:
        return line("undecided", "spread undecided", f"The control that cannot spread ({fallen}) fell as well.")
    depth = int(points.depth[0]) if at.value == -math.inf else first_layer(at.value)
    circuits = _ideal_distance(source, experiment, target, depth)
    if circuits > margin:
        detail = f"Their circuits do not spread so soon: without errors it is {circuits:.2f}. So this is not spreading."
        return line("undecided", "spread undecided", detail)
    text = f"spread complete by depth {depth} {ends(at, points, level, up=True)}"
    return line("complete", text, f"Last with a living reference: {last}.{beyond}", depth, at)


def _ideal_distance(source: Source, experiment: Experiment, target: float, depth: int) -> float:
    """The same mean for an ideal device, at the first measured depth from there on: what the circuits can do."""
    rows = source.compared(experiment.name, "otoc").dropna(subset=["ideal"])
    distance = (rows["ideal"].astype(float) - target).abs().groupby(rows["depth"].astype(float)).mean()
    later = distance[distance.index >= depth]
    return float(later.iloc[0]) if len(later) else math.inf


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
        return line(
            "undecided", "spread undecided", "The circuits do not reach Porter-Thomas within the depths tested."
        )
    if not settled:
        detail = "Where the circuits reach Porter-Thomas, no cross-entropy fidelity shows that the device ran them."
        return line("undecided", "spread undecided", detail)
    depth = int(points.depth[0]) if at.value == -math.inf else first_layer(at.value)
    interval = ends(at, points, percent(source.campaign.confidence), up=True)
    text = f"outcomes spread by depth {depth} {interval} (computed from the circuits; no OTOC was measured)"
    return line("complete", text, f"Cross-entropy fidelity excludes no signal at depth {min(settled):g}.", depth)

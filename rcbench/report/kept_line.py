"""The kept and the faithful axis of the bottom line."""

from __future__ import annotations

from rcbench.campaign import Experiment
from rcbench.report.axis_line import Line, above
from rcbench.report.curves import compared_curve
from rcbench.report.printed import percent
from rcbench.report.source import Group, Source
from rcbench.signatures.registry import signature


def kept_line(source: Source, group: Group, threshold: float) -> Line:
    """How long the collision-based self-fidelity stays above the threshold; else a bound by cross-entropy."""
    level = percent(source.campaign.confidence)
    for experiment in group.experiments:
        points = compared_curve(source, experiment.name, "self_fidelity")
        if len(points) == 0:
            continue
        most = 1 + _margin(experiment)
        if any(low > most for low in points.low):
            return Line(
                axis="kept",
                status="undecided",
                text=f"kept above {threshold:g} undecided",
                detail=f"{experiment.name}: the shots coincide far more often than these circuits can make them: a "
                "stuck device, shots of another circuit, or repeated shots.",
            )
        line = above("kept", points, threshold, level, f"{experiment.name}: collision-based self-fidelity")
        if line.status != "undecided":
            return line
    for experiment in group.experiments:
        points = compared_curve(source, experiment.name, "xeb_fidelity")
        if len(points) == 0:
            continue
        line = above("kept", points, threshold, level, f"{experiment.name}: cross-entropy fidelity, a bound from below")
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


def _margin(experiment: Experiment) -> float:
    """What a self-fidelity may exceed 1 by."""
    margin = experiment.margins.get("self_fidelity")
    return margin.value if margin is not None else signature("self_fidelity").margin


def faithful_line(source: Source, group: Group, threshold: float) -> Line:
    """How long the cross-entropy fidelity, else an echo of twice the depth, stays above the threshold."""
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
                return above("faithful", points, threshold, level, f"{experiment.name}: {name}")
    return Line(
        axis="faithful", status="not-measured", text="faithful not measured", detail="No fidelity was measured."
    )

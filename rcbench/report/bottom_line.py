"""The bottom line: from which depth it has spread, up to which depth it is kept, and for what that is said."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from rcbench.report.axis_line import Line, first_layer, last_layer
from rcbench.report.kept_line import faithful_line, kept_line
from rcbench.report.rule import KEPT_ABOVE
from rcbench.report.source import NOT_STATED, Group, Source, groups
from rcbench.report.spread_line import spread_line


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
        spread = spread_line(source, group)
        kept, faithful = kept_line(source, group, threshold), faithful_line(source, group, threshold)
        found.append(
            BottomLine(
                group=group,
                spread=spread,
                kept=kept,
                faithful=faithful,
                window=_window(spread, kept, threshold, _depths(group)),
                scope=_scope(source, group),
            )
        )
    return found


def _depths(group: Group) -> list[int]:
    return sorted({depth for experiment in group.experiments for depth in experiment.depths})


def _window(spread: Line, kept: Line, threshold: float, depths: list[int]) -> str:
    """Whether some depth is both spread and kept, which is the question behind the campaign."""
    both = f"spread and kept above {threshold:g}"
    if kept.status == "never" or (spread.status == "not-complete" and kept.depth is not None):
        return f"No depth tested was seen to be both {both}."
    if spread.depth is None or spread.crossing is None or kept.crossing is None:
        return f"Whether some depth is both {both} is undecided."
    if spread.crossing.low > kept.crossing.high:
        return f"No depth is both {both}: when spreading is complete, less is kept."
    if spread.crossing.high > kept.crossing.low:
        return f"Whether some depth is both {both} is undecided: the two intervals overlap."
    start, end = _layers(spread.crossing.value, kept.crossing.value, depths)
    if start > end:
        return f"No whole layer lies between the depth of spreading and the depth of loss below {threshold:g}."
    worst = _layers(spread.crossing.high, kept.crossing.low, depths)
    still = f"still {_span(*worst)}" if worst[0] <= worst[1] else "no whole layer is left"
    return f"Both hold {_span(start, end)}; with each interval at its least favourable end, {still}."


def _layers(spread: float, kept: float, depths: list[int]) -> tuple[int, int]:
    """First and last whole layer of a window, within the depths tested."""
    return first_layer(max(spread, depths[0])), last_layer(min(kept, depths[-1]))


def _span(start: int, end: int) -> str:
    return f"from depth {start} to {end}" if end > start else f"at depth {start}"


def _scope(source: Source, group: Group) -> str:
    names = ", ".join(source.qubit_name(qubit) for qubit in group.qubits)
    depths = _depths(group)
    device = source.campaign.device
    invented = ", an invented device" if device.invented else ""
    listed = f"{depths[0]} to {depths[-1]}" if len(depths) > 1 else str(depths[0])
    return (
        f"For qubits {names} of {device.name}{invented}; {group.circuits.gates} circuits; depths {listed} tested; "
        f"{dates(source)}."
    )


def dates(source: Source) -> str:
    """When the data were taken, as far as it was stated."""
    took = source.audit.get("wall_time")
    ends = [took.get("first"), took.get("last")] if isinstance(took, Mapping) else []
    texts = [str(text) for text in ends if text] or [source.execution(key) for key in ("started", "ended")]
    days = list(dict.fromkeys(text[:10] for text in texts if text != NOT_STATED))
    return f"data taken {' to '.join(days)}" if days else "date of the data not stated"

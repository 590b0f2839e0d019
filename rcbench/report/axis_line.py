"""What is said on one axis: a clause, what it rests on, and the depth with its interval in whole layers."""

from __future__ import annotations

import math
from dataclasses import dataclass

from rcbench.report.curves import Crossing, Curve, crossing
from rcbench.report.printed import fixed


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


def above(axis: str, points: Curve, threshold: float, level: str, what: str) -> Line:
    """How long a falling curve stays above a threshold."""
    at = crossing(points, threshold)
    first, last = points.depth[0], points.depth[-1]
    detail = (
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
        text = f"{axis} above {threshold:g} until before depth {first:g} {ends(at, points, level, up=False)}"
    else:
        depth = int(last) if at.value == math.inf else last_layer(at.value)
        text = f"{axis} above {threshold:g} until depth {depth} {ends(at, points, level, up=False)}"
    return Line(
        axis=axis,
        status=status,
        text=text,
        detail=f"{what}, {level} interval: {detail}.",
        depth=depth,
        crossing=at,
        evidence=what,
    )


def first_layer(depth: float) -> int:
    """The first whole layer at a depth or after it; a thousandth of a layer is no layer."""
    return math.ceil(depth - 1e-3)


def last_layer(depth: float) -> int:
    """The last whole layer at a depth or before it."""
    return math.floor(depth + 1e-3)


def ends(at: Crossing, points: Curve, level: str, *, up: bool) -> str:
    """The interval of a crossing in whole layers; up: the first layer below the level, else the last above it."""
    rounded = first_layer if up else last_layer
    first, last = points.depth[0], points.depth[-1]
    low = str(rounded(at.low)) if math.isfinite(at.low) else f"{'≤' if up else '<'} {first:g}"
    high = str(rounded(at.high)) if math.isfinite(at.high) else (f"> {last:g}" if at.high > 0 else f"≤ {first:g}")
    return f"[{level}: {low} to {high}]"

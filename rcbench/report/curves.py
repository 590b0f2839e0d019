"""Curves against depth with a confidence band, and the depth at which one crosses a level."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri, stdtrit

from rcbench.arrays import FloatArray
from rcbench.report.source import Source

FEWEST = 5  # below this many instances their scatter gives no interval
MOST_MISSING = 0.2


@dataclass(frozen=True, slots=True, eq=False)
class Curve:
    """A quantity against depth, all finite. depth, value, low, high: (k,), rising in depth; low to high is the band."""

    depth: FloatArray
    value: FloatArray
    low: FloatArray
    high: FloatArray

    def __len__(self) -> int:
        return len(self.depth)

    def only(self, keep: FloatArray | list[bool]) -> Curve:
        """The points that are kept; keep: (k,) of truth values."""
        chosen = np.asarray(keep, dtype=bool)
        return Curve(self.depth[chosen], self.value[chosen], self.low[chosen], self.high[chosen])


@dataclass(frozen=True, slots=True)
class Crossing:
    """Where a falling curve crosses a level, in depth. -inf: already below at the first depth; inf: not at any depth.

    value: of the curve itself. low and high: of the lower and the upper edge of its band.
    """

    value: float
    low: float
    high: float


def curve(depth: list[float], value: list[float], low: list[float], high: list[float]) -> Curve:
    """A curve of the points that are finite, in order of depth."""
    table = np.array([depth, value, low, high], dtype=np.float64).reshape(4, -1)
    table = table[:, np.isfinite(table).all(axis=0)]
    table = table[:, np.argsort(table[0], kind="stable")]
    return Curve(*table)


def crossing(points: Curve, level: float, start: int = 0) -> Crossing:
    """Where a curve and the edges of its band fall below a level for the first time, from point `start` on.

    Between measured depths each edge is taken as straight, so the interval is the set of depths at which the band
    holds the level (inversion of the confidence band).
    """
    return Crossing(
        *(_first_below(points.depth[start:], edge[start:], level) for edge in (points.value, points.low, points.high))
    )


def _first_below(depth: FloatArray, edge: FloatArray, level: float) -> float:
    below = np.flatnonzero(edge < level)
    if len(below) == 0:
        return math.inf
    at = int(below[0])
    if at == 0:
        return -math.inf
    share = float((edge[at - 1] - level) / (edge[at - 1] - edge[at]))
    return float(depth[at - 1] + share * (depth[at] - depth[at - 1]))


def compared_curve(source: Source, experiment: str, signature: str) -> Curve:
    """The measured values of a signature of the whole system, with the intervals of the comparison."""
    rows = source.compared(experiment, signature)
    if rows["region"].nunique() > 1:
        rows = rows[rows["region"] == ""]
    return curve(*(rows[column].tolist() for column in ("depth", "measured", "ci_low", "ci_high")))


def by_instance(source: Source, experiment: str, signature: str, depth: float) -> tuple[FloatArray, FloatArray]:
    """(value, std_error), each (instances, regions), repeats averaged; NaN where an instance gave no value."""
    rows = source.estimated(experiment, signature)
    # an instance that came back incomplete has one empty row without a region: it is missing, not refused
    rows = rows[(rows["depth"] == depth) & (rows["value"].notna() | (rows["region"] != ""))]
    if rows.empty:
        return np.zeros((0, 0)), np.zeros((0, 0))
    same = rows.assign(variance=rows["std_error"] ** 2).groupby(["instance", "region"])
    value = same["value"].mean().unstack("region")
    error = (np.sqrt(same["variance"].sum()) / same["variance"].count()).unstack("region")
    return value.to_numpy(dtype=np.float64), error.to_numpy(dtype=np.float64)


def mean_over_regions(
    source: Source, experiment: str, signature: str, *, from_value: float | None = None
) -> tuple[Curve, bool]:
    """The mean over regions against depth: of the value, or of its distance from `from_value`; see `band`.

    A depth at which some region lacks more than MOST_MISSING of its instances is left out: what remains is a selection.

    Returns:
        The curve, and whether its band rests on the scatter between instances at every depth.
    """
    points: list[tuple[float, float, float, float]] = []
    from_scatter = True
    for depth in sorted(source.estimated(experiment, signature)["depth"].dropna().unique()):
        value, error = by_instance(source, experiment, signature, depth)
        there = np.isfinite(value)
        if value.size == 0 or there.mean(axis=0).min() < 1 - MOST_MISSING:
            continue
        centre, half = band(value, error, from_value, source.campaign.confidence)
        from_scatter &= bool(there.sum(axis=0).min() >= FEWEST)
        points.append((depth, centre, centre - half, centre + half))
    return curve(*(list(column) for column in zip(*points, strict=True)) if points else ([], [], [], [])), from_scatter


def band(value: FloatArray, error: FloatArray, origin: float | None, confidence: float) -> tuple[float, float]:
    """The mean over regions and half the width of its interval; with an origin, of |mean over instances - origin|.

    The error is the jackknife over whole instances with Student's t, since the regions of one instance share circuits
    and shots. With fewer than FEWEST instances there is no scatter to use; it is then the shot noise, added over
    regions as if it were common to all.

    Args:
        value, error: (instances, regions), NaN where an instance gave no value.
        origin: None for the plain mean. confidence: two-sided.

    Source: Efron and Stein, Ann. Stat. 9, 586 (1981).
    """
    there = np.isfinite(value)
    total, number, count = np.nansum(value, axis=0), there.sum(axis=0), len(value)
    centre = _mean_distance(total / number, origin)
    if number.min() < FEWEST:
        shot = np.sqrt(np.nansum(error**2, axis=0)) / number
        return centre, float(ndtri(0.5 + confidence / 2)) * float(shot.mean())
    left_out = (total - np.nan_to_num(value)) / (number - there)
    each = np.array([_mean_distance(row, origin) for row in left_out])
    spread = math.sqrt((count - 1) / count * float(((each - each.mean()) ** 2).sum()))
    return centre, float(stdtrit(count - 1, 0.5 + confidence / 2)) * spread


def _mean_distance(values: FloatArray, origin: float | None) -> float:
    return float(values.mean()) if origin is None else float(np.abs(values - origin).mean())

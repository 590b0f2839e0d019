"""Two orthogonal inputs through one circuit: no region tells them apart any more, and the whole still does."""

from __future__ import annotations

from pathlib import Path

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rcbench.arrays import FloatArray
from rcbench.campaign import Experiment
from rcbench.report import figures as look
from rcbench.report.predicted import (
    HAAR,
    by_size,
    curves,
    haar,
    last_values,
    means,
    opening,
    predicted_keys,
    region_name,
)
from rcbench.report.source import Source

LOCAL, TRACE, OVERLAP = "local_distinguishability", "local_trace_distance", "twin_overlap"
PAPER = {"facecolor": "white", "edgecolor": "none", "pad": 0.4}  # behind words that a line may cross
WORDS = {LOCAL: "distance of a region's bitstrings", TRACE: "distance of a region's states"}


def twins_figure(source: Source, experiment: Experiment, folder: Path) -> look.Picture | None:
    """Distances of regions against depth, and spread against kept; None where neither distance was predicted."""
    present = predicted_keys(source, experiment.name)
    keys = [key for key in (LOCAL, TRACE) if key in present]
    if not keys:
        return None
    path = OVERLAP in present
    with look.style():
        figure = Figure(figsize=(look.WIDE, 3.6 + 2.0 * path), layout="constrained")
        grid = figure.add_gridspec(1 + path, 2, height_ratios=[1.6, 1][: 1 + path])
        for at, key in enumerate(keys):
            axes = figure.add_subplot(grid[0, at])
            level = haar(source, experiment.name, key)
            curves(axes, means(source, experiment.name, key), level, alone=len(keys) == 1)
            axes.set_ylim(-0.04, 1.06)
            axes.set_ylabel(WORDS[key])
        if path:
            _path(figure.add_subplot(grid[1, :]), source, experiment.name, keys[0])
        caption = (
            opening(experiment, "two orthogonal inputs through each circuit")
            + "Above: how far a region tells the two apart, 1 for certain, 0 not at all; scrambling takes it to the "
            "value of random states (dotted). "
            + ("Below: the same for the smallest region against what the whole still tells, one labelled point a "
               "depth. Spreading moves a point to the right, loss moves it down; ideal circuits keep all, so their "
               "path stays on top." if path else "")
        )  # fmt: skip
        alt = "Twin inputs. " + last_values(source, experiment.name, [*keys, *([OVERLAP] if path else [])])
        return look.finish(figure, folder, f"{experiment.name}-twins", caption, alt)


def _path(axes: Axes, source: Source, experiment: str, key: str) -> None:
    """One point a depth for the smallest region: the paths of larger ones would lie on the same line."""
    rows, level = means(source, experiment, key), haar(source, experiment, key)
    whole = means(source, experiment, OVERLAP).groupby("depth")["value"].mean()
    region = by_size(list(rows["region"]))[0]
    part = rows[rows["region"] == region].sort_values("depth")
    spread, kept = 1 - part["value"].to_numpy(), 1 - whole.reindex(part["depth"]).to_numpy()
    axes.errorbar(spread, kept, xerr=part["std_error"], elinewidth=0.8, capsize=2, linewidth=1.0,
                  color=look.BLUE, marker="o", label="ideal", zorder=3)  # fmt: skip
    _labels(axes, part["depth"].to_numpy(), spread, kept)
    if region in level.index:
        axes.axvline(1 - level[region], label="Haar-random", zorder=2, **HAAR)
    axes.set(xlim=(-0.08, 1.08), ylim=(-0.04, 1.5))
    axes.set_yticks([0, 0.25, 0.5, 0.75, 1])
    axes.set_xlabel(f"spread: 1 − distance on {region_name(region)}")
    axes.set_ylabel("kept: 1 − overlap\nof the whole states")
    for words, place, ha in (("not spread, lost", (0.02, 0.02), "left"), ("spread, lost", (0.98, 0.02), "right")):
        axes.annotate(
            words, place, xycoords="axes fraction", ha=ha, va="bottom", color=look.GREY, style="italic", bbox=PAPER
        )
    axes.legend(loc="center left", bbox_to_anchor=(0.02, 0.42), handlelength=2.8)


def _labels(axes: Axes, depths: FloatArray, spread: FloatArray, kept: FloatArray) -> None:
    """Depths above their points, in one of three rows so that neighbours do not touch."""
    ends = [-1.0, -1.0, -1.0]
    for depth, x, y in zip(depths, spread, kept, strict=True):
        row = next((at for at, end in enumerate(ends) if x - end > 0.022), None)
        if row is None:
            continue
        ends[row] = x
        axes.annotate(
            f"{depth:g}",
            (x, y),
            xytext=(0, 5 + 9 * row),
            textcoords="offset points",
            ha="center",
            fontsize=7.5,
            bbox=PAPER,
        )

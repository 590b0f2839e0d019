"""What was predicted, ready to draw: means over circuits with their errors, Haar values, and the look of regions."""

from __future__ import annotations

import re
import textwrap
from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rcbench.campaign import Experiment
from rcbench.regions import read_regions, read_setting
from rcbench.report import figures as look
from rcbench.report.source import Source
from rcbench.signatures.registry import signature

KEYS = ["region", "depth"]
DEPTH = "depth (layers of two-qubit gates)"
# one kind of line a region, in the order of their labels
LINES: tuple[dict[str, Any], ...] = (
    {"color": look.BLUE, "linestyle": "-", "marker": "o"},
    {"color": look.ORANGE, "linestyle": (0, (5, 2)), "marker": "s"},
    {"color": look.GREEN, "linestyle": (0, (5, 1.5, 1, 1.5)), "marker": "^"},
    {"color": look.PURPLE, "linestyle": (0, (2, 1.5)), "marker": "D"},
    {"color": look.SKY, "linestyle": (0, (7, 1.5)), "marker": "v"},
    {"color": look.GREY, "linestyle": (0, (1, 1)), "marker": "P"},
)
HAAR: dict[str, Any] = {"color": look.BLACK, "linestyle": (0, (1, 1.6)), "linewidth": 1.3}
MOST_LINES = len(LINES)


def predicted_keys(source: Source, experiment: str, model: str = "ideal") -> list[str]:
    """The signatures that a model was asked for in an experiment, in the order of the table."""
    rows = source.predictions
    chosen = rows[(rows["experiment"] == experiment) & (rows["model"] == model)]
    return list(dict.fromkeys(chosen["signature"]))


def means(source: Source, experiment: str, key: str, model: str = "ideal") -> pd.DataFrame:
    """Columns region, depth, value, std_error, u_model, method: the mean over circuits, by region and depth.

    The error is of that mean as an estimate for all circuits of the family: scatter between instances and what the
    rows state themselves. Rows of the whole ensemble have no instances, so theirs is as it stands.
    """
    whole = source.predicted(experiment, key, model)[[*KEYS, "value", "std_error", "u_model", "method"]]
    single = source.predicted(experiment, key, model, by_instance=True)
    if single.empty:
        return whole
    scatter = single.groupby(KEYS)["value"].sem().rename("scatter").reset_index()
    rows = whole.merge(scatter, on=KEYS, how="left")
    # one instance has no scatter
    error = np.hypot(rows["std_error"], rows["scatter"].fillna(0.0))
    return rows.assign(std_error=error).drop(columns="scatter")


def haar(source: Source, experiment: str, key: str) -> pd.Series[float]:
    """The Haar value by region; empty where there is none."""
    rows = source.predicted(experiment, key, "haar")
    return rows.groupby("region")["value"].first()


def axis_name(key: str) -> str:
    """The same in lines short enough for an axis."""
    return textwrap.fill(name_with_unit(key), 30)


def name_with_unit(key: str) -> str:
    """What an axis is called."""
    row = signature(key)
    return f"{row.title} / {row.unit}" if row.unit else row.title


def by_size(regions: Sequence[str]) -> list[str]:
    """Region labels, the smallest region first, in the order of the qubits."""

    def order(label: str) -> tuple[Any, ...]:
        if not label or "=" in label:
            # numbers by value: probe=10 comes after probe=9
            return (0, [int(piece) if piece.isdigit() else piece for piece in re.split(r"(\d+)", label)])
        parts = read_regions(label)
        return (sum(len(part) for part in parts), [*parts])

    return sorted(set(regions), key=order)


def curves(
    axes: Axes,
    rows: pd.DataFrame,
    reference: pd.Series[float],
    *,
    log: bool = False,
    alone: bool = False,
    noise: pd.DataFrame | None = None,
) -> None:
    """A signature against depth with Haar lines beneath: a line a region, or their mean where they are many.

    Beside a noise model the mean as well, since that stands for all regions. alone: no other panel is in the figure.
    """
    regions = by_size(list(rows["region"]))
    shown = [(region_name(label), rows[rows["region"] == label]) for label in regions]
    if len(shown) > (MOST_LINES if noise is None else 1):
        mean = rows.groupby("depth", as_index=False)[["value", "std_error"]].mean()
        shown = [(f"mean of {len(regions)} regions", mean)]
    for (label, part), kind in zip(shown, LINES, strict=False):
        bars(axes, part, kind, label or "ideal", log=log)
    if noise is not None and len(noise):
        average = noise.groupby("depth")["value"].mean()
        axes.plot(average.index, average, label="noise model", zorder=2, **look.NOISE_MODEL)
    levels = reference.groupby(reference.round(6)).first()
    # each region's own value in its colour, where they differ
    own = len(levels) > 1 and len(regions) <= MOST_LINES
    for at, level in enumerate(levels):
        region = reference[reference.round(6) == round(level, 6)].index[0]
        colour = {"color": LINES[regions.index(region)]["color"]} if own and region in regions else {}
        axes.axhline(level, label="Haar-random" if at == 0 else None, zorder=2.5, **HAAR | colour)
    look.whole_depths(axes, list(rows["depth"]))
    axes.set_xlabel(DEPTH)
    if len(shown) > 1 or len(levels) or noise is not None:
        legend_below(axes, alone=alone)


def region_name(label: str) -> str:
    """A region in a legend."""
    if "=" in label:
        parts = read_setting(label)
        return f"start on qubit {parts['probe']}" if set(parts) == {"probe", "V"} else label.replace(";", ", ")
    return f"qubits {label}".replace("|", " | ") if label else ""


def bars(axes: Axes, rows: pd.DataFrame, kind: dict[str, Any], label: str | None, *, log: bool = False) -> None:
    """A line with its markers and error bars; bars stay above zero on a logarithmic axis."""
    lower = np.minimum(rows["std_error"], 0.9 * rows["value"].abs()) if log else rows["std_error"]
    axes.errorbar(
        rows["depth"], rows["value"], yerr=np.vstack([lower, rows["std_error"]]), label=label, elinewidth=0.9,
        capsize=2, markersize=4.8, markeredgecolor="white", markeredgewidth=0.5, zorder=3, **kind,
    )  # fmt: skip


def legend_below(axes: Axes, columns: int = 2, *, alone: bool = False) -> None:
    """A legend under a panel, where it hides nothing; beside a panel that stands alone."""
    handles, labels = axes.get_legend_handles_labels()
    order = sorted(range(len(labels)), key=lambda at: labels[at].startswith(("Haar", "noise")))
    place: dict[str, Any] = {"ncols": columns, "loc": "upper center", "bbox_to_anchor": (0.5, -0.2)}
    if alone:
        place = {"loc": "center left", "bbox_to_anchor": (1.04, 0.5)}
    legend = axes.legend(
        [handles[at] for at in order], [labels[at] for at in order], handlelength=2.8, columnspacing=1.2,
        borderaxespad=0.1, **place,
    )  # fmt: skip
    legend.set_in_layout(not alone)  # the empty half is its room


def at_depths(rows: pd.DataFrame, most: int) -> list[float]:
    """Depths to draw one line each, the first and the last among them."""
    depths = sorted(rows["depth"].unique())
    return [float(depths[at]) for at in np.unique(np.linspace(0, len(depths) - 1, most).round().astype(int))]


def panels(figure: Figure, count: int) -> list[Axes]:
    """Axes of so many panels, two beside each other; a single one has half the width, so that its text stays small."""
    grid = list(figure.subplots(-(-count // 2), 2, squeeze=False).flat)
    for axes in grid[count:]:
        axes.set_axis_off()
    return grid[:count]


def opening(experiment: Experiment, what: str) -> str:
    """How captions begin."""
    circuits = f"{experiment.instances} circuit{'s' if experiment.instances > 1 else ''}"
    return f"Experiment {experiment.name}: {what}, mean over {circuits} with its standard error. "


def last_values(source: Source, experiment: str, keys: Sequence[str]) -> str:
    """The values of some signatures at the last depth in words, for those who cannot see the figure."""
    parts = []
    for key in keys:
        rows = means(source, experiment, key)
        rows = rows[rows["depth"] == rows["depth"].max()]
        if rows.empty:
            continue
        level = haar(source, experiment, key)
        beside = f", Haar-random {level.mean():.3g}" if len(level) else ""
        several = rows["region"].nunique() > 1
        parts.append(
            f"{signature(key).title}{', mean of regions,' if several else ''} at depth {rows['depth'].iloc[0]:g}: "
            f"{rows['value'].mean():.3g}{beside}"
        )
    return "; ".join(parts) + "."

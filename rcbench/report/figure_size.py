"""How large an operator has grown: its mean size against depth, and the distribution over sizes at several depths."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
from matplotlib import colormaps
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rcbench.campaign import Experiment
from rcbench.regions import read_setting
from rcbench.report import figures as look
from rcbench.report.predicted import (
    HAAR,
    at_depths,
    curves,
    haar,
    last_values,
    legend_below,
    means,
    opening,
    panels,
    predicted_keys,
)
from rcbench.report.source import Source

MEAN, SHARES = "operator_size", "operator_size_distribution"
MOST_DEPTHS = 6


def size_figure(source: Source, experiment: Experiment, folder: Path) -> look.Picture | None:
    """Mean size, distribution of sizes, or both; None where neither was predicted."""
    keys = [key for key in (MEAN, SHARES) if key in predicted_keys(source, experiment.name)]
    if not keys:
        return None
    with look.style():
        figure = Figure(figsize=(look.WIDE, 3.6), layout="constrained")
        for axes, key in zip(panels(figure, len(keys)), keys, strict=True):
            rows, level = means(source, experiment.name, key), haar(source, experiment.name, key)
            if key == MEAN:
                curves(axes, rows, level, alone=len(keys) == 1)
                axes.set_ylim(bottom=0)
                axes.set_ylabel("mean operator size / qubits")
            else:
                _distribution(axes, rows, level, alone=len(keys) == 1)
        caption = (
            opening(experiment, "growth of the operator Z")
            + "The size of a Pauli string is the number of qubits on which it acts; a scrambled operator "
            "has the sizes of random strings (dotted), 3/4 of the qubits on average."
        )
        alt = "Operator sizes. " + last_values(source, experiment.name, [key for key in keys if key == MEAN])
        return look.finish(figure, folder, f"{experiment.name}-operator-size", caption, alt)


def _distribution(axes: Axes, rows: pd.DataFrame, level: pd.Series[float], *, alone: bool) -> None:
    rows = rows.assign(**_places(rows["region"]))
    first = rows["probe"].iloc[0]
    part = rows[rows["probe"] == first]
    depths = at_depths(part, MOST_DEPTHS)
    for at, depth in enumerate(depths):
        shown = part[part["depth"] == depth].sort_values("size")
        colour = colormaps["cividis"](0.9 * at / max(len(depths) - 1, 1))
        axes.errorbar(
            shown["size"], shown["value"], yerr=shown["std_error"], color=colour, marker=look.DEPTH_MARKERS[at],
            label=f"depth {depth:g}", markersize=4, linewidth=1.2, elinewidth=0.9, capsize=2, zorder=3,
        )  # fmt: skip
    if len(level):
        line = pd.DataFrame({"value": level.to_numpy(), **_places(pd.Series(level.index))})
        line = line[line["probe"] == first].sort_values("size")
        axes.plot(line["size"], line["value"], label="Haar-random", zorder=4, **HAAR)
    sizes = sorted(part["size"].unique())
    axes.set_xticks(sizes if len(sizes) <= 12 else sizes[:: -(-len(sizes) // 12)])
    axes.set_xlabel("size of the strings / qubits")
    axes.set_ylabel(f"share of the strings, start on qubit {first}")
    legend_below(axes, columns=3, alone=alone)


def _places(labels: pd.Series[str]) -> dict[str, list[int]]:
    settings = [read_setting(label) for label in labels]
    return {name: [int(setting[name]) for setting in settings] for name in ("probe", "size")}

"""Entropies of regions against depth with the Haar line, or the profile of all cuts at several depths."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
from matplotlib import colormaps
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rcbench.campaign import Experiment
from rcbench.regions import read_regions
from rcbench.report import figures as look
from rcbench.report.predicted import (
    HAAR,
    at_depths,
    axis_name,
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

KEYS = ("vonneumann_entropy", "renyi2_entropy", "purity", "mutual_information_vonneumann", "mutual_information_renyi2")
LEAST_CUTS = 4  # fewer nested regions are drawn as lines against depth
MOST_DEPTHS = 8


def entropy_figure(source: Source, experiment: Experiment, folder: Path) -> look.Picture | None:
    """One panel a signature; None where no entropy was predicted."""
    keys = [key for key in KEYS if key in predicted_keys(source, experiment.name)]
    if not keys:
        return None
    rows = -(-len(keys) // 2)
    profile = False
    with look.style():
        figure = Figure(figsize=(look.WIDE, 3.4 * rows), layout="constrained")
        for axes, key in zip(panels(figure, len(keys)), keys, strict=True):
            values, level = means(source, experiment.name, key), haar(source, experiment.name, key)
            if is_profile(values):
                profile = True
                _profile(axes, values, level, alone=len(keys) == 1)
            else:
                curves(axes, values, level, log=key == "purity", alone=len(keys) == 1)
            if key == "purity":
                look.log_axis(axes, pd.concat([values["value"], level]).to_frame())
            axes.set_ylabel(axis_name(key))
        caption = (
            opening(experiment, "entropies")
            + ("Each line is one depth: the entropy of qubits 0 to x − 1, for every cut x. " if profile else "")
            + "Dotted: the mean over Haar-random states of the same size (Page, Lubkin); a circuit that scrambles ends "
            "on it."
        )
        alt = "Entropies against depth. " + last_values(source, experiment.name, keys)
        return look.finish(figure, folder, f"{experiment.name}-entropies", caption, alt)


def is_profile(rows: pd.DataFrame) -> bool:
    """Whether the regions are cuts: qubits 0 to x - 1 of several x."""
    labels = rows["region"].unique()
    if len(labels) < LEAST_CUTS:
        return False
    parts = [read_regions(label) for label in labels]
    return all(len(part) == 1 and part[0] == tuple(range(len(part[0]))) for part in parts)


def _profile(axes: Axes, rows: pd.DataFrame, level: pd.Series[float], *, alone: bool) -> None:
    rows = rows.assign(cut=[len(read_regions(label)[0]) for label in rows["region"]]).sort_values("cut")
    depths = at_depths(rows, MOST_DEPTHS)
    for at, depth in enumerate(depths):
        part = rows[rows["depth"] == depth]
        colour = colormaps["cividis"](0.9 * at / max(len(depths) - 1, 1))
        axes.errorbar(
            part["cut"], part["value"], yerr=part["std_error"], color=colour, marker=look.DEPTH_MARKERS[at],
            label=f"depth {depth:g}", markersize=4, linewidth=1.2, elinewidth=0.9, capsize=2, zorder=3,
        )  # fmt: skip
    if len(level):
        line = level.rename(index=lambda label: len(read_regions(label)[0])).sort_index()
        axes.plot(line.index, line, label="Haar-random", zorder=4, **HAAR)
    cuts = sorted(rows["cut"].unique())
    axes.set_xticks(cuts if len(cuts) <= 12 else cuts[:: -(-len(cuts) // 12)])
    axes.set_xlabel("cut (qubits left of it)")
    legend_below(axes, columns=3, alone=alone)

"""Tripartite mutual information of states and of unitaries against depth, beside the value of Haar-random ones."""

from __future__ import annotations

from pathlib import Path

from matplotlib.figure import Figure

from rcbench.campaign import Experiment
from rcbench.report import figures as look
from rcbench.report.predicted import (
    DEPTH,
    HAAR,
    LINES,
    bars,
    haar,
    last_values,
    legend_below,
    means,
    opening,
    panels,
    predicted_keys,
)
from rcbench.report.source import Source
from rcbench.signatures import CHOI_KEYS

STATES = ("tmi_vonneumann", "tmi_renyi2")
PANELS = ((STATES, "of the state, I₃(A:B:C) / bits"), (CHOI_KEYS[::-1], "of the unitary, I₃(A:C:D) / bits"))


def tmi_figure(source: Source, experiment: Experiment, folder: Path) -> look.Picture | None:
    """A panel for states, one for unitaries; None where neither was predicted."""
    present = predicted_keys(source, experiment.name)
    shown = [([key for key in keys if key in present], words) for keys, words in PANELS]
    shown = [(keys, words) for keys, words in shown if keys]
    if not shown:
        return None
    with look.style():
        figure = Figure(figsize=(look.WIDE, 3.6), layout="constrained")
        for axes, (keys, words) in zip(panels(figure, len(shown)), shown, strict=True):
            for key, kind in zip(keys, LINES, strict=False):
                rows, level = means(source, experiment.name, key), haar(source, experiment.name, key)
                order = "von Neumann" if "vonneumann" in key else "Renyi-2"
                bars(axes, rows, kind, f"{order}, regions {rows['region'].iloc[0]}")
                for value in level.unique():
                    axes.axhline(value, label=f"Haar-random, {order}", **HAAR | {"color": kind["color"]})
                look.whole_depths(axes, list(rows["depth"]))
            axes.axhline(0, color=look.GREY, linewidth=0.7, zorder=1)
            axes.set_xlabel(DEPTH)
            axes.set_ylabel(f"tripartite mutual information\n{words}")
            legend_below(axes, columns=1, alone=len(shown) == 1)
        caption = (
            opening(experiment, "tripartite mutual information")
            + "0: every part knows its share alone. Below 0: what A shares is in no part alone. Dotted: "
            "Haar-random states or unitaries of the same sizes, which is the mark to reach; it is well above −n/2."
        )
        keys = [key for keys, _ in shown for key in keys]
        alt = "Tripartite mutual information against depth. " + last_values(source, experiment.name, keys)
        return look.finish(figure, folder, f"{experiment.name}-tmi", caption, alt)

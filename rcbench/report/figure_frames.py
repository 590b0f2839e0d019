"""Frame potentials against depth with their errors and the Haar values, on a logarithmic axis."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import LogFormatterSciNotation, LogLocator, NullFormatter

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
    panels,
    predicted_keys,
)
from rcbench.report.source import Source
from rcbench.signatures import STATE_FRAME_KEYS, UNITARY_FRAME_KEYS

PANELS = ((UNITARY_FRAME_KEYS, "frame potential of the unitaries"), (STATE_FRAME_KEYS, "frame potential of the states"))


def frames_figure(source: Source, experiment: Experiment, folder: Path) -> look.Picture | None:
    """A panel for unitaries, one for states, a line for each k; None where no frame potential was predicted."""
    present = predicted_keys(source, experiment.name)
    shown = [([key for key in keys if key in present], words) for keys, words in PANELS]
    shown = [(keys, words) for keys, words in shown if keys]
    if not shown:
        return None
    with look.style():
        figure = Figure(figsize=(look.WIDE, 3.7), layout="constrained")
        for axes, (keys, words) in zip(panels(figure, len(shown)), shown, strict=True):
            _panel(axes, source, experiment, keys, alone=len(shown) == 1)
            axes.set_ylabel(words)
        caption = (
            f"Experiment {experiment.name}: frame potentials from pairs of {experiment.instances} circuits, with "
            "jackknife standard errors. Dotted, in the colour of each k: the value of Haar-random unitaries or states, "
            "below which none can lie; an ensemble on the line is a k-design as far as these pairs can "
            "tell. At depth 0 all circuits are one, which lies beyond the axis." + _design(source, experiment)
        )
        keys = [key for keys, _ in shown for key in keys]
        alt = "Frame potentials against depth. " + last_values(source, experiment.name, keys)
        return look.finish(figure, folder, f"{experiment.name}-frame-potentials", caption, alt)


def _panel(axes: Axes, source: Source, experiment: Experiment, keys: list[str], *, alone: bool) -> None:
    parts = []
    for key in keys:
        kind = LINES[int(key[-1]) - 1]
        rows, level = means(source, experiment.name, key), haar(source, experiment.name, key)
        # an unbiased estimate may come out below zero, which a logarithmic axis cannot show
        rows = rows[rows["value"] > 0]
        bars(axes, rows, kind, f"k = {key[-1]}", log=True)
        for value in level.unique():
            axes.axhline(value, label="Haar-random" if key == keys[0] else None, **HAAR | {"color": kind["color"]})
        # with no gates all circuits are one, and the potential is as large as it can be: it would set the whole axis
        parts += [rows.loc[rows["depth"] > 0, "value"], level]
    numbers = pd.concat(parts).to_numpy(dtype=float)
    axes.set_yscale("log")
    axes.set_ylim(0.6 * numbers.min(), 2 * numbers.max())
    decades = int(np.log10(numbers.max() / numbers.min())) + 1
    axes.yaxis.set_major_locator(LogLocator(numticks=8 if decades > 7 else decades + 2))
    axes.yaxis.set_major_formatter(LogFormatterSciNotation())
    axes.yaxis.set_minor_formatter(NullFormatter())
    look.whole_depths(axes, list(source.predicted(experiment.name, keys[0], "ideal")["depth"]))
    axes.set_xlabel(DEPTH)
    legend_below(axes, columns=3, alone=alone)


def _design(source: Source, experiment: Experiment) -> str:
    rows = source.predicted(experiment.name, "two_design_depth", "ideal")
    return f" 2-design within 10 %: {rows['method'].iloc[0]}." if len(rows) else ""

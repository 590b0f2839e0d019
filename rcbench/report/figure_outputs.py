"""Statistics of the output distribution against depth, with the Porter-Thomas values; and any other signature."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rcbench.campaign import Experiment
from rcbench.report import figures as look
from rcbench.report.predicted import axis_name, curves, haar, last_values, means, opening, panels, predicted_keys
from rcbench.report.source import Source

KEYS = (
    "collision_probability", "xeb_linear", "output_entropy", "porter_thomas_ks", "output_moment_k3", "output_moment_k4",
)  # fmt: skip
MOST_PANELS = 6


def outputs_figure(source: Source, experiment: Experiment, folder: Path) -> look.Picture | None:
    """One small panel a statistic; None where none was predicted."""
    keys = [key for key in KEYS if key in predicted_keys(source, experiment.name)]
    if not keys:
        return None
    caption = opening(experiment, "output distributions") + (
        "Dotted: Haar-random states (Porter-Thomas), on which a circuit that scrambles ends."
    )
    return _panels(source, experiment, keys, folder, f"{experiment.name}-outputs", caption)


def curves_figure(source: Source, experiment: Experiment, keys: list[str], folder: Path) -> look.Picture | None:
    """Signatures that have no figure of their own, ideal and by the noise model."""
    keys = [key for key in keys if source.predicted(experiment.name, key, "ideal")["depth"].notna().any()]
    if not keys:
        return None
    noise = any(len(source.predicted(experiment.name, key, "noise-model")) for key in keys[:MOST_PANELS])
    beside = " Dashed: the noise model of the stated error budget." if noise else ""
    left = f" In the tables only: {', '.join(keys[MOST_PANELS:])}." if len(keys) > MOST_PANELS else ""
    caption = opening(experiment, "predictions") + beside.lstrip() + left
    return _panels(source, experiment, keys[:MOST_PANELS], folder, f"{experiment.name}-predicted", caption)


def _panels(
    source: Source, experiment: Experiment, keys: list[str], folder: Path, name: str, caption: str
) -> look.Picture:
    lines = -(-len(keys) // 2)
    with look.style():
        figure = Figure(figsize=(look.WIDE, 0.3 + 2.7 * lines), layout="constrained")
        for axes, key in zip(panels(figure, len(keys)), keys, strict=True):
            _panel(axes, source, experiment, key, alone=len(keys) == 1)
        alt = "Predictions against depth. " + last_values(source, experiment.name, keys)
        return look.finish(figure, folder, name, caption, alt)


def _panel(axes: Axes, source: Source, experiment: Experiment, key: str, *, alone: bool) -> None:
    rows = means(source, experiment.name, key)
    noise = source.predicted(experiment.name, key, "noise-model")
    log = key in ("collision_probability", "output_moment_k3", "output_moment_k4") and bool((rows["value"] > 0).all())
    level = haar(source, experiment.name, key)
    curves(axes, rows, level, log=log, alone=alone, noise=noise if len(noise) else None)
    if log:
        look.log_axis(axes, pd.concat([rows["value"], level]).to_frame())
    axes.set_ylabel(axis_name(key))

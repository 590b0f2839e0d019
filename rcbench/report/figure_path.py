"""The figure of the path: spread against kept by depth, with the controls that must stay out of one corner."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rcbench.report import figures as look
from rcbench.report.path import KEPT_KEYS, PathData

FAMILIES = ("brickwork", "product", "dimers")
_CORNERS = (  # words, place in the axes, alignment
    ("not spread, kept", (0.005, 0.985), "left", "top"),
    ("spread and kept", (0.995, 0.985), "right", "top"),
    ("not spread, lost", (0.005, 0.015), "left", "bottom"),
    ("spread, lost", (0.995, 0.015), "right", "bottom"),
)


def path_figure(data: PathData, threshold: float, folder: Path, name: str) -> look.Picture:
    """Draw a path: joined points labelled by depth, the controls with other markers, the noise model's path beneath."""
    with look.style():
        figure = Figure(figsize=(look.WIDE, 4.6), layout="constrained")
        axes = figure.add_subplot()
        axes.axhline(threshold, color=look.GREY, linewidth=1.0, linestyle=(0, (1, 2)))
        axes.axhline(0, color=look.GREY, linewidth=0.6)
        if len(data.model):
            axes.plot(data.model["spread"], data.model["kept"], label="noise model", zorder=2, **look.NOISE_MODEL)
        if len(data.ideal):
            axes.plot(data.ideal, np.ones(len(data.ideal)), label="ideal", zorder=2, **look.IDEAL)
        for family in FAMILIES:
            part = data.points[data.points["family"] == family].sort_values("depth")
            if len(part):
                _trail(axes, part, family)
        axes.set_xlabel(
            "spread: 1 − mean |OTOC − scrambled value|" if data.measured
            else "spread of outcomes, computed: Porter-Thomas over ideal collision excess"
        )  # fmt: skip
        axes.set_ylabel(f"{KEPT_KEYS[data.kept_key].split(',')[0]}: {data.kept_key.replace('_', '-')}")
        axes.set_xlim(min(-0.06, float(data.points["spread"].min()) - 0.06), 1.12)
        top = max(1.08, float(data.points["kept"].max()) + 0.08)
        axes.set_ylim(min(-0.05, float(data.points["kept_low"].min()) - 0.02), top)
        for words, place, ha, va in _CORNERS:
            axes.annotate(words, place, xycoords="axes fraction", ha=ha, va=va, color=look.GREY, style="italic")
        axes.annotate(f"p = {threshold:g}", (1.115, threshold), va="bottom", ha="right", color=look.GREY, fontsize=8)
        look.legend_above(figure, axes, columns=5)
        return look.finish(figure, folder, name, *_words(data))


def _trail(axes: Axes, part: pd.DataFrame, family: str) -> None:
    """One family's points. A control at its bound has open markers and no error bar along the spread axis."""
    device, bound = family == "brickwork", bool(part["constructed"].any())
    kind: dict[str, Any] = {"color": look.BLACK, "marker": "o"} if device else dict(look.CONTROLS[family])
    if bound:
        kind["markerfacecolor"] = "white"
    x, y = (
        np.abs(np.vstack([part[key] - part[f"{key}_low"], part[f"{key}_high"] - part[key]]))
        for key in ("spread", "kept")
    )
    axes.errorbar(
        part["spread"], part["kept"], xerr=None if bound else x, yerr=y, linestyle="-" if device else ":",
        label="measured" if device else f"control: {family}{' (at most)' if bound else ''}", linewidth=1.0,
        elinewidth=0.8, capsize=2, zorder=4, markersize=5.5, **kind,
    )  # fmt: skip
    rows: list[Any] = list(part.itertuples())
    for at, row in enumerate(rows):
        # controls hardly move along the path's axis: only the first and the last are labelled
        if device or at in (0, len(part) - 1):
            # a control at its bound has no bar to its left, a measured one gets its label beyond its bar
            beside = (row.spread if device or bound else row.spread_high, row.kept)
            axes.annotate(
                f"{row.depth:g}", beside, xytext=(-5, -4) if device else (-7, 0) if bound else (4, 0),
                textcoords="offset points", fontsize=8, ha="right" if device or bound else "left",
                va="top" if device else "center", weight="bold" if device else "normal",
            )  # fmt: skip


def _words(data: PathData) -> tuple[str, str]:
    rows: list[Any] = list(data.points.sort_values(["family", "depth"], kind="stable").itertuples())
    parts = [f"{row.family} at depth {row.depth:g}: spread {row.spread:.2f}, kept {row.kept:.2f}" for row in rows]
    what = (
        "Each point is one depth, labelled. Scrambling moves a point to the right, loss moves it down; a device that "
        "only decoheres falls without moving right once the reference echo divides the loss out. The controls have "
        "the same one-qubit gates (product) or the same gate count (dimers, fixed pairs) and cannot spread further."
    )
    if not data.measured:
        what += " No OTOC was measured: spread is computed from the circuits, so the device moves a point down only."
    if data.kept_key != "self_fidelity":
        what += " The upright axis is the cross-entropy fidelity, which bounds what is kept from below."
    if data.points["constructed"].any():
        what += " Open markers: no OTOC was measured, so the control stands at the most that its circuits can spread."
    return " ".join([what, *data.absent]), "Spread against kept. " + "; ".join(parts) + "."

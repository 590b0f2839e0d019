"""OTOCs by probe and depth as maps, measured beside the noise model, one row of maps a butterfly site."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import seaborn as sns
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rcbench.campaign import Experiment
from rcbench.regions import read_setting
from rcbench.report import figures as look
from rcbench.report.source import Source

MOST_SITES = 4  # rows of maps that still fit a page


def otoc_figure(source: Source, experiment: Experiment, folder: Path) -> look.Picture | None:
    """The maps of one experiment; None where no OTOC row names a butterfly and a probe."""
    rows = _places(source.compared(experiment.name, "otoc"))
    if rows.empty:
        return None
    sites = sorted(rows["butterfly"].unique())
    shown = sites[:MOST_SITES]
    columns = [name for name in ("measured", "noise_model", "ideal") if rows[name].notna().any()]
    with look.style():
        figure = Figure(figsize=(look.WIDE, 0.7 + 1.75 * len(shown)), layout="constrained")
        grid = figure.subplots(len(shown), len(columns), squeeze=False, sharex=True, sharey=True)
        for line, site in zip(grid, shown, strict=True):
            for axes, column in zip(line, columns, strict=True):
                _map(axes, rows[rows["butterfly"] == site], column)
            line[0].set_ylabel(f"butterfly on {site}\ndepth")
        for axes, column in zip(grid[0], columns, strict=True):
            axes.set_title(column.replace("_", " "))
        for axes in grid[-1]:
            axes.set_xlabel("probe (qubit of the experiment)")
        bar = figure.colorbar(grid[0, 0].collections[0], ax=grid, shrink=0.75, pad=0.015, label="OTOC")
        bar.outline.set_visible(False)
        left_out = f" Butterfly sites {', '.join(str(s) for s in sites[MOST_SITES:])} are in the tables." if sites[MOST_SITES:] else ""
        caption = (
            f"OTOC of {experiment.name} by probe and depth: light is 1 (the butterfly has not arrived), dark is 0 or "
            f"below (it has spread over the probe). Cells marked × depart from the "
            f"{experiment.against.replace('-', ' ')}; cells marked ? are undecided.{left_out}"
        )
        alt = "OTOC maps. " + "; ".join(
            f"butterfly {site}, depth {depth:g}: mean {part['measured'].mean():.2f}"
            for (site, depth), part in rows.groupby(["butterfly", "depth"])
        )
        return look.finish(figure, folder, f"{experiment.name}-otoc-map", caption, alt + ".")


def _places(rows: pd.DataFrame) -> pd.DataFrame:
    """Rows whose region names a butterfly and a probe, with both as columns."""
    settings = [read_setting(region) if "=" in region else {} for region in rows["region"]]
    named = [{"butterfly", "probe"} <= setting.keys() for setting in settings]
    chosen = rows[named]
    kept = [setting for setting, keep in zip(settings, named, strict=True) if keep]
    return chosen.assign(
        butterfly=[_order(setting["butterfly"]) for setting in kept], probe=[_order(setting["probe"]) for setting in kept]
    )


def _order(label: str) -> int:
    return int(label) if label.isdigit() else -1


def _map(axes: Axes, rows: pd.DataFrame, column: str) -> None:
    table = rows.pivot_table(index="depth", columns="probe", values=column, aggfunc="mean")
    sns.heatmap(
        table, ax=axes, vmin=0, vmax=1, cmap="cividis", cbar=False, linewidths=0.4, linecolor="white",
        xticklabels=[str(label) for label in table.columns], yticklabels=[f"{depth:g}" for depth in table.index],
    )  # fmt: skip
    axes.set(xlabel="", ylabel="")
    axes.tick_params(rotation=0, length=0)
    axes.invert_yaxis()
    if column != "measured":
        return
    found = rows.pivot_table(index="depth", columns="probe", values="finding", aggfunc="first")
    for (at, probe), finding in np.ndenumerate(found.to_numpy(dtype=object)):
        sign = {"departs": "×", "undecided": "?"}.get(str(finding))
        if sign:
            dark = float(np.nan_to_num(table.to_numpy()[at, probe])) < 0.55
            axes.text(probe + 0.5, at + 0.5, sign, ha="center", va="center", fontsize=8, weight="bold",
                      color="white" if dark else "black")  # fmt: skip

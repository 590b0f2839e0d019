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
from rcbench.report.printed import MINUS
from rcbench.report.source import Source

NEGATIVE = -0.15  # cells below it carry a minus sign: the colours end at 0
MOST_SITES = 4  # rows of maps that still fit a page


def otoc_figure(source: Source, experiment: Experiment, folder: Path) -> look.Picture | None:
    """The maps of one experiment; None where no OTOC row names a butterfly and a probe."""
    rows = _places(source.compared(experiment.name, "otoc"), ("butterfly", "probe"))
    if rows.empty or rows["measured"].isna().all():
        return None
    sites = sorted(rows["butterfly"].unique())
    lines = [(f"butterfly on {site}", rows[rows["butterfly"] == site]) for site in sites[:MOST_SITES]]
    reference = _places(source.compared(experiment.name, "reference_echo"), ("probe",))
    if reference["probe"].nunique() > 1:
        lines.insert(0, ("reference", reference))
    columns = [name for name in ("measured", "noise_model", "ideal") if rows[name].notna().any()]
    with look.style():
        figure = Figure(figsize=(look.WIDE, 0.7 + 1.6 * len(lines)), layout="constrained")
        grid = figure.subplots(len(lines), len(columns), squeeze=False, sharex=True, sharey=True)
        for row_of_axes, (label, part) in zip(grid, lines, strict=True):
            for axes, column in zip(row_of_axes, columns, strict=True):
                _map(axes, part, column)
            row_of_axes[0].set_ylabel(f"{label}\ndepth")
        for axes, column in zip(grid[0], columns, strict=True):
            axes.set_title(column.replace("_", " "))
        for axes in grid[-1]:
            axes.set_xlabel("probe (qubit of the experiment)")
        bar = figure.colorbar(grid[0, 0].collections[0], ax=grid, shrink=0.6, pad=0.015, label="echo or OTOC")
        bar.outline.set_visible(False)
        return look.finish(figure, folder, f"{experiment.name}-otoc-map", *_words(experiment, rows, sites[MOST_SITES:]))


def _words(experiment: Experiment, rows: pd.DataFrame, left_out: list[int]) -> tuple[str, str]:
    rest = f" Butterfly sites {', '.join(str(site) for site in left_out)} are in the tables." if left_out else ""
    caption = (
        f"OTOC of {experiment.name} by probe and depth. Light is 1: the butterfly has not arrived. Dark is 0 or below: "
        f"it has spread over the probe. The reference, the same echo without a butterfly, must stay light for this to "
        f"mean anything. Cells marked × depart from the {experiment.against.replace('-', ' ')}; cells marked ? are "
        f"undecided; − stands for values below {MINUS}{-NEGATIVE:g}.{rest}"
    )
    alt = "OTOC maps. " + "; ".join(
        f"butterfly {site}, depth {depth:g}: mean {part['measured'].mean():.2f}"
        for (site, depth), part in rows.groupby(["butterfly", "depth"])
        if part["measured"].notna().any()
    )
    return caption, alt + "."


def _places(rows: pd.DataFrame, names: tuple[str, ...]) -> pd.DataFrame:
    """The rows whose region names all these places, with each as a column of qubits."""
    settings = [read_setting(region) if "=" in region else {} for region in rows["region"]]
    whole = [all(setting.get(name, "").isdigit() for name in names) for setting in settings]
    kept = [setting for setting, keep in zip(settings, whole, strict=True) if keep]
    return rows[whole].assign(**{name: [int(setting[name]) for setting in kept] for name in names})


def _map(axes: Axes, rows: pd.DataFrame, column: str) -> None:
    table = rows.pivot_table(index="depth", columns="probe", values=column, aggfunc="mean")
    sns.heatmap(
        table, ax=axes, vmin=0, vmax=1, cmap="cividis", cbar=False, linewidths=0.4, linecolor="white",
        xticklabels=[str(label) for label in table.columns], yticklabels=[f"{depth:g}" for depth in table.index],
    )  # fmt: skip
    axes.set(xlabel="", ylabel="")
    axes.tick_params(rotation=0, length=0)
    axes.invert_yaxis()
    signs = np.where(table.to_numpy(dtype=float) < NEGATIVE, "−", "").astype(object)
    if column == "measured":
        found = rows.pivot_table(index="depth", columns="probe", values="finding", aggfunc="first")
        for at, finding in np.ndenumerate(found.to_numpy(dtype=object)):
            signs[at] += {"departs": "×", "undecided": "?"}.get(str(finding), "")
    for (at, probe), sign in np.ndenumerate(signs):
        if not sign:
            continue
        dark = float(np.nan_to_num(table.to_numpy()[at, probe])) < 0.45
        axes.text(
            probe + 0.5, at + 0.5, sign, ha="center", va="center", fontsize=8, weight="bold",
            color="white" if dark else "black",
        )  # fmt: skip

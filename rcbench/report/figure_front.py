"""Space-time maps: OTOC, operator support and right ends by qubit and depth, with the fitted front drawn in."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
from matplotlib import patheffects
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from rcbench.arrays import FloatArray
from rcbench.campaign import Experiment
from rcbench.regions import read_setting
from rcbench.report import figures as look
from rcbench.report.figure_otoc import NEGATIVE
from rcbench.report.predicted import haar, means, panels, predicted_keys
from rcbench.report.source import Source

# signature, what varies along the map, title, whether the fitted front belongs on it
MAPS = (
    ("otoc_infinite_temperature", "butterfly", "OTOC, infinite temperature", True),
    ("otoc", "butterfly", "OTOC, all-zero state", True),
    ("operator_support", "site", "operator support", False),
    ("right_end_density", "site", "right-end density", False),
)
_SHIFT = re.compile(r"shift (-?[0-9.]+)")
_HALO = [patheffects.withStroke(linewidth=3.2, foreground="black")]
MOST_STARTS = 2


@dataclass(frozen=True, slots=True)
class Front:
    """A fitted front. side: 1 where it runs to higher qubits, -1 to lower ones; error: of the velocity."""

    start: int
    side: int
    velocity: float
    error: float
    width: float
    shift: float


def front_figures(source: Source, experiment: Experiment, folder: Path) -> list[look.Picture]:
    """One figure for each qubit on which the operator starts."""
    present = predicted_keys(source, experiment.name)
    tables = {key: _places(means(source, experiment.name, key), across) for key, across, _, _ in MAPS if key in present}
    starts = sorted({int(start) for rows in tables.values() for start in rows["probe"]})
    return [_figure(source, experiment, tables, start, folder) for start in starts[:MOST_STARTS]]


def _figure(
    source: Source, experiment: Experiment, tables: dict[str, pd.DataFrame], start: int, folder: Path
) -> look.Picture:
    front = fitted(source, experiment.name, start)
    maps = [entry for entry in MAPS if entry[0] in tables and (tables[entry[0]]["probe"] == start).any()]
    lines = -(-len(maps) // 2)
    with look.style():
        figure = Figure(figsize=(look.WIDE, 0.5 + 2.9 * lines), layout="constrained")
        grid = panels(figure, len(maps))
        for axes, (key, across, title, moving) in zip(grid, maps, strict=True):
            rows = tables[key]
            _map(figure, axes, rows[rows["probe"] == start], across, haar(source, experiment.name, key))
            axes.set_title(title)
            if moving and front is not None:
                _draw(axes, front, experiment)
            if moving:
                _cone(axes, source, experiment.name, start)
        for axes in grid[::2]:
            axes.set_ylabel("depth (layers)")
        handles, labels = grid[0].get_legend_handles_labels()
        if handles:
            legend = figure.legend(handles, labels, ncols=3, loc="outside lower left", handlelength=2.6)
            legend.set_frame_on(True)
            legend.get_frame().set(facecolor="#D9D9D9", edgecolor="none")
        return look.finish(
            figure, folder, f"{experiment.name}-space-time-{start}", *_words(experiment, tables, start, front)
        )


def fitted(source: Source, experiment: str, start: int) -> Front | None:
    """The front that was fitted to the operator that starts on a qubit; None where it was not."""
    rows = source.predicted(experiment, "butterfly_velocity", "ideal")
    width = source.predicted(experiment, "front_width", "ideal").set_index("region")["value"]
    for row in rows.to_dict("records"):
        setting, shift = read_setting(row["region"]), _SHIFT.search(row["method"])
        if setting.get("probe") == str(start) and shift is not None and np.isfinite(row["value"]):
            side = 1 if setting.get("end") == "right" else -1
            spread = float(width.get(row["region"], np.nan))
            return Front(start, side, float(row["value"]), float(row["std_error"]), spread, float(shift[1]))
    return None


def _places(rows: pd.DataFrame, across: str) -> pd.DataFrame:
    settings = [read_setting(label) if "=" in label else {} for label in rows["region"]]
    whole = [setting.get(across, "").isdigit() and setting.get("probe", "").isdigit() for setting in settings]
    kept = [setting for setting, keep in zip(settings, whole, strict=True) if keep]
    places = {name: [int(setting[name]) for setting in kept] for name in (across, "probe")}
    return rows[whole].assign(**places)


def _edges(values: FloatArray) -> FloatArray:
    """Borders of cells round rising places."""
    if len(values) < 2:
        return np.array([values[0] - 0.5, values[0] + 0.5])
    middle = (values[1:] + values[:-1]) / 2
    return np.concatenate([[values[0] - (middle[0] - values[0])], middle, [values[-1] + (values[-1] - middle[-1])]])


def _map(figure: Figure, axes: Axes, rows: pd.DataFrame, across: str, level: pd.Series[float]) -> None:
    table = rows.pivot_table(index="depth", columns=across, values="value", aggfunc="mean")
    numbers = table.to_numpy(dtype=float)
    places, depths = table.columns.to_numpy(dtype=float), table.index.to_numpy(dtype=float)
    # depths stand at their place, not side by side, so that a straight front is a straight line
    mesh = axes.pcolormesh(
        _edges(places), _edges(depths), numbers, cmap="cividis", vmin=0.0, vmax=1.0, edgecolors="white", linewidth=0.3
    )
    for (line, column), value in np.ndenumerate(numbers):
        if value < NEGATIVE:
            axes.text(
                float(places[column]), float(depths[line]), "−", ha="center", va="center", color="white", weight="bold"
            )
    axes.grid(False)
    axes.set_xticks(places if len(places) <= 12 else places[:: -(-len(places) // 12)])
    axes.set_yticks(depths if len(depths) <= 10 else depths[:: -(-len(depths) // 10)])
    axes.set_xlabel("qubit")
    bar = figure.colorbar(mesh, ax=axes, pad=0.02, shrink=0.92)
    bar.outline.set_visible(False)
    if level.nunique() == 1 and level.iloc[0] > 0.02:
        bar.ax.axhline(float(level.iloc[0]), color="white", linewidth=3)
        bar.ax.axhline(float(level.iloc[0]), color=look.BLACK, linewidth=1.2)


def _draw(axes: Axes, front: Front, experiment: Experiment) -> None:
    box = (axes.get_xlim(), axes.get_ylim())
    depths = np.linspace(0.0, max(experiment.depths), 200)
    middle = front.shift + front.velocity * depths
    axes.plot(
        front.start + front.side * middle, depths, color="white", linewidth=1.8, path_effects=_HALO,
        label="fitted front, r₀ + v L",
    )  # fmt: skip
    if np.isfinite(front.width):
        for sign in (-1, 1):
            spread = middle + sign * front.width * np.sqrt(depths)
            axes.plot(
                front.start + front.side * spread, depths, color="white", linewidth=1.1, linestyle=(0, (4, 2)),
                path_effects=_HALO, label="± s √L" if sign > 0 else None,
            )  # fmt: skip
    axes.set(xlim=box[0], ylim=box[1])


def _cone(axes: Axes, source: Source, experiment: str, start: int) -> None:
    rows = means(source, experiment, "light_cone_front")
    if rows.empty:
        return
    box = (axes.get_xlim(), axes.get_ylim())
    for end, side in (("right", 1), ("left", -1)):
        part = rows[[_is(label, start, end) for label in rows["region"]]]
        part = part[part["value"] > 0]
        axes.plot(
            start + side * part["value"], part["depth"], color="white", marker="D", markersize=4, linestyle="none",
            markeredgecolor="black", markeredgewidth=0.8, label="edge of the light cone" if side > 0 else None,
        )  # fmt: skip
    axes.set(xlim=box[0], ylim=box[1])


def _is(label: str, start: int, end: str) -> bool:
    setting = read_setting(label)
    return setting.get("probe") == str(start) and setting.get("end") == end


def _words(experiment: Experiment, tables: dict[str, pd.DataFrame], start: int, front: Front | None) -> tuple[str, str]:
    said = (
        f" Fitted front: v = {front.velocity:.3f} ± {front.error:.3f} sites a layer, with the width s √L, "
        f"s = {front.width:.2f}." if front is not None else ""
    )  # fmt: skip
    caption = (
        f"Experiment {experiment.name}: the operator Z starts on qubit {start}, mean over {experiment.instances} "
        "circuits. An OTOC of 1 (light) means that it has not reached a qubit; behind the front it falls to about 0 "
        "(dark), the value of Haar-random unitaries; − stands for values below the scale. Support and right ends count "
        "the Pauli strings of the operator: acting on a qubit, which is 3/4 for random strings (line on the bar), and "
        f"ending on it.{said}"
    )
    key, rows = next(iter(tables.items()))
    across = next(entry[1] for entry in MAPS if entry[0] == key)
    rows = rows[(rows["probe"] == start) & (rows["depth"] == rows["depth"].max())].sort_values(across)
    points = ", ".join(f"qubit {int(row[across])}: {row['value']:.2f}" for row in rows.to_dict("records"))
    return caption, f"Space-time maps. At depth {rows['depth'].iloc[0]:g}, {key.replace('_', ' ')}: {points}.{said}"

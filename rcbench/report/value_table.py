"""Predicted values in two tables: by region and depth with the Haar value beside them, and what belongs to no depth."""

from __future__ import annotations

import pandas as pd

from rcbench.campaign import Experiment
from rcbench.regions import read_setting
from rcbench.report.predicted import at_depths, by_size, haar, means, name_with_unit, predicted_keys
from rcbench.report.printed import MISSING, bracketed, number
from rcbench.report.source import Source
from rcbench.report.table import Row, Table, table
from rcbench.signatures import STATE_FRAME_KEYS, UNITARY_FRAME_KEYS

MOST_DEPTHS = 9  # columns that still fit a page
ROUNDING = 2e-6  # what single precision leaves of a zero
MODELS = {"ideal": "ideal", "noise-model": "noise model"}


def value_table(source: Source, experiment: Experiment) -> Table | None:
    """A block a signature, a line a region and model, a column a depth, errors in brackets; None without values."""
    name = experiment.name
    models = [model for model in MODELS if predicted_keys(source, name, model)]
    depths = at_depths(pd.DataFrame({"depth": experiment.depths}), MOST_DEPTHS)
    lines: list[Row] = []
    shown: list[pd.DataFrame] = []
    for key in predicted_keys(source, name):
        head, level = name_with_unit(key), haar(source, name, key)
        small = 0.0 if key in (*UNITARY_FRAME_KEYS, *STATE_FRAME_KEYS) else ROUNDING
        for model in models:
            rows = means(source, name, key, model)
            rows = rows[rows["depth"].notna()]
            shown.append(rows.assign(signature=key, model=model, haar=rows["region"].map(level)))
            for region in by_size(list(rows["region"])):
                part = rows[rows["region"] == region].set_index("depth")
                cells = [_cell(part, depth, small) for depth in depths]
                beside = [MODELS[model]] if len(models) > 1 else []
                there = model == "ideal" and region in level.index
                reference = number(float(level[region]), 4) if there else MISSING
                lines.append(Row(head=head, cells=(_region(region), *beside, *cells, reference)))
                head = ""
    if not lines:
        return None
    columns = ["region", *(["model"] if len(models) > 1 else [])]
    columns += [f"depth {depths[0]:g}>", *(f"{depth:g}>" for depth in depths[1:]), "Haar>"]
    left = len(experiment.depths) - len(depths)
    title = "Predicted values by depth" + (f" ({left} more depths in tables/predicted-{name}.csv)" if left else "")
    raw = pd.concat(shown, ignore_index=True)
    order = ["signature", "model", "region", "depth", "value", "std_error", "u_model", "haar", "method"]
    return table(f"predicted-{name}", title, ", ".join(columns), lines, raw[order])


def fitted_table(source: Source, experiment: Experiment) -> Table | None:
    """Fits and depths that belong to the whole experiment; None where there are none."""
    lines: list[Row] = []
    for key in predicted_keys(source, experiment.name):
        rows = means(source, experiment.name, key)
        for row in rows[rows["depth"].isna()].to_dict("records"):
            value = bracketed(row["value"], row["std_error"])
            lines.append(Row(cells=(name_with_unit(key), _region(row["region"]), value, row["method"])))
    columns = "quantity, region, value>, how"
    return table(f"fitted-{experiment.name}", "Of all depths together", columns, lines) if lines else None


def warnings(source: Source, experiment: Experiment) -> list[str]:
    """What the methods of the rows warn of: a signature, its depths and the words."""
    found: dict[tuple[str, str], list[str]] = {}
    for key in predicted_keys(source, experiment.name):
        for row in means(source, experiment.name, key).to_dict("records"):
            _, _, words = row["method"].partition(" instances; ")
            if words:
                found.setdefault((key, words), []).append(f"{row['depth']:g}")
    return [
        f"{name_with_unit(key)}, {'depths' if len(depths) > 1 else 'depth'} {', '.join(depths)}: {words}"
        for (key, words), depths in found.items()
    ]


def _region(label: str) -> str:
    """A region in one piece; the letters of the operators are a convention, the same in all rows."""
    if "=" not in label:
        return label or "all"
    parts = [f"{name} {value}" for name, value in read_setting(label).items() if name not in ("V", "W")]
    return ", ".join(parts).replace(" ", "\u00a0")


def _cell(rows: pd.DataFrame, depth: float, small: float) -> str:
    """The value at a depth; below `small` it is what rounding left of 0."""
    if depth not in rows.index:
        return MISSING
    value, error = rows[rows.index == depth][["value", "std_error"]].to_numpy(dtype=float)[0]
    return "0" if abs(value) < small and error < small else bracketed(float(value), float(error))

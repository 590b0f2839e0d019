"""Signatures that were predicted and not measured, as entropies and the distance from Porter-Thomas."""

from __future__ import annotations

import pandas as pd

from rcbench.report.printed import MISSING, fixed, number
from rcbench.report.source import Source
from rcbench.report.table import Row, Table, table
from rcbench.signatures.registry import signature


def predicted_table(source: Source, name: str) -> Table | None:
    """By signature, region and depth: ideal and noise model with its uncertainties; None where all was measured."""
    frame = source.predictions
    rows = frame[(frame["experiment"] == name) & frame["instance"].isna()]
    rows = rows[~rows["signature"].isin(source.signatures(name))]
    if rows.empty:
        return None
    lines: list[Row] = []
    for key in dict.fromkeys(rows["signature"]):
        part = rows[rows["signature"] == key].sort_values(["region", "depth"], kind="stable")
        head = signature(key).title + (f" / {signature(key).unit}" if signature(key).unit else "")
        for _, same in part.groupby(["region", "depth"], sort=False, dropna=False):
            lines.append(_line(same, head))
            head = ""
    columns = "region, depth>, ideal>, noise model>, u of stated rates>, u of Monte Carlo>"
    return table(f"predicted-{name}", "Predicted, not measured", columns, lines, rows)


def _line(rows: pd.DataFrame, head: str) -> Row:
    models = {model: part.iloc[0] for model, part in rows.groupby("model")}
    ideal, noise = (models.get(model) for model in ("ideal", "noise-model"))
    first = rows.iloc[0]
    return Row(
        head=head,
        cells=(
            str(first["region"]) or "all",
            f"{first['depth']:g}" if first["depth"] == first["depth"] else MISSING,
            fixed(None if ideal is None else float(ideal["value"]), 4),
            fixed(None if noise is None else float(noise["value"]), 4),
            number(None if noise is None else float(noise["u_model"]), 2),
            number(None if noise is None else float(noise["std_error"]), 2),
        ),
    )

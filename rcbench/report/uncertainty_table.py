"""The uncertainty budget: how much of each row's uncertainty comes from where."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd

from rcbench.report.printed import MISSING, number
from rcbench.report.source import Source
from rcbench.report.table import Row, Table, table
from rcbench.signatures.registry import signature

_PARTS = ("statistical", "between runs", "stated rates", "Monte Carlo", "numerical")


def uncertainty_table(source: Source) -> Table:
    """Standard uncertainties by experiment and signature: medians over depths and regions, and the largest."""
    rows, raw = [], []
    for experiment in source.campaign.experiments:
        head = experiment.name
        for key in source.signatures(experiment.name):
            parts = _parts(source, experiment.name, key)
            combined = source.compared(experiment.name, key)["u_combined"].dropna()
            if combined.empty:
                continue
            margin = source.compared(experiment.name, key)["margin"].median()
            # the scatter between runs is of single runs and is shown beside the others, not among them
            known = {name: u for name, u in parts.items() if math.isfinite(u) and name != "between runs"}
            largest = max(known, key=lambda name: known[name]) if known else MISSING
            cells = [signature(key).title, *(number(parts[name], 2) for name in _PARTS)]
            cells += [number(combined.median(), 2), number(combined.max(), 2), number(margin, 2), largest]
            rows.append(Row(head=head, cells=tuple(cells)))
            raw.append(
                {"experiment": experiment.name, "signature": key}
                | {name.replace(" ", "_"): value for name, value in parts.items()}
                | {"u_combined_median": combined.median(), "u_combined_max": combined.max(), "margin": margin}
            )
            head = ""
    columns = (
        "signature, statistical>, between runs>, stated rates>, Monte Carlo>, numerical>, combined>, "
        "combined (largest)>, margin>, largest part"
    )
    return table("uncertainty", "Standard uncertainties", columns, rows, pd.DataFrame(raw))


def _parts(source: Source, experiment: str, key: str) -> dict[str, float]:
    noise = source.predicted(experiment, key, "noise-model")
    ideal = source.predicted(experiment, key, "ideal")
    return {
        "statistical": _median(source.compared(experiment, key)["u_stat"]),
        "between runs": between_runs(source.estimated(experiment, key)),
        # fits over all depths have no prediction of their own: the comparison carried the rates through the fit
        "stated rates": _median(noise["u_model"] if len(noise) else source.compared(experiment, key)["u_syst"]),
        "Monte Carlo": _median(noise["std_error"]),
        "numerical": _median(ideal["std_error"]),
    }


def _median(values: pd.Series[float]) -> float:
    found = values[np.isfinite(values)]
    return float(found.median()) if len(found) else math.nan


def between_runs(estimates: pd.DataFrame) -> float:
    """Standard deviation between repeats of one circuit beyond shot noise; NaN where nothing was repeated.

    By the method of moments: variance of the repeats less the mean shot variance, pooled over circuits, not below 0.
    """
    keys = ["depth", "instance", "region"]
    rows = estimates.dropna(subset=["value"])
    groups = rows.assign(shot=rows["std_error"] ** 2).groupby(keys)
    table = pd.DataFrame(
        {"count": groups["value"].size(), "variance": groups["value"].var(ddof=1), "shot": groups["shot"].mean()}
    )
    table = table[table["count"] > 1]
    if table.empty:
        return math.nan
    weights = table["count"] - 1
    beyond = float(((table["variance"] - table["shot"]) * weights).sum() / weights.sum())
    return math.sqrt(max(beyond, 0.0))

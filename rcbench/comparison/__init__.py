"""Predictions and estimates to the comparison table: one row a signature, region and depth, and the fits against depth.

- `cells`: what is known of one signature, region and depth, as arrays by instance.
- `row`: one row of the table from such arrays: interval, paired difference, uncertainties.
- `finding`: the rule: agrees, departs, undecided or not-tested.
- `depths`, `fits`: the rows of an experiment at single depths, and those of decay fits over depths.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rcbench.campaign import Experiment
from rcbench.circuits.families import CONTROLS
from rcbench.comparison.cells import read_cells, returned_instances
from rcbench.comparison.depths import ExperimentRows
from rcbench.comparison.row import Terms
from rcbench.estimates import estimate
from rcbench.tables import COMPARISON

if TYPE_CHECKING:
    import pandas as pd

    from rcbench.kit import Kit

__all__ = ["compare_frames", "estimate", "read_comparison"]

_TEXT = (
    "experiment", "protocol", "signature", "axis", "unit", "region", "interval_kind", "direction", "finding", "note",
)  # fmt: skip
_WHOLE = ("n_qubits", "depth", "instances_planned", "instances_returned", "instances", "shots")


def compare_frames(
    kit: Kit, estimates: pd.DataFrame, predictions: pd.DataFrame, *, confidence: float | None = None
) -> pd.DataFrame:
    """Compare estimates with both predictions and find by the rule, row by row.

    A row pools the per-instance values of one signature, region and depth; rows with an empty depth pool a fit
    against depth, whole instances at a time. Predictions are averaged over the used instances, so that the
    difference is paired by circuit.

    Args:
        kit: what was planned. estimates: columns tables.ESTIMATES. predictions: columns tables.PREDICTIONS.
        confidence: level of the intervals and of 1 - alpha of the equivalence test; the campaign's where None.
    Returns:
        Columns tables.COMPARISON; what a row cannot give is missing, never NaN or infinite.

    Sources: JCGM 100:2008 (GUM) for the combined uncertainty; `statistics` and `estimators` cite theirs.
    """
    import pandas as pd

    cells = read_cells(estimates, predictions)
    returned = returned_instances(estimates)
    planned = planned_instances(kit)
    rows: list[dict[str, Any]] = []
    for experiment in kit.campaign.experiments:
        if experiment.protocol is None:
            continue
        terms = Terms(
            experiment=experiment,
            confidence=kit.campaign.confidence if confidence is None else confidence,
            budget=kit.campaign.device.errors is not None,
        )
        asked = {depth: planned.get((experiment.name, depth), set()) for depth in experiment.depths}
        back = {depth: returned.get((experiment.name, depth), set()) for depth in experiment.depths}
        measured = kit.protocol(experiment).measured
        rows += ExperimentRows(terms, cells.get(experiment.name, {}), asked, back, measured).rows()
    add_controls(kit.campaign.experiments, rows)
    return _typed(pd.DataFrame(rows, columns=list(COMPARISON), dtype=object))


def planned_instances(kit: Kit) -> dict[tuple[str, int], set[int]]:
    """Instances in the roster, by experiment and depth; adopted circuits need not be equally many at every depth."""
    planned: dict[tuple[str, int], set[int]] = defaultdict(set)
    for row in kit.rows:
        planned[row.experiment, row.depth].add(row.instance)
    return planned


def read_comparison(path: Path) -> pd.DataFrame:
    """A comparison table that rcbench wrote; numbers are missing where a cell is empty."""
    from rcbench.files import read_csv

    return _typed(read_csv(path, COMPARISON, text=_TEXT))


def _typed(frame: pd.DataFrame) -> pd.DataFrame:
    for column in COMPARISON:
        if column not in _TEXT:
            frame[column] = frame[column].astype("Int64" if column in _WHOLE else "Float64")
    return frame


def add_controls(experiments: Sequence[Experiment], rows: list[dict[str, Any]]) -> None:
    """Beside each row the measured value of its control, at the same signature, region and depth.

    Of several controls a product or dimer circuit comes first, then the order of the campaign; the note names the rest.
    """
    measured = {
        (row["experiment"], row["signature"], row["region"], row["depth"]): row["measured"]
        for row in rows
        if row["measured"] is not None
    }
    controls: dict[str, list[str]] = {}
    for experiment in sorted(experiments, key=lambda e: e.circuits.family not in CONTROLS):
        controls.setdefault(experiment.control_for, []).append(experiment.name)
    for row in rows:
        place = (row["signature"], row["region"], row["depth"])
        found = [name for name in controls.get(row["experiment"], []) if (name, *place) in measured]
        if found:
            row["control_value"] = measured[found[0], *place]
        if len(found) > 1:
            others = f"control value of {found[0]}; further controls: {', '.join(found[1:])}"
            row["note"] = "; ".join(filter(None, [row["note"], others]))

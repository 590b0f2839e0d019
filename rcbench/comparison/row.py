"""One row of the comparison table: measured interval, predictions, paired difference, uncertainties, finding."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from rcbench.campaign import Experiment
from rcbench.comparison.finding import Finding, Guard, against_margin, decide, own_guard
from rcbench.estimators.pool import Pool, Table, difference, interval, run_variation
from rcbench.signatures.registry import Signature
from rcbench.statistics import Component, Interval, combine
from rcbench.tables import COMPARISON

_ROUNDING = 1e-13
NO_BUDGET = "no error budget: compared with the ideal"


@dataclass(frozen=True, slots=True, kw_only=True)
class Terms:
    """On what terms an experiment is compared. budget: the device states its errors, so that there is a noise model."""

    experiment: Experiment
    confidence: float
    budget: bool

    @property
    def alpha(self) -> float:
        """Level of each one-sided test."""
        return 1 - self.confidence

    @property
    def against(self) -> str:
        """The prediction that is tested: the one asked for, or the ideal where there is no noise model."""
        return self.experiment.against if self.budget else "ideal"

    @property
    def no_budget(self) -> bool:
        """Whether the prediction asked for cannot be had."""
        return self.against != self.experiment.against

    def margin(self, key: str, reference: float | None) -> float | None:
        """The absolute margin of a signature; None where none is fixed."""
        stated = self.experiment.margins.get(key)
        if stated is None or not stated.relative:
            return None if stated is None else stated.value
        return None if reference is None else stated.value * abs(reference)


@dataclass(frozen=True, slots=True, kw_only=True)
class Row:
    """What a row is made from, whether of one depth or of a fit over depths.

    used: instances. planned, returned: how many were asked for and came back. table: values of the used ones. ideal,
    noise: predictions, instance for instance. u_model: uncertainty of the noise prediction from the stated rates.
    guard: None where the row's own value for a fully mixed state guards it. empty: the finding and why, where nothing
    was used.
    """

    entry: Signature
    region: str
    depth: int | None
    pool: Pool
    used: Sequence[int]
    planned: int
    returned: int
    table: Table
    shots: int
    ideal: Table | None = None
    noise: Table | None = None
    u_model: float = 0.0
    notes: Sequence[str] = ()
    guard: Guard | None = None
    empty: Finding | None = None


def write_row(terms: Terms, row: Row) -> dict[str, Any]:
    """The row, with the columns tables.COMPARISON; None where it cannot be given."""
    ideal, noise = _pooled(row.pool, row.ideal), _pooled(row.pool, row.noise)
    reference = ideal if terms.against == "ideal" else noise
    margin = terms.margin(row.entry.key, reference)
    n = terms.experiment.n_qubits
    out = dict.fromkeys(COMPARISON) | {
        "experiment": terms.experiment.name,
        "protocol": terms.experiment.protocol,
        "signature": row.entry.key,
        "axis": row.entry.axis,
        "unit": row.entry.unit,
        "region": row.region,
        "n_qubits": n,
        "depth": row.depth,
        "instances_planned": row.planned,
        "instances_returned": row.returned,
        "instances": len(row.used),
        "shots": row.shots,
        "ideal": ideal,
        "noise_model": noise,
        "null_value": row.entry.null_value(n),
        "margin": margin,
        "interval_kind": "",
    }
    if row.empty is not None:
        finding, notes = row.empty, list(row.notes)
    else:
        measured = interval(row.pool, row.table, terms.confidence)
        out |= _measured(measured) | _scores(row)
        finding = _find(terms, row, out, measured.value, reference, margin)
        notes = [*row.notes, *_runs(row)] + ([NO_BUDGET] if terms.no_budget else [])
    notes += [finding.note] if finding.note else []
    return out | {"finding": finding.finding, "direction": finding.direction, "note": "; ".join(notes)}


def _measured(found: Interval) -> dict[str, Any]:
    return {
        "measured": _finite(found.value),
        "std_error": _finite(found.std_error),
        "ci_low": _finite(found.low),
        "ci_high": _finite(found.high),
        "interval_kind": found.kind,
    }


def _scores(row: Row) -> dict[str, Any]:
    """Paired differences from both predictions in units of their combined uncertainty."""
    out: dict[str, Any] = {}
    for name, predicted, u_syst in (("z_ideal", row.ideal, 0.0), ("z_noise", row.noise, row.u_model)):
        if predicted is not None:
            found = difference(row.pool, row.table, predicted)
            total = combine(found.stat, Component(u_syst)).u
            out[name] = _finite(found.value / total) if total > 0 else None
    return out


def _find(
    terms: Terms, row: Row, out: dict[str, Any], measured: float, reference: float | None, margin: float | None
) -> Finding:
    """The finding; the difference and its uncertainties are put into `out`."""
    ideal = terms.against == "ideal"
    predicted = row.ideal if ideal else row.noise
    if predicted is None or reference is None:
        return Finding(finding="undecided", note="no prediction to compare with")
    found = difference(row.pool, row.table, predicted)
    u_syst = 0.0 if ideal else row.u_model
    tested, total = against_margin(found, u_syst, margin or 0.0, terms.alpha)
    out |= {
        "difference": _finite(found.value),
        "diff_ci_low": _finite(tested.low),
        "diff_ci_high": _finite(tested.high),
        "u_stat": _finite(found.stat.u),
        "u_syst": u_syst,
        "u_combined": _finite(total.u),
        "dof": _finite(total.dof),
    }
    if terms.no_budget:
        return Finding(finding="undecided")
    if margin is None:
        return Finding(finding="undecided", note="no margin fixed")
    if not math.isfinite(total.u):
        return Finding(finding="undecided", note="single shots of few instances give no uncertainty")
    guard = row.guard
    if guard is None:
        null = row.entry.null_value(terms.experiment.n_qubits)
        u_shot = found.shot / math.sqrt(len(row.used))
        guard = Guard() if null is None else own_guard(null, margin, reference, measured, u_shot, terms.alpha)
    return decide(
        row.entry,
        found,
        tested,
        guard=guard,
        u_syst=u_syst,
        margin=margin,
        alpha=terms.alpha,
        instances=len(row.used),
        shots=round(row.shots / len(row.used)),
    )


def _runs(row: Row) -> list[str]:
    found = run_variation(row.pool, row.table)
    if found.runs < 2:
        return []
    return [f"between {found.runs} runs of a circuit: standard deviation {found.std_dev:.2g} beyond shot noise"]


def _pooled(pool: Pool, predicted: Table | None) -> float | None:
    if predicted is None:
        return None
    values = pool.columns(predicted).values
    return _finite(float(pool.combine(np.nanmean(values[:, 0], axis=0))))


def _finite(value: float) -> float | None:
    """A number for the table; what is 0 but for rounding is 0, so that tables of equal inputs are equal."""
    if not math.isfinite(value):
        return None
    return 0.0 if abs(value) < _ROUNDING else value

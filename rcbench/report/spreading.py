"""What the spread axis rests on: the scrambled value, its margin, a living reference, and output statistics."""

from __future__ import annotations

import numpy as np

from rcbench.campaign import Experiment
from rcbench.report.curves import FEWEST, Curve, curve, mean_over_regions
from rcbench.report.source import Source
from rcbench.signatures.registry import signature

LIVING = 5.0  # standard errors; below them the ratio of two echoes has a bias and heavy tails


def scrambled_value(n_qubits: int) -> float:
    """Mean OTOC of a Haar unitary for traceless operators that square to one: -1/(4^n - 1).

    Source: Roberts and Yoshida, JHEP 04 (2017) 121, arXiv:1610.04903.
    """
    return -1.0 / (4.0**n_qubits - 1.0)


def spread_margin(experiment: Experiment) -> float:
    """The absolute OTOC margin that the campaign fixed; the default where it is relative: the target is about 0."""
    stated = experiment.margins.get("otoc")
    return signature("otoc").margin if stated is None or stated.relative else stated.value


def reference_alive(source: Source, experiment: str, depth: float) -> bool:
    """Whether the reference echo of every probe is well above zero, its value for a fully mixed state."""
    rows = source.compared(experiment, "reference_echo")
    rows = rows[rows["depth"] == depth]
    if rows.empty or rows[["measured", "std_error"]].isna().any(axis=None):
        return False
    far = rows["measured"] > LIVING * rows["std_error"]
    excludes = rows["ci_low"].isna() | (rows["ci_low"] > rows["null_value"].fillna(0.0))
    return bool((far & excludes).all())


def spread_curve(source: Source, experiment: Experiment) -> Curve:
    """Spread against depth, 1 - mean |OTOC - scrambled value|, where the reference echo is alive."""
    target = scrambled_value(experiment.n_qubits)
    points, _ = mean_over_regions(source, experiment.name, "otoc", from_value=target)
    points = points.only([reference_alive(source, experiment.name, depth) for depth in points.depth])
    return Curve(points.depth, 1 - points.value, 1 - points.high, 1 - points.low)


def anticoncentration(source: Source, experiment: Experiment) -> Curve:
    """(D C - 1) / v - 1 of the ideal circuits against depth, v = (D - 1)/(D + 1) of Porter-Thomas; band over instances.

    Source: Dalzell, Hunter-Jones, Brandao, PRX Quantum 3, 010333 (2022).
    """
    rows = source.predicted(experiment.name, "collision_probability", "ideal", by_instance=True)
    dimension = 2.0**experiment.n_qubits
    excess = (dimension * rows["value"] - 1) * (dimension + 1) / (dimension - 1) - 1
    points: list[tuple[float, float, float, float]] = []
    for depth, values in excess.groupby(rows["depth"]):
        centre, count = float(values.mean()), len(values)
        half = 2 * float(values.std(ddof=1)) / np.sqrt(count) if count >= FEWEST else 0.0
        points.append((float(depth), centre, centre - half, centre + half))
    return curve(*(list(column) for column in zip(*points, strict=True)) if points else ([], [], [], []))

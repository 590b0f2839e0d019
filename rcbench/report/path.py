"""The path by depth in the plane of spread against kept: the data of the figure and of the table beside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from rcbench.arrays import FloatArray
from rcbench.campaign import Experiment
from rcbench.circuits.schedule import dimer_layers
from rcbench.randomness import Draw
from rcbench.regions import read_setting
from rcbench.report.curves import Curve, compared_curve, curve
from rcbench.report.source import Group, Source
from rcbench.report.spreading import anticoncentration, scrambled_value, spread_curve

KEPT_KEYS = {"self_fidelity": "kept", "xeb_fidelity": "faithful, a bound from below"}


@dataclass(frozen=True, slots=True)
class PathData:
    """The path of one group.

    points: columns family, depth, spread, spread_low, spread_high, kept, kept_low, kept_high, constructed (a control
    without OTOCs, at the most that its circuits could spread). kept_key: the signature on the upright axis. measured:
    whether spread was measured by OTOC; else computed from the circuits.
    model: columns depth, spread, kept of the noise model; ideal: spread of the ideal circuits; both
    empty where they cannot be drawn. absent: why a control is missing.
    """

    points: pd.DataFrame
    kept_key: str
    measured: bool
    model: pd.DataFrame
    ideal: FloatArray
    absent: tuple[str, ...]


def path_data(source: Source, group: Group) -> PathData | None:
    """Join spread and kept by depth for a group and its controls; None where one of the two axes has no data."""
    families: dict[str, tuple[Experiment, ...]] = {"brickwork": group.experiments, **group.controls}
    spread = {family: _spread_of(source, members) for family, members in families.items()}
    measured = len(spread["brickwork"]) > 0
    if not measured:
        spread = {family: _computed_spread(source, members) for family, members in families.items()}
    for key in KEPT_KEYS:
        kept = {family: _kept_of(source, members, key) for family, members in families.items()}
        if len(kept["brickwork"]) and len(spread["brickwork"]):
            break
    else:
        return None
    frames, absent = [], []
    for family in families:
        bound = None
        if measured and family != "brickwork" and len(spread[family]) == 0 and len(kept[family]):
            bound = spread_bound(source, group, family)
            spread[family] = _constant(kept[family], bound)
        frame = _join(spread[family], kept[family]).assign(constructed=bound is not None)
        if frame.empty:
            what = "spread" if len(spread[family]) == 0 else "kept" if len(kept[family]) == 0 else "a common depth"
            absent.append(f"{family} has no place here: no data on {what}.")
        frames.append(frame.assign(family=family))
    points = pd.concat(frames, ignore_index=True)
    if not (points["family"] == "brickwork").any():
        return None
    model, ideal = _model_path(source, group, key) if measured else (pd.DataFrame(), np.zeros(0))
    return PathData(points, key, measured, model, ideal, tuple(absent))


def _spread_of(source: Source, members: tuple[Experiment, ...]) -> Curve:
    found = [spread_curve(source, experiment) for experiment in members if _has(source, experiment, "otoc")]
    return found[0] if found else curve([], [], [], [])


def _computed_spread(source: Source, members: tuple[Experiment, ...]) -> Curve:
    """Porter-Thomas collision excess over that of the ideal circuits, at most 1: 1 where outcomes are spread."""
    for experiment in members:
        points = anticoncentration(source, experiment)
        if len(points):
            ratio = [
                np.minimum(1 / np.maximum(1 + edge, 1e-9), 1.0) for edge in (points.value, points.high, points.low)
            ]
            return Curve(points.depth, *ratio)
    return curve([], [], [], [])


def _kept_of(source: Source, members: tuple[Experiment, ...], key: str) -> Curve:
    found = [compared_curve(source, experiment.name, key) for experiment in members if _has(source, experiment, key)]
    return found[0] if found else curve([], [], [], [])


def spread_bound(source: Source, group: Group, family: str) -> float:
    """The most that a control can spread: the share of (butterfly, probe) pairs whose OTOC its circuits can change.

    Without entangling gates that is a probe on the butterfly itself; with fixed partners, also one on its partner.
    """
    for experiment in group.experiments:
        regions = source.compared(experiment.name, "otoc")["region"].unique()
        pairs = [
            (setting["butterfly"], setting["probe"]) for setting in map(read_setting, regions) if "probe" in setting
        ]
        if not pairs:
            continue
        partner: dict[str, str] = {}
        if family == "dimers":
            device, depth = source.campaign.device, max(experiment.depths)
            for layer in dimer_layers(device, experiment.qubits, depth, Draw(source.campaign.seed, "partners")):
                partner |= {str(a): str(b) for a, b in layer} | {str(b): str(a) for a, b in layer}
        return sum(probe in (site, partner.get(site)) for site, probe in pairs) / len(pairs)
    return 0.0


def _constant(kept: Curve, bound: float) -> Curve:
    there = np.full(len(kept), bound)
    return Curve(kept.depth, there, np.zeros(len(kept)), there)


def _has(source: Source, experiment: Experiment, key: str) -> bool:
    return bool(source.compared(experiment.name, key)["measured"].notna().any())


def _join(spread: Curve, kept: Curve) -> pd.DataFrame:
    def frame(points: Curve, name: str) -> pd.DataFrame:
        return pd.DataFrame({
            "depth": points.depth, name: points.value, f"{name}_low": points.low, f"{name}_high": points.high,
        })  # fmt: skip

    return frame(spread, "spread").merge(frame(kept, "kept"), on="depth", how="inner")


def _model_path(source: Source, group: Group, key: str) -> tuple[pd.DataFrame, FloatArray]:
    """The noise model's own path and the spread of the ideal circuits, by depth, from the averaged predictions."""
    spread, kept = [], []
    for experiment in group.experiments:
        spread += [
            1 - (rows["value"] - scrambled_value(experiment.n_qubits)).abs().groupby(rows["depth"]).mean()
            for model in ("noise-model", "ideal")
            if len(rows := source.predicted(experiment.name, "otoc", model))
        ]
        fidelity = source.predicted(experiment.name, key, "noise-model")
        kept += [fidelity.groupby("depth")["value"].mean()] if len(fidelity) else []
    if len(spread) < 2 or not kept:
        return pd.DataFrame(), np.zeros(0)
    path = pd.DataFrame({"spread": spread[0], "kept": kept[0]}).dropna().rename_axis("depth").reset_index()
    return path, spread[1].to_numpy(dtype=float)

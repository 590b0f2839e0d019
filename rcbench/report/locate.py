"""Which couplers lose more than the budget says, as far as reference echoes on single probes tell.

An error in layer l of a circuit or of its inverse disturbs a probe's echo only where its gate lies in the probe's
light cone, counted from the first layer on: what comes after l cancels. So -ln(measured / model) of each probe and
depth is taken as an offset of the probe (readout, first gates) plus, for each coupler, its excess loss a gate times its
gates in the cone, twice. The excesses are fitted by non-negative least squares. Not every error in the cone flips the
probe, so an excess is a pointer to a coupler and no calibration of it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.campaign import Experiment
from rcbench.circuits.schedule import couplers_among, layers
from rcbench.device import Pair
from rcbench.randomness import Draw
from rcbench.regions import read_setting
from rcbench.report.source import Source

SIGMAS = 4.0  # tens of couplers are looked at: 4 keeps a false name below about one report in several hundred


@dataclass(frozen=True, slots=True, kw_only=True)
class Suspect:
    """A coupler of the device, the excess loss of echo a gate beyond the noise model, and its standard error."""

    experiment: str
    coupler: Pair
    excess: float
    std_error: float


def suspects(source: Source) -> list[Suspect]:
    """The couplers whose excess stands more than SIGMAS standard errors above zero, the largest first."""
    found: list[Suspect] = []
    for experiment in source.campaign.experiments:
        if experiment.circuits.family == "brickwork" and source.campaign.device.layout != "all-to-all":
            found += _of_experiment(source, experiment)
    return sorted(found, key=lambda suspect: -suspect.excess)


def _of_experiment(source: Source, experiment: Experiment) -> list[Suspect]:
    rows = source.compared(experiment.name, "reference_echo")
    rows = rows[(rows["measured"] > 5 * rows["std_error"]) & (rows["noise_model"] > 0) & (rows["std_error"] > 0)]
    places = [(read_setting(region).get("probe", "") if "=" in region else "") for region in rows["region"]]
    rows = rows.assign(probe=places)[[place.isdigit() for place in places]]
    device = source.campaign.device
    couplers = couplers_among(device, experiment.qubits)
    if len(rows) < len(couplers) or not couplers:
        return []
    # the draw is used by all-to-all devices only, which are left out
    schedule = layers(device, experiment.qubits, max(experiment.depths), Draw(source.campaign.seed, "unused"))
    probes = sorted({int(probe) for probe in rows["probe"]})
    gates = np.zeros((len(rows), len(couplers)))
    offsets = np.zeros((len(rows), len(probes)))
    for at, (probe, depth) in enumerate(zip(rows["probe"], rows["depth"], strict=True)):
        gates[at] = gates_in_cone(schedule[: int(depth)], int(probe), couplers)
        offsets[at, probes.index(int(probe))] = 1.0
    loss = np.log(rows["noise_model"].to_numpy() / rows["measured"].to_numpy())
    error = rows["std_error"].to_numpy() / rows["measured"].to_numpy()
    excess, std_error = _fit(gates, offsets, loss, error)
    return [
        Suspect(
            experiment=experiment.name,
            coupler=(experiment.qubits[pair[0]], experiment.qubits[pair[1]]),
            excess=float(value),
            std_error=float(u),
        )
        for pair, value, u in zip(couplers, excess, std_error, strict=True)
        if value > SIGMAS * u > 0
    ]


def gates_in_cone(schedule: list[tuple[Pair, ...]], probe: int, couplers: tuple[Pair, ...]) -> FloatArray:
    """(couplers,) gates of each coupler that can disturb the echo of a probe, those of the inverse included."""
    cone = {probe}
    count = dict.fromkeys(couplers, 0)
    for layer in schedule:
        touching = [pair for pair in layer if cone & set(pair)]
        for pair in touching:
            count[pair] += 2
            cone |= set(pair)
    return np.array([count[pair] for pair in couplers], dtype=np.float64)


def _fit(gates: FloatArray, offsets: FloatArray, loss: FloatArray, error: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Excess a gate and its standard error; couplers held at zero have error 0."""
    from scipy.optimize import nnls

    # an offset may have either sign: two non-negative columns
    design = np.hstack([gates, offsets, -offsets]) / error[:, None]
    weighted = loss / error
    solution, _ = nnls(design, weighted)
    used = np.flatnonzero(solution > 0)
    freedom = max(len(loss) - len(used), 1)
    residual = weighted - design @ solution
    # more scatter than the stated errors is the model's own: the errors are widened by it
    scale = max(float(residual @ residual) / freedom, 1.0)
    covariance = np.linalg.pinv(design[:, used].T @ design[:, used]) * scale
    std_error = np.zeros(gates.shape[1])
    for place, column in enumerate(used):
        if column < gates.shape[1]:
            std_error[column] = math.sqrt(max(float(covariance[place, place]), 0.0))
    return solution[: gates.shape[1]], std_error

"""Which couplers lose more than the budget says, as far as reference echoes on single probes tell.

In the Heisenberg picture a probe's Z grows, layer by layer from the end of the echo, into a string of Paulis.
Depolarising error on a coupler damps the echo only where the string is not the identity there, by 16/15 of the error's
Pauli probability, once in the circuit and once in its inverse; what comes before the string's arrival cancels. So
-ln(measured / model) of each probe and depth is the sum over couplers of the excess a gate times the expected number
of gates that the string meets (`strings`), plus an offset of the probe for readout. The excesses are fitted by
non-negative least squares. They are pointers: errors that are not depolarising weigh differently.

Sources: growth of strings, Nahum, Vijay, Haah, Phys. Rev. X 8, 021014 (2018), arXiv:1705.08975; conversion to average
infidelity, Nielsen, Phys. Lett. A 303, 249 (2002) (from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.campaign import Experiment
from rcbench.circuits.schedule import couplers_among
from rcbench.device import Pair
from rcbench.regions import read_setting
from rcbench.report.source import Source
from rcbench.report.strings import gates_met

SIGMAS = 4.0  # tens of couplers are looked at: 4 keeps a false name below about one report in several hundred
OFFSET = 0.02  # how far readout may be off its budget, in ln of the echo; a wider offset would take up couplers too
INFIDELITY = 15 / 16 * 4 / 5  # average infidelity of a depolarising error that damps by 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Suspect:
    """A coupler of the device, its average infidelity beyond the stated one, and the standard error of that."""

    experiment: str
    coupler: Pair
    excess: float
    std_error: float


def suspects(source: Source) -> list[Suspect]:
    """The couplers whose excess stands more than SIGMAS standard errors above zero, the largest first."""
    found: list[Suspect] = []
    for experiment in source.campaign.experiments:
        # all-to-all layers are drawn afresh for each instance: their means over instances say nothing of couplers
        if experiment.circuits.family == "brickwork" and source.campaign.device.layout != "all-to-all":
            found += _of_experiment(source, experiment)
    return sorted(found, key=lambda suspect: -suspect.excess)


def _of_experiment(source: Source, experiment: Experiment) -> list[Suspect]:
    rows = source.compared(experiment.name, "reference_echo")
    rows = rows[(rows["measured"] > 5 * rows["std_error"]) & (rows["noise_model"] > 0) & (rows["std_error"] > 0)]
    places = [(read_setting(region).get("probe", "") if "=" in region else "") for region in rows["region"]]
    rows = rows.assign(probe=places)[[place.isdigit() for place in places]]
    couplers = couplers_among(source.campaign.device, experiment.qubits)
    if len(rows) < len(couplers) or not couplers:
        return []
    probes = sorted({int(probe) for probe in rows["probe"]})
    met = {probe: gates_met(source.campaign, experiment, probe, couplers) for probe in probes}
    gates = np.array([met[int(p)][int(d)] for p, d in zip(rows["probe"], rows["depth"], strict=True)])
    offsets = np.array([[float(int(p) == probe) for probe in probes] for p in rows["probe"]])
    loss = np.log(rows["noise_model"].to_numpy() / rows["measured"].to_numpy())
    error = rows["std_error"].to_numpy() / rows["measured"].to_numpy()
    excess, std_error = _fit(gates, offsets, loss, error)
    return [
        Suspect(
            experiment=experiment.name,
            coupler=(experiment.qubits[pair[0]], experiment.qubits[pair[1]]),
            excess=INFIDELITY * float(value),
            std_error=INFIDELITY * float(u),
        )
        for pair, value, u in zip(couplers, excess, std_error, strict=True)
        if value > SIGMAS * u > 0
    ]


def _fit(gates: FloatArray, offsets: FloatArray, loss: FloatArray, error: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Excess damping a gate and its standard error, each (couplers,); couplers held at zero have error 0."""
    from scipy.optimize import nnls

    # an offset may have either sign: two non-negative columns; its size is bound like one more measurement of zero
    design = np.hstack([gates, offsets, -offsets]) / error[:, None]
    bound = np.eye(offsets.shape[1]) / OFFSET
    design = np.vstack([design, np.hstack([np.zeros((len(bound), gates.shape[1])), bound, -bound])])
    weighted = np.concatenate([loss / error, np.zeros(len(bound))])
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

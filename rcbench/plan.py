"""Precision and cost before the run: what each experiment's shots can resolve, and what it takes of the device's time.

One instance of every experiment is drawn and compiled, and its stated errors are counted gate by gate. The expected
signal and its standard error follow from closed forms, so that a plan takes seconds; they are good to about the
uncertainty of the stated rates, and at shallow depth the signals are underestimated, since errors that nothing has
spread yet cost less.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rcbench.campaign import Campaign, Experiment, load_campaign
from rcbench.signatures.registry import signature

if TYPE_CHECKING:
    import pandas as pd

    from rcbench.engine.noise import NoiseModel
    from rcbench.protocol import PlannedCircuit

PLAN = (
    "experiment", "protocol", "signature", "depth", "circuits", "shots", "device_seconds", "expected", "std_error",
    "margin", "instances_needed", "advice",
)  # fmt: skip
MOST_RATIO = 1e4  # more than 10^8 times the instances is no advice
POWER = 0.9  # chance to find agreement where there is no difference at all
_PER_SHOT_POLARIZATION = 0.55  # standard deviation of one shot, 0.43 to 0.66 for 4 to 16 qubits


def gate_fidelity(circuit: Any, noise: NoiseModel) -> float:
    """Product of (1 - p) over every place where the error model lets an error strike: no error at all in one run."""
    from rcbench.engine.trajectories import noisy_program

    return noisy_program(circuit, noise).error_free


def readout_fidelity(noise: NoiseModel, qubits: tuple[int, ...]) -> float:
    """Product over the measured qubits of 1 minus the mean of both flip probabilities."""
    flips = (noise.read_1_of_0 + noise.read_0_of_1) / 2
    return float(math.prod(1 - flips[qubit] for qubit in qubits))


Rule = Callable[[float, float, int, int, int], tuple[float, float]]


def _xeb(f: float, ro: float, n: int, shots: int, instances: int) -> tuple[float, float]:
    """Arute et al., Nature 574, 505 (2019): variance (1 + 2 F - F^2) / shots for Porter-Thomas circuits."""
    signal = f * ro
    return signal, math.sqrt((1 + 2 * signal - signal**2) / (shots * instances))


def _self(f: float, ro: float, n: int, shots: int, instances: int) -> tuple[float, float]:
    """Collisions near uniform: standard error sqrt(2 D) / shots of D C, and F = sqrt(D C - 1)."""
    signal = f * ro
    return signal, math.sqrt(2.0 * 2**n) / shots / (2 * max(signal, 1e-3)) / math.sqrt(instances)


def _return(f: float, ro: float, n: int, shots: int, instances: int) -> tuple[float, float]:
    signal = f * ro + (1 - f * ro) / 2**n
    return signal, math.sqrt(signal * (1 - signal) / (shots * instances))


def _polarization(f: float, ro: float, n: int, shots: int, instances: int) -> tuple[float, float]:
    return f * ro**1.5, _PER_SHOT_POLARIZATION / math.sqrt(shots * instances)


def _reference(f: float, ro: float, n: int, shots: int, instances: int) -> tuple[float, float]:
    signal = f * ro ** (2 / n)
    return signal, math.sqrt(max(1 - signal**2, 0.0) / (shots * instances))


def _otoc(f: float, ro: float, n: int, shots: int, instances: int) -> tuple[float, float]:
    """The scrambled case with all gates in the cone: variance (1 + C^2) / R^2 a shot, C near 0.

    Source: Mi et al., Science 374, 1479 (2021).
    """
    reference = f * ro ** (2 / n)
    return 0.0, 1 / (max(reference, 1e-3) * math.sqrt(shots * instances))


RULES: dict[str, Rule] = {
    "xeb_linear": _xeb,
    "xeb_fidelity": _xeb,
    "self_fidelity": _self,
    "echo_return": _return,
    "polarization": _polarization,
    "reference_echo": _reference,
    "otoc": _otoc,
}


def plan(campaign: Path | str | Campaign) -> pd.DataFrame:
    """The plan of a campaign: one row an experiment, signature and depth, with the columns of PLAN.

    Returns:
        shots, circuits and device_seconds are those of the experiment at that depth, all instances and roles together;
        expected and std_error those of the mean over instances, empty where no closed form is known.
    Raises:
        InputError: a campaign that cannot be built.

    Source: gate counting as in the supplement of Arute et al., Nature 574, 505 (2019); sizes of equivalence tests from
        Schuirmann, J. Pharmacokinet. Biopharm. 15, 657 (1987) (from memory).
    """
    import pandas as pd

    loaded = campaign if isinstance(campaign, Campaign) else load_campaign(campaign)
    rows: list[dict[str, Any]] = []
    for experiment in loaded.experiments:
        if experiment.protocol is not None:
            rows += _plan_experiment(loaded, experiment)
    return pd.DataFrame(rows, columns=list(PLAN))


def _plan_experiment(campaign: Campaign, experiment: Experiment) -> list[dict[str, Any]]:
    from rcbench.engine.noise import NoiseModel
    from rcbench.protocol import expand, load_protocol

    assert experiment.protocol is not None
    protocol = load_protocol(experiment.protocol)
    one = replace(experiment, instances=1, repeats=1)
    by_depth: dict[int, list[PlannedCircuit]] = defaultdict(list)
    for planned in expand(protocol, one, campaign):
        by_depth[planned.depth].append(planned)
    device = campaign.device
    noise = NoiseModel.from_device(device, experiment.qubits) if device.errors is not None else None
    runs = experiment.instances * experiment.repeats
    rows = []
    for depth, circuits in sorted(by_depth.items()):
        seconds = sum(_seconds(campaign, experiment, planned) for planned in circuits) * runs
        longest = max(circuits, key=lambda planned: len(planned.circuit))
        measured = longest.circuit.measured_qubits
        facts = None
        if noise is not None:
            facts = gate_fidelity(longest.circuit, noise), readout_fidelity(noise, measured), len(measured)
        rows += [
            {
                "experiment": experiment.name,
                "protocol": protocol.name,
                "signature": key,
                "depth": depth,
                "circuits": len(circuits) * runs,
                "shots": len(circuits) * runs * experiment.shots,
                "device_seconds": seconds,
                **_precision(key, experiment, campaign.confidence, facts),
            }
            for key in protocol.signature_keys
            if key in RULES
        ]
    return rows


def _seconds(campaign: Campaign, experiment: Experiment, planned: PlannedCircuit) -> float:
    """Device time of all shots of one circuit, and its share of the overhead of a job."""
    from rcbench.kit.roster import duration_ns

    timings, limits = campaign.device.timings, campaign.device.limits
    shot = duration_ns(planned.circuit, timings) + timings.overhead
    return (shot * experiment.shots + timings.job / (limits.circuits_per_job or 1)) * 1e-9


def _precision(
    key: str, experiment: Experiment, confidence: float, facts: tuple[float, float, int] | None
) -> dict[str, Any]:
    """Expected signal, its standard error, and how many instances an agreement would need."""
    margin = experiment.margins.get(key)
    out: dict[str, Any] = {"expected": None, "std_error": None, "margin": None, "instances_needed": None, "advice": ""}
    if facts is None:
        return out | {"advice": "no error budget stated: nothing to plan by"}
    from scipy.stats import norm

    expected, error = RULES[key](*facts, experiment.shots * experiment.repeats, experiment.instances)
    out |= {"expected": expected, "std_error": error}
    if margin is None:
        return out | {"advice": "no margin fixed"}
    width = margin.value * (abs(expected) if margin.relative else 1)
    quantiles = float(norm.ppf(confidence) + norm.ppf((1 + POWER) / 2))
    ratio = quantiles * error / width if width else math.inf
    needed = max(5, math.ceil(ratio**2 * experiment.instances)) if ratio < MOST_RATIO else None
    out |= {"margin": width, "instances_needed": needed}
    null = signature(key).null_value(facts[2]) or 0.0
    distance = abs((expected if key != "otoc" else facts[0]) - null)
    if needed is None or distance <= width:
        out["advice"] = "no signal left to test at this depth"
    elif needed > experiment.instances:
        out["advice"] = f"{needed} instances, or {math.ceil(experiment.shots * needed / experiment.instances)} shots"
    else:
        out["advice"] = "enough"
    return out


def plan_text(table: pd.DataFrame) -> str:
    """The plan for a terminal: a line a row, then the totals of each experiment and what the plan does not cover."""
    if table.empty:
        return "nothing to run: no experiment has a protocol"
    shown = table[["experiment", "signature", "depth", "expected", "std_error", "margin", "advice"]].copy()
    for column in ("expected", "std_error", "margin"):
        shown[column] = [f"{float(v):.3g}" if v is not None and v == v else "" for v in table[column].tolist()]
    lines = [shown.to_string(index=False, justify="left"), ""]
    once = table.drop_duplicates(["experiment", "depth"])
    for name, part in once.groupby("experiment", sort=False):
        deepest = [
            f"{key} to depth {rows['depth'].max()}"
            for key, rows in table[(table["experiment"] == name) & (table["advice"] == "enough")].groupby("signature")
        ]
        lines.append(
            f"{name}: {part['circuits'].sum()} circuits, {part['shots'].sum()} shots, "
            f"{part['device_seconds'].sum() / 60:.1f} min on the device; enough for "
            + (", ".join(deepest) if deepest else "nothing")
        )
    total = once["device_seconds"].sum() / 60
    lines += [
        f"in all: {once['circuits'].sum()} circuits, {once['shots'].sum()} shots, {total:.1f} min on the device",
        "Expected values count gates; they carry the uncertainty of the stated rates and cover no coherent errors.",
    ]
    return "\n".join(lines)

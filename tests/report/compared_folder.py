"""An invented compared campaign for the tests of the report: plausible numbers, not simulated ones."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
from scipy.special import erfc
from scipy.stats import t as student

from rcbench import tables
from rcbench.campaign import Campaign, Circuits, Experiment
from rcbench.device import Device, ErrorBudget, NativeGate, Rate, Times
from rcbench.files import write_csv, write_text
from rcbench.report.source import Source
from rcbench.signatures.registry import signature

N = 10
DEPTHS = (2, 4, 6, 8, 10, 12, 14, 16)
INSTANCES = 12
SHOTS = 2000
HOSTILE = "<script>alert('x')</script> & 50 % of #1 {a_b} | ~^\\"


def device() -> Device:
    couplers = tuple((q, q + 1) for q in range(N - 1))
    return Device(
        name="Tarn-10",
        n_qubits=N,
        layout="line",
        couplers=couplers,
        physical=tuple(f"T{q + 1}" for q in range(N)),
        one_qubit="r+rz",
        two_qubit=(NativeGate(name="cz"),),
        errors=ErrorBudget(
            one_qubit=Rate(
                default=0.0008, values={(3,): 0.0015}, measured="simultaneous", uncertainty=0.1, date="2031-04-02"
            ),
            two_qubit=Rate(
                default=0.006,
                values={(2, 3): 0.009},
                kind="pauli",
                measured="simultaneous",
                uncertainty=0.15,
                date="2031-04-02",
            ),
            readout_0to1=Rate(default=0.008, kind="pauli", date="2031-04-02"),
            readout_1to0=Rate(default=0.02, values={(7,): 0.035}, kind="pauli", date="2031-04-02"),
            idle=Times(t1=68.0, t2=41.0, t1_values={5: 31.0}, uncertainty=0.1, date="2031-03-30"),
        ),
        invented=True,
    )


def campaign() -> Campaign:
    common = {"depths": DEPTHS, "instances": INSTANCES, "shots": SHOTS, "qubits": tuple(range(N))}
    sites = {"butterfly": (1, 8), "probe": tuple(range(N))}

    def control(family: str) -> Circuits:
        return Circuits(family=family)

    experiments = (
        Experiment(name="sampling", protocol="direct-sampling", **common),
        Experiment(name="echo", protocol="loschmidt-echo", same_circuits_as="sampling", **common),
        Experiment(name="mirror", protocol="mirror-echo", same_circuits_as="sampling", **common),
        Experiment(name="butterfly", protocol="butterfly-echo", same_circuits_as="sampling", sites=sites, **common),
        Experiment(
            name="product", protocol="direct-sampling", circuits=control("product"), control_for="sampling", **common
        ),
        Experiment(
            name="dimers", protocol="direct-sampling", circuits=control("dimers"), control_for="sampling", **common
        ),
    )
    return Campaign(
        title="Spring review of the ten-qubit line", seed=20310402, device=device(), experiments=experiments
    )


def _decay(d, a, f):
    return a * f ** np.asarray(d, dtype=float)


def _models(
    experiment: str, key: str, d: float, region: str, draw: np.random.Generator
) -> tuple[float, float, float, float]:
    """(ideal, noise model, truth, shot-noise error) of one instance."""
    entangling = 0.0 if experiment == "product" else 1.0
    model, truth = _decay(d, 0.88, 0.955 + 0.035 * (1 - entangling)), _decay(d, 0.875, 0.944 + 0.045 * (1 - entangling))
    excess = (
        1 + 0.1 * draw.normal() + (4 * np.exp(-d / 2.5) if entangling else 20) + (3 if experiment == "dimers" else 0)
    )
    if key == "xeb_fidelity":
        return 1.0, model * (1 + 0.02 * draw.normal()), truth * (1 + 0.02 * draw.normal()), 0.02
    if key == "xeb_linear":
        return excess, model * excess, truth * excess, 0.03
    if key == "self_fidelity":
        return 1.0, model + 0.01, truth + 0.012, 0.03
    if key == "collision_probability":
        return (1 + excess) / 2**N, (1 + model**2 * excess) / 2**N, (1 + truth**2 * excess) / 2**N, 3e-5
    if key == "echo_return":
        return 1.0, model**2 + 2**-N, truth**2 + 2**-N, 0.01
    if key == "polarization":
        return 1.0, model**2, truth**2, 0.012
    probe = int(region.split("probe=")[1].split(";")[0])
    if key == "reference_echo":
        near = max(0.0, 1 - abs(probe - 4.5) / 4)
        return 1.0, _decay(2 * d, 0.96, 0.985), _decay(2 * d, 0.96, 0.985 - 0.006 * near), 0.02
    distance = abs(probe - int(region.split("=")[1].split(";")[0]))
    ideal = 1 - 0.5 * erfc((distance - 0.9 * d) / np.sqrt(1.28 * d)) + 0.03 * draw.normal()
    return ideal, ideal * 0.96, ideal * 0.95 + 0.03 * draw.normal(), 0.04


KEYS = {
    "direct-sampling": ("xeb_fidelity", "xeb_linear", "self_fidelity", "collision_probability"),
    "loschmidt-echo": ("echo_return", "polarization"),
    "mirror-echo": ("echo_return", "polarization"),
    "butterfly-echo": ("reference_echo", "otoc"),
}


def _regions(experiment: Experiment, key: str) -> list[str]:
    if key == "reference_echo":
        return [f"probe={p};V=Z" for p in experiment.sites["probe"]]
    if key == "otoc":
        return [
            f"butterfly={b};probe={p};W=X;V=Z" for b in experiment.sites["butterfly"] for p in experiment.sites["probe"]
        ]
    return [""]


def frames(which: Campaign, seed: int = 5) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """(roster, estimates, predictions, comparison)."""
    draw = np.random.default_rng(seed)
    roster, estimates, predictions, comparison = [], [], [], []
    for experiment in which.experiments:
        for key in KEYS[experiment.protocol or ""]:
            for region in _regions(experiment, key):
                for depth in experiment.depths:
                    head = {
                        "experiment": experiment.name,
                        "protocol": experiment.protocol,
                        "signature": key,
                        "axis": signature(key).axis,
                        "unit": "",
                        "region": region,
                        "n_qubits": N,
                        "depth": depth,
                    }
                    values = []
                    for instance in range(INSTANCES):
                        ideal, model, truth, error = _models(experiment.name, key, depth, region, draw)
                        measured = truth + error * draw.normal()
                        values.append((ideal, model, measured, error))
                        more = {"instance": instance, "circuit_id": f"{experiment.name}-i{instance:03d}-d{depth:03d}"}
                        estimates.append(
                            head | more | {"repeat": 0, "value": measured, "std_error": error, "shots": SHOTS}
                        )
                        for name, value, u in (
                            ("ideal", ideal, 0.0),
                            ("noise-model", model, 0.02 * abs(model) * depth / 4),
                        ):
                            predictions.append(
                                head
                                | more
                                | {
                                    "model": name,
                                    "value": value,
                                    "std_error": 1e-3 * (name != "ideal"),
                                    "u_model": u,
                                    "method": "state vector" if name == "ideal" else "trajectories",
                                }
                            )
                    table = np.array(values)
                    for column, name in enumerate(("ideal", "noise-model")):
                        mean = table[:, column].mean()
                        predictions.append(
                            head
                            | {
                                "instance": None,
                                "circuit_id": "",
                                "model": name,
                                "value": mean,
                                "std_error": 3e-4 * column,
                                "u_model": 0.02 * mean * depth / 4 * column,
                                "method": "",
                            }
                        )
                    comparison.append(head | _compared(experiment, key, table, depth))
        if experiment.protocol in ("loschmidt-echo", "mirror-echo"):
            for key, value, ideal, model, u in (
                ("layer_loss", 0.055, 0.0, 0.045, 0.0012),
                ("spam", 0.78, 1.0, 0.79, 0.012),
            ):
                row = dict.fromkeys(tables.COMPARISON) | {
                    "experiment": experiment.name,
                    "protocol": experiment.protocol,
                    "signature": key,
                    "axis": "faithful",
                    "unit": "",
                    "region": "",
                    "n_qubits": N,
                    "instances_planned": 12,
                    "instances_returned": 12,
                    "instances": 12,
                    "shots": 192000,
                    "ideal": ideal,
                    "noise_model": model,
                    "measured": value,
                    "std_error": u,
                    "ci_low": value - 2.2 * u,
                    "ci_high": value + 2.2 * u,
                    "interval_kind": "t, whole instances",
                    "difference": value - model,
                    "diff_ci_low": value - model - 2.2 * u,
                    "diff_ci_high": value - model + 2.2 * u,
                    "u_stat": u,
                    "u_syst": 0.002,
                    "u_combined": 0.0023,
                    "dof": 11,
                    "z_noise": (value - model) / u,
                    "margin": signature(key).margin,
                    "direction": "worse",
                    "finding": "departs" if key == "layer_loss" else "agrees",
                }
                comparison.append(row)
        roster += [
            dict.fromkeys(tables.ROSTER, "")
            | {
                "circuit_id": f"{experiment.name}-i{instance:03d}-d{depth:03d}",
                "experiment": experiment.name,
                "protocol": experiment.protocol,
                "role": "forward",
                "family": experiment.circuits.family,
                "gates": experiment.circuits.gates,
                "n_qubits": N,
                "depth": depth,
                "instance": instance,
                "repeat": 0,
                "shots": SHOTS,
                "run_order": 0,
                "batch": 0,
                "two_qubit_gates": depth * 4.5,
                "native_layers": depth * 3,
                "duration_ns": depth * 150.0,
            }
            for instance in range(INSTANCES)
            for depth in experiment.depths
        ]
    return (
        pd.DataFrame(roster)[list(tables.ROSTER)],
        pd.DataFrame(estimates)[list(tables.ESTIMATES)],
        pd.DataFrame(predictions)[list(tables.PREDICTIONS)],
        pd.DataFrame(comparison)[list(tables.COMPARISON)],
    )


def _compared(experiment: Experiment, key: str, table: np.ndarray, depth: int) -> dict[str, object]:
    ideal, model, measured, _ = table.mean(axis=0)
    difference = table[:, 2] - table[:, 1]
    count = len(table)
    t = float(student.ppf(0.975, count - 1))
    error, paired = table[:, 2].std(ddof=1) / count**0.5, difference.std(ddof=1) / count**0.5
    u_model = 0.02 * abs(model) * depth / 4
    combined = float(np.hypot(paired, u_model))
    row = signature(key)
    margin = row.margin * (abs(model) if row.margin_relative else 1.0)
    apart = abs(float(difference.mean()))
    finding = (
        "agrees"
        if apart + t * combined < margin
        else "departs"
        if apart - t * combined > 0 and apart > margin / 3
        else "undecided"
    )
    cells: dict[str, object] = dict.fromkeys(tables.COMPARISON)
    cells |= {
        "instances_planned": count,
        "instances_returned": count,
        "instances": count,
        "shots": count * SHOTS,
        "ideal": ideal,
        "noise_model": model,
        "null_value": signature(key).null_value(N),
        "measured": measured,
        "std_error": error,
        "ci_low": measured - t * error,
        "ci_high": measured + t * error,
        "interval_kind": "t",
        "difference": difference.mean(),
        "diff_ci_low": difference.mean() - t * combined,
        "diff_ci_high": difference.mean() + t * combined,
        "u_stat": paired,
        "u_syst": u_model,
        "u_combined": combined,
        "dof": count - 1,
        "z_noise": difference.mean() / combined,
        "z_ideal": (measured - ideal) / error,
        "margin": margin,
        "finding": finding,
        "direction": ("worse" if difference.mean() < 0 else "better") if finding == "departs" else "",
        "note": "more instances would settle it" if finding == "undecided" else "",
    }
    if experiment.name == "mirror" and depth == 16:  # nothing came back
        for column in ("instances_returned", "instances", "shots"):
            cells[column] = 0
        for column in (
            "measured",
            "std_error",
            "ci_low",
            "ci_high",
            "difference",
            "diff_ci_low",
            "diff_ci_high",
            "u_stat",
            "u_combined",
            "dof",
            "z_noise",
            "z_ideal",
        ):
            cells[column] = float("nan")
        cells |= {"finding": "not-tested", "note": f"no data {HOSTILE}", "direction": ""}
    return {
        key: value
        for key, value in cells.items()
        if key not in ("experiment", "protocol", "signature", "axis", "unit", "region", "n_qubits", "depth")
    }


def audit() -> dict[str, object]:
    counts = {
        "asked": 96,
        "returned": 96,
        "complete": 96,
        "short": 0,
        "over": 0,
        "missing": 0,
        "unknown": 0,
        "repeats": 0,
        "discards": 0,
        "shots_asked": 192000,
        "shots_returned": 192000,
    }
    table = [{"experiment": name} | counts for name in ("sampling", "echo", "mirror", "butterfly", "product", "dimers")]
    table[2] |= {"returned": 84, "complete": 84, "missing": 12, "shots_returned": 168000}
    facts = (
        "kit_hash",
        "started",
        "ended",
        "device",
        "calibration",
        "calibrated",
        "physical_qubits",
        "compiler",
        "decoupling",
        "twirling",
        "post_selection",
        "readout_correction",
        "software",
        "notes",
    )
    return {
        "bit_order": "q0-first",
        "needs_attention": True,
        "table": table,
        "files": [{"name": "shots.csv", "sha256": "ab" * 32, "rows": 1128000}],
        "problems": [
            {"severity": "warning", "text": f"12 circuits of mirror are missing {HOSTILE}", "hint": "send them"}
        ],
        "execution": dict.fromkeys(facts, "not stated")
        | {
            "started": "2031-04-02T08:10:00Z",
            "ended": "2031-04-02T11:40:00Z",
            "compiler": "none",
            "software": HOSTILE,
        },
        "not_stated": ["device"],
        "wall_time": {
            "first": "2031-04-02T08:10:00Z",
            "last": "2031-04-02T11:40:00Z",
            "seconds": 12600.0,
            "source": "execution.toml",
        },
        "dropped": [{"experiment": "mirror", "instance": 3, "depth": 16, "repeat": 0, "lacking": "the mirror circuit"}],
        "dropped_count": 1,
        "missing": [f"mirror-mirror-i{i:03d}-d016" for i in range(12)],
        "missing_count": 12,
        "unknown": {},
        "unknown_count": 0,
        "set_aside": 0,
        "trend_z": {"mirror: missing": 3.4},
    }


def provenance() -> dict[str, object]:
    return {
        "command": "compare",
        "complete": True,
        "started": "2031-04-03T09:00:00+00:00",
        "kit_built": "2031-03-28T10:00:00+00:00",
        "inputs": {"kit_hash": "c0ffee" * 10, "shots_hash": "beef" * 16, "seed": 20310402},
        "versions": {"rcbench": "0.1.0", "numpy": "2.3.0", "cirq-core": "1.6.0", "numba": "0.62.0"},
    }


def source(which: Campaign | None = None, seed: int = 5) -> Source:
    which = which or campaign()
    roster, estimates, predictions, comparison = frames(which, seed)
    for frame in (roster, estimates, predictions, comparison):
        for column in frame.columns:
            if column in ("instance", "depth", "value", "std_error") or pd.api.types.is_numeric_dtype(frame[column]):
                frame[column] = pd.to_numeric(frame[column]).astype(float)
            elif frame[column].isna().all() and column not in ("direction", "note"):
                frame[column] = frame[column].astype(float)
            else:
                frame[column] = frame[column].fillna("")
    return Source(
        campaign=which,
        roster=roster,
        comparison=comparison,
        estimates=estimates,
        predictions=predictions,
        audit=audit(),
        provenance=provenance(),
    )


def write_folder(folder: Path, which: Campaign | None = None, seed: int = 5) -> Path:
    """The folder as a comparison leaves it."""
    from rcbench.campaign import dump_campaign

    which = which or campaign()
    folder.mkdir(parents=True, exist_ok=True)
    write_text(folder / "campaign.toml", dump_campaign(which))
    names = ("roster", "estimates", "predictions", "comparison")
    columns = (tables.ROSTER, tables.ESTIMATES, tables.PREDICTIONS, tables.COMPARISON)
    for name, frame, order in zip(names, frames(which, seed), columns, strict=True):
        write_csv(folder / f"{name}.csv", frame, order)
    write_text(folder / "audit.json", json.dumps(audit()))
    write_text(folder / "provenance.json", json.dumps(provenance()))
    return folder

"""Synthetic campaigns with known truth: invented kits, shots drawn by numpy, predictions in closed form."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from types import SimpleNamespace

import numpy as np
import pandas as pd

from rcbench.campaign import Campaign, Circuits, Experiment, Margin
from rcbench.comparison import compare_frames, estimate
from rcbench.device import Device, ErrorBudget
from rcbench.shots.outcomes import Outcomes
from rcbench.signatures.registry import signature
from rcbench.tables import PREDICTIONS

N = 6
SIZE = 2**N
PROBES = (1, 2)
MODELS = ("ideal", "noise-model")
PROTOCOLS = {
    "direct-sampling": (
        ("xeb_linear", "xeb_fidelity", "self_fidelity", "collision_probability", "layer_loss", "spam"),
        ("cross-entropy",),
    ),
    "mirror-echo": (("echo_return", "polarization", "layer_loss", "spam"), ("echo",)),
    "butterfly-echo": (("otoc", "reference_echo"), ("butterfly-echo",)),
}


def device(budget: bool = True) -> Device:
    return Device(
        name="Hazel-6",
        n_qubits=N,
        layout="line",
        couplers=tuple((q, q + 1) for q in range(N - 1)),
        errors=ErrorBudget() if budget else None,
        invented=True,
    )


def experiment(name: str, protocol: str, *, depths=(2, 4, 8, 12), instances=10, shots=400, **more) -> Experiment:
    margins = {key: Margin(value=value) for key, value in more.pop("margins", {}).items()}
    circuits = Circuits(family=more.pop("family", "brickwork"))
    return Experiment(
        name=name,
        protocol=protocol,
        depths=depths,
        instances=instances,
        shots=shots,
        qubits=tuple(range(N)),
        margins=margins,
        circuits=circuits,
        **more,
    )


@dataclass
class Kit:
    """What estimates and comparison need of a kit."""

    campaign: Campaign
    rows: list = field(default_factory=list)

    def protocol(self, experiment: Experiment):
        measured, estimators = PROTOCOLS[experiment.protocol]
        return SimpleNamespace(measured=measured, estimators=estimators, roles=())


def kit_of(*experiments: Experiment, budget: bool = True, confidence: float = 0.95) -> Kit:
    campaign = Campaign(title="invented", seed=1, device=device(budget), experiments=experiments, confidence=confidence)
    kit = Kit(campaign)
    for e in experiments:
        sites = (3,)
        roles = [("sample", "", {})] if e.protocol != "butterfly-echo" else [("reference", "", {})]
        if e.protocol == "butterfly-echo":
            roles += [("butterfly", f"s{site}", {"butterfly": site, "pauli": "X"}) for site in sites]
        for instance in range(e.instances):
            for depth in e.depths:
                kit.rows += [_row(e, instance, depth, *role) for role in roles]
    return kit


def _row(e, instance, depth, role, setting, params):
    measured = PROBES if e.protocol == "butterfly-echo" else tuple(range(N))
    return SimpleNamespace(
        circuit_id=f"{e.name}-{role}-i{instance:03d}-d{depth:03d}{setting}",
        experiment=e.name,
        role=role,
        setting=setting,
        depth=depth,
        instance=instance,
        repeat=0,
        measured_qubits=measured,
        target="" if e.protocol == "direct-sampling" else "0" * len(measured),
        params=params,
    )


def haar_probabilities(rng: np.random.Generator) -> np.ndarray:
    """Outcome probabilities of a Haar-random state: normalised exponentials."""
    p = rng.exponential(size=SIZE)
    return p / p.sum()


@dataclass
class Truth:
    """Drawn circuits and the distributions their outcomes come from, by circuit_id."""

    ideal: dict = field(default_factory=dict)
    real: dict = field(default_factory=dict)


def draw_truth(kit: Kit, rng: np.random.Generator, kept: Callable) -> Truth:
    """Distributions with the fraction kept(row) of the ideal outcome and the rest uniform.

    For butterfly echoes kept(row) is the mean Z of every probe, independent of each other.
    """
    truth = Truth()
    for row in kit.rows:
        if row.role in ("reference", "butterfly"):
            up = (1 + kept(row)) / 2
            bits = (np.arange(2 ** len(PROBES))[:, None] >> np.arange(len(PROBES))) & 1
            truth.real[row.circuit_id] = np.prod(np.where(bits == 0, up, 1 - up), axis=1)
            continue
        ideal = haar_probabilities(rng) if not row.target else np.eye(SIZE)[0]
        truth.ideal[row.circuit_id] = ideal
        truth.real[row.circuit_id] = np.clip(kept(row) * ideal + (1 - kept(row)) / SIZE, 0, None)
    return truth


def _drawn(rng: np.random.Generator, shots: int, probabilities: np.ndarray) -> Outcomes:
    counts = rng.multinomial(shots, probabilities)
    seen = np.flatnonzero(counts)
    return Outcomes.from_index(seen, len(probabilities).bit_length() - 1, counts[seen])


def draw_shots(kit: Kit, truth: Truth, rng: np.random.Generator, *, repeats=(0,), skip=lambda row: False):
    """Shots of every circuit, as the reader would hand them over."""
    shots = {e.name: e.shots for e in kit.campaign.experiments}
    return SimpleNamespace(
        outcomes={
            (row.circuit_id, repeat): _drawn(rng, shots[row.experiment], truth.real[row.circuit_id])
            for row in kit.rows
            for repeat in repeats
            if not skip(row)
        }
    )


def predict(kit: Kit, values: dict[str, Callable], *, u_model: float = 0.0, mc: float = 0.0) -> pd.DataFrame:
    """A prediction table: values[signature](row) -> (region, ideal, noise-model), several, or None."""
    rows = []
    experiments = {e.name: e for e in kit.campaign.experiments}
    for row in kit.rows:
        e = experiments[row.experiment]
        for key, value in values.items():
            found = value(row) if key in PROTOCOLS[e.protocol][0] else None
            found = [found] if isinstance(found, tuple) else found or []
            entries = [(region, *pair) for region, *both in found for pair in zip(MODELS, both, strict=True)]
            for region, model, number in entries:
                if number is None:
                    continue
                noisy = model == "noise-model"
                entry = dict.fromkeys(PREDICTIONS) | {
                    "experiment": e.name, "protocol": e.protocol, "signature": key, "axis": signature(key).axis,
                    "unit": "", "region": region, "n_qubits": N, "depth": row.depth, "instance": row.instance,
                    "circuit_id": row.circuit_id, "model": model, "value": number, "std_error": mc if noisy else 0.0,
                    "u_model": u_model if noisy else 0.0, "method": "closed form",
                }  # fmt: skip
                rows.append(entry)
    return pd.DataFrame(rows, columns=list(PREDICTIONS))


def compared(kit: Kit, truth: Truth, shots, predictions: pd.DataFrame, **more) -> pd.DataFrame:
    """Estimates of the shots, compared."""
    return compare_frames(kit, estimate(kit, shots, truth.ideal.get), predictions, **more)


def pick(table: pd.DataFrame, key: str, depth: int | None = None, region: str = "", experiment: str = "") -> pd.Series:
    """The one row of that name."""
    found = table[(table["signature"] == key) & (table["region"] == region)]
    found = found[found["depth"].isna()] if depth is None else found[found["depth"] == depth]
    if experiment:
        found = found[found["experiment"] == experiment]
    assert len(found) == 1, found
    return found.iloc[0]

"""What a report is written from: the folder that a comparison left, read once."""

from __future__ import annotations

import json
from collections.abc import Hashable, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any

import pandas as pd

from rcbench import tables
from rcbench.campaign import Campaign, Circuits, Experiment, load_campaign
from rcbench.circuits.families import ADOPTED, CONTROLS
from rcbench.errors import InputError
from rcbench.files import check_files, read_csv, read_provenance, read_text

_TEXT = frozenset({
    "circuit_id", "experiment", "protocol", "role", "family", "gates", "measured_qubits", "physical_qubits", "patch",
    "setting", "batch", "target", "params", "sha256", "signature", "axis", "unit", "region", "model", "method",
    "interval_kind", "direction", "finding", "note",
})  # fmt: skip
NOT_STATED = "not stated"


@dataclass(frozen=True, kw_only=True)
class Source:
    """A compared campaign: the resolved campaign, its tables, the audit of the shots and where all came from."""

    campaign: Campaign
    roster: pd.DataFrame
    comparison: pd.DataFrame
    estimates: pd.DataFrame
    predictions: pd.DataFrame
    audit: Mapping[str, Any] = field(default_factory=dict)
    provenance: Mapping[str, Any] = field(default_factory=dict)

    # the tables are split once: a report asks for each signature of each experiment many times
    @cached_property
    def _compared(self) -> dict[Hashable, pd.DataFrame]:
        rows = self.comparison.sort_values(["depth", "region"], kind="stable")
        return dict(iter(rows.groupby(["experiment", "signature"])))

    @cached_property
    def _estimated(self) -> dict[Hashable, pd.DataFrame]:
        return dict(iter(self.estimates.groupby(["experiment", "signature"])))

    @cached_property
    def _predicted(self) -> dict[Hashable, pd.DataFrame]:
        rows = self.predictions.sort_values(["depth", "region"], kind="stable")
        rows = rows.assign(single=rows["instance"].notna())
        return dict(iter(rows.groupby(["experiment", "signature", "model", "single"])))

    def compared(self, experiment: str, signature: str) -> pd.DataFrame:
        """The comparison rows of one signature of one experiment, by depth and region."""
        return self._compared.get((experiment, signature), self.comparison.iloc[:0])

    def estimated(self, experiment: str, signature: str) -> pd.DataFrame:
        """The estimates of one signature of one experiment, one row an instance, region, depth and repeat."""
        return self._estimated.get((experiment, signature), self.estimates.iloc[:0])

    def predicted(self, experiment: str, signature: str, model: str, *, by_instance: bool = False) -> pd.DataFrame:
        """The predictions of one model, of single instances or averaged over them, by depth and region."""
        return self._predicted.get((experiment, signature, model, by_instance), self.predictions.iloc[:0])

    def signatures(self, experiment: str) -> list[str]:
        """The signatures that the comparison holds for an experiment, in the order of its rows."""
        rows = self.comparison[self.comparison["experiment"] == experiment]
        return list(dict.fromkeys(rows["signature"]))

    def qubit_name(self, qubit: int) -> str:
        """A device qubit, with the device's own label where it has one."""
        labels = self.campaign.device.physical
        return labels[qubit] if qubit < len(labels) and labels[qubit] else str(qubit)

    def fact(self, *keys: str) -> str:
        """The first of some facts that the provenance holds, at its top or among its inputs; else 'not stated'."""
        inputs = self.provenance.get("inputs")
        for place in (self.provenance, inputs if isinstance(inputs, Mapping) else {}):
            for key in keys:
                value = place.get(key)
                if value not in (None, "", [], {}):
                    return str(value)
        return NOT_STATED

    def execution(self, key: str) -> str:
        """A fact that the device team stated about the execution; else 'not stated'."""
        facts = self.audit.get("execution")
        return str(facts.get(key) or NOT_STATED) if isinstance(facts, Mapping) else NOT_STATED


@dataclass(frozen=True, slots=True)
class Group:
    """Experiments on the same qubits with the same circuits, which one bottom line may join, and their controls.

    controls: by family, product or dimers.
    """

    qubits: tuple[int, ...]
    circuits: Circuits
    experiments: tuple[Experiment, ...]
    controls: Mapping[str, tuple[Experiment, ...]]


def groups(source: Source) -> list[Group]:
    """The groups of a campaign. Different gates or qubits are different circuits: their axes are never joined."""
    mains: dict[tuple[tuple[int, ...], Circuits], list[Experiment]] = {}
    for experiment in source.campaign.experiments:
        if experiment.circuits.family not in (*CONTROLS, ADOPTED) and not experiment.control_for:
            mains.setdefault((tuple(sorted(experiment.qubits)), experiment.circuits), []).append(experiment)
    found = []
    for (qubits, circuits), members in mains.items():
        names = {experiment.name for experiment in members}
        controls: dict[str, list[Experiment]] = {}
        for experiment in source.campaign.experiments:
            # a control that names no parent belongs to the experiments on its own qubits
            alone = not experiment.control_for and tuple(sorted(experiment.qubits)) == qubits
            if experiment.circuits.family in CONTROLS and (experiment.control_for in names or alone):
                controls.setdefault(experiment.circuits.family, []).append(experiment)
        found.append(
            Group(qubits, circuits, tuple(members), {family: tuple(found) for family, found in controls.items()})
        )
    return found


def read_source(folder: Path) -> Source:
    """Read the folder that a comparison left; InputError names a file or column that is missing."""
    provenance = read_provenance(folder)
    if not provenance:
        raise InputError("folder", str(folder), "a folder that `rcbench compare` wrote, with its provenance.json")
    check_files(folder, provenance)
    return Source(
        campaign=load_campaign(folder / "campaign.toml"),
        roster=_read(folder, "roster", tables.ROSTER),
        comparison=_read(folder, "comparison", tables.COMPARISON),
        estimates=_read(folder, "estimates", tables.ESTIMATES),
        predictions=_read(folder, "predictions", tables.PREDICTIONS),
        audit=_read_audit(folder / "audit.json"),
        provenance=provenance,
    )


def is_prediction(folder: Path) -> bool:
    """Whether `predict` left the folder, so that there is nothing measured in it."""
    return read_provenance(folder).get("command") == "predict"


def read_prediction(folder: Path) -> Source:
    """Read the folder that a prediction left: nothing was planned or measured, so the other tables are empty.

    Raises:
        InputError: the prediction is unfinished, or a file or column is missing.
    """
    provenance = read_provenance(folder)
    if not provenance.get("complete"):
        raise InputError("folder", str(folder), "a finished prediction; the same predict command finishes it")
    check_files(folder, provenance)
    return Source(
        campaign=load_campaign(folder / "campaign.toml"),
        roster=pd.DataFrame(columns=list(tables.ROSTER)),
        comparison=pd.DataFrame(columns=list(tables.COMPARISON)),
        estimates=pd.DataFrame(columns=list(tables.ESTIMATES)),
        predictions=_read(folder, "predictions", tables.PREDICTIONS),
        provenance=provenance,
    )


def _read(folder: Path, name: str, columns: tuple[str, ...]) -> pd.DataFrame:
    path = folder / f"{name}.csv"
    frame = read_csv(path, columns, text=[column for column in columns if column in _TEXT])
    for column in columns:
        if column not in _TEXT:
            try:
                frame[column] = pd.to_numeric(frame[column]).astype(float)
            except (ValueError, TypeError):
                bad = next(value for value in frame[column] if not _is_numeric(value))
                raise InputError(column, bad, "numbers, or empty cells", f"{path.name}: ") from None
    return frame


def _is_numeric(value: object) -> bool:
    try:
        float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError):
        return False
    return True


def _read_audit(path: Path) -> dict[str, Any]:
    if not path.is_file():
        return {}
    try:
        data = json.loads(read_text(path, "audit"))
    except ValueError as error:
        raise InputError("audit", str(path), f"JSON as rcbench wrote it ({error})") from None
    if not isinstance(data, dict):
        raise InputError("audit", str(path), "a JSON object")
    return data

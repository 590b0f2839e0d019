"""What was tested, with what data, and whether the rule stood before the data."""

from __future__ import annotations

import pandas as pd

from rcbench.campaign import Experiment
from rcbench.report.printed import MISSING, number, percent, whole
from rcbench.report.source import NOT_STATED, Source
from rcbench.report.table import Row, Table, table
from rcbench.report.words import protocol_name


def experiments_table(source: Source) -> Table:
    """One row an experiment: circuits, qubits, depths, instances and shots."""
    rows = []
    for experiment in source.campaign.experiments:
        roster = source.roster[source.roster["experiment"] == experiment.name]
        rows.append(
            Row(
                cells=(
                    experiment.name,
                    protocol_name(experiment) or "predicted only",
                    f"{experiment.circuits.family}, {experiment.circuits.gates}",
                    qubits_of(source, experiment),
                    depths_of(experiment),
                    str(experiment.instances),
                    whole(experiment.shots),
                    whole(len(roster)),
                    whole(roster["shots"].sum()),
                    experiment.control_for or MISSING,
                )
            )
        )
    columns = (
        "experiment, protocol, circuits, qubits, depths, instances>, shots a circuit>, circuits in all>, "
        "shots in all>, control for"
    )
    return table("experiments", "Experiments as planned", columns, rows)


def depths_of(experiment: Experiment) -> str:
    """Depths in words."""
    depths = experiment.depths
    step = depths[1] - depths[0] if len(depths) > 1 else 0
    if len(depths) > 3 and depths == tuple(range(depths[0], depths[-1] + 1, step)):
        return f"{depths[0]} to {depths[-1]} in steps of {step}"
    return ", ".join(str(depth) for depth in depths)


def qubits_of(source: Source, experiment: Experiment) -> str:
    """Number and names of the qubits, the first and the last where they are many."""
    names = [source.qubit_name(qubit) for qubit in experiment.qubits]
    return f"{len(names)}: {' '.join(names)}" if len(names) <= 3 else f"{len(names)}: {names[0]} … {names[-1]}"


def margins_table(source: Source) -> Table:
    """The margins in force, as the comparison used them; experiments with the same one stand together."""
    frame = source.comparison
    same: dict[tuple[str, ...], list[str]] = {}
    for experiment in source.campaign.experiments:
        for key in source.signatures(experiment.name):
            used = frame[(frame["experiment"] == experiment.name) & (frame["signature"] == key)]["margin"].dropna()
            margin = experiment.margins.get(key)
            stated = (
                "default" if margin is None else f"{margin.value:g} {'relative' if margin.relative else 'absolute'}"
            )
            low, high = (used.min(), used.max()) if len(used) else (None, None)
            shown = number(low, 2) if low == high else f"{number(low, 2)} to {number(high, 2)}"
            same.setdefault((key, stated, shown, experiment.against.replace("-", " ")), []).append(experiment.name)
    rows = [(*margin, ", ".join(names)) for margin, names in same.items()]
    return table("margins", "Margins", "signature, as stated, as used>, tested against, experiments", rows)


def facts(source: Source) -> list[tuple[str, str]]:
    """The campaign in pairs of name and value."""
    campaign, device = source.campaign, source.campaign.device
    invented = " (invented: no such device exists)" if device.invented else ""
    return [
        ("Campaign", campaign.title),
        ("Device", f"{device.name}, {device.layout} of {device.n_qubits} qubits{invented}"),
        (
            "Native gates",
            f"{', '.join(gate.name for gate in device.two_qubit) or MISSING}; one-qubit {device.one_qubit}",
        ),
        ("Seed", str(campaign.seed)),
        ("Intervals and tests", f"{percent(campaign.confidence)} confidence; decision by {campaign.rule}"),
        ("Kit hash", source.fact("kit_hash", "kit")),
        ("Kit built", source.fact("kit_built")),
        ("Compared", source.fact("started")),
    ]


def rule_fixed(source: Source) -> tuple[str, str]:
    """Whether margins and rule stood before the data: (yes, no or not shown; why)."""
    stated = source.provenance.get("rule_fixed_before_data")
    kit = source.fact("kit_hash", "kit")[:12]
    if stated is True:
        return "Fixed before the data", f"the data quote the hash of this kit ({kit}), which covers margins and rule."
    if stated is False:
        return "Not fixed before the data", f"the data quote another kit; margins or rule of kit {kit} came later."
    built, taken = source.fact("kit_built"), source.execution("started")
    if NOT_STATED not in (built, taken):
        order = _earlier(built, taken)
        if order is not None:
            words = "before" if order else "after"
            stand = "Fixed before the data" if order else "Not fixed before the data"
            return (
                stand,
                f"by the stated dates, kit {kit} was built {words} the first shot; the data quote no kit hash.",
            )
    return "Not shown", f"margins and rule are part of the hash of kit {kit}, but the data do not quote it."


def _earlier(first: str, second: str) -> bool | None:
    try:
        return bool(pd.to_datetime(first, utc=True) < pd.to_datetime(second, utc=True))
    except (ValueError, TypeError):
        return None

"""Estimates: every measured signature of every instance, from the shots that came back."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterator, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.campaign import Experiment
from rcbench.estimators import Estimator, estimator
from rcbench.estimators.sample import Group, Measured, Run
from rcbench.signatures.registry import signature
from rcbench.tables import ESTIMATES

if TYPE_CHECKING:
    import pandas as pd

    from rcbench.kit import Kit, RosterRow
    from rcbench.shots.outcomes import Outcomes
    from rcbench.shots.reader import Shots

Ideal = Callable[[str], FloatArray | None]


def estimate(kit: Kit, shots: Shots, ideal: Ideal) -> pd.DataFrame:
    """Apply the estimators of each protocol to the shots, instance by instance.

    All runs of an instance at one depth and repeat belong together; where a role that all of them need is missing,
    the whole group is dropped. What is dropped, or cannot be given, has a row with an empty value, so that it can be
    counted.

    Args:
        kit: the kit that was run. shots: what came back.
        ideal: circuit_id to (2**n_bits,) ideal probabilities, or None where they are not known.
    Returns:
        One row a signature, region, depth, instance, circuit and repeat, with the columns tables.ESTIMATES.
        `attrs["dropped"]` lists (experiment, depth, instance, repeat, what was missing).
    """
    import pandas as pd

    rows: list[dict[str, Any]] = []
    dropped: list[tuple[str, int, int, int, str]] = []
    returned: dict[str, dict[int, Outcomes]] = defaultdict(dict)
    for (circuit_id, repeat), outcomes in shots.outcomes.items():
        if outcomes.shots:
            returned[circuit_id][repeat] = outcomes
    roster: dict[str, list[RosterRow]] = defaultdict(list)
    for row in kit.rows:
        roster[row.experiment].append(row)
    for experiment in kit.campaign.experiments:
        if experiment.protocol is None:
            continue
        protocol = kit.protocol(experiment)
        families = [estimator(name) for name in protocol.estimators]
        reads_ideal = any(family.needs_ideal for family in families)
        aside = {role.name for role in protocol.roles if role.every_batch}  # calibrations belong to no instance
        rows_of = [row for row in roster[experiment.name] if row.role not in aside]
        for repeat, group in _groups(experiment, rows_of, returned, ideal if reads_ideal else None):
            lacking = _lacking(families, group)
            if lacking:
                dropped.append((experiment.name, group.depth, group.instance, repeat, lacking))
                found = [_nothing(key, group) for key in protocol.measured]
            else:
                found = [value for family in families for value in family.apply(group)]
            rows += [_row(experiment, group, repeat, value) for value in found if value.signature in protocol.measured]
    frame = pd.DataFrame(rows, columns=list(ESTIMATES))
    frame.attrs["dropped"] = dropped
    return frame


def _groups(
    experiment: Experiment,
    rows: Sequence[RosterRow],
    returned: dict[str, dict[int, Outcomes]],
    ideal: Ideal | None,
) -> Iterator[tuple[int, Group]]:
    """(repeat, group) of everything that came back of an experiment, instance by instance."""
    members: dict[tuple[int, int], list[tuple[tuple[int, int], RosterRow, Outcomes]]] = defaultdict(list)
    for row in rows:
        for repeat, outcomes in sorted(returned.get(row.circuit_id, {}).items()):
            # instance by instance, so that whoever simulates the ideal circuits can share the beginnings of nested ones
            members[row.instance, row.depth].append(((row.repeat, repeat), row, outcomes))
    # a repeat may be a roster row of its own or a repeat of the same row in the shots: number what is different
    labels = sorted({label for found in members.values() for label, _, _ in found})
    for (instance, depth), found in sorted(members.items()):
        for place, label in enumerate(labels):
            runs = tuple(_run(row, outcomes, ideal) for which, row, outcomes in found if which == label)
            if runs:
                yield place, Group(experiment=experiment.name, depth=depth, instance=instance, runs=runs)


def _run(row: RosterRow, outcomes: Outcomes, ideal: Ideal | None) -> Run:
    return Run(
        circuit_id=row.circuit_id,
        role=row.role,
        setting=row.setting,
        n_qubits=len(row.measured_qubits),
        measured_qubits=row.measured_qubits,
        target=np.array([int(bit) for bit in row.target], dtype=np.int64) if row.target else None,
        params=row.params,
        sample=outcomes,
        ideal=ideal(row.circuit_id) if ideal is not None else None,
    )


def _lacking(families: Sequence[Estimator], group: Group) -> str:
    return next((words for family in families if (words := family.missing(group))), "")


def _nothing(key: str, group: Group) -> Measured:
    shots = sum(run.sample.shots for run in group.runs)
    return Measured(signature=key, region="", value=float("nan"), std_error=float("nan"), shots=shots)


def _row(experiment: Experiment, group: Group, repeat: int, value: Measured) -> dict[str, Any]:
    entry = signature(value.signature)
    finite = np.isfinite(value.value)
    return {
        "experiment": experiment.name,
        "protocol": experiment.protocol,
        "signature": value.signature,
        "axis": entry.axis,
        "unit": entry.unit,
        "region": value.region,
        "n_qubits": experiment.n_qubits,
        "depth": group.depth,
        "instance": group.instance,
        "circuit_id": value.circuit_id,
        "repeat": repeat,
        "value": value.value if finite else None,
        "std_error": value.std_error if finite and np.isfinite(value.std_error) else None,
        "shots": value.shots,
    }

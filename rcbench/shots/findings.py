"""What the audit has to say about shots that could be read: one function a question, each a list of problems."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from rcbench.estimators import estimator
from rcbench.estimators.sample import Group, Run
from rcbench.shots.completeness import TREND_LIMIT, Trend, joined_trend, lost_fractions, trend
from rcbench.shots.declarations import moment
from rcbench.shots.shots import Problem, Shots

if TYPE_CHECKING:
    from rcbench.kit import Kit, RosterRow

Dropped = tuple[str, int, int, int, str]  # experiment, instance, depth, repeat, what it lacks
_NAMES = 3  # names given as examples
_DIFFERENT = 10  # different outcomes from which counts that are all even mean something
_REBUILD = "rcbench build CAMPAIGN --out KIT --missing SHOTS makes a kit of the rest"


def some(names: Iterable[object]) -> str:
    """The first few names, and how many more."""
    listed = [str(name) for name in names]
    rest = len(listed) - _NAMES
    return ", ".join(listed[:_NAMES]) + (f" and {rest} more" if rest > 0 else "")


def many(count: int, noun: str) -> str:
    """A number of things in words."""
    return f"{count} {noun}{'' if count == 1 else 's'}"


def of_completeness(frame: pd.DataFrame, shots: Shots) -> list[Problem]:
    """Circuits that are missing, short, over, extra or unknown; the table says how many of each experiment."""
    found = []
    asked = int((frame["state"] != "extra").sum())
    for state, severity, words, hint in (
        ("missing", "warning", f"of {asked} did not come back", _REBUILD),
        ("short", "warning", "came back with fewer shots than asked for; what there is is used", ""),
        ("over", "note", "came back with more shots than asked for; all are used", ""),
        ("extra", "note", "came back as a repeat that was not asked for", ""),
    ):
        ids = frame.loc[frame["state"] == state, "circuit_id"]
        if len(ids):
            found.append(Problem(severity, f"{many(len(ids), 'circuit')} {words} ({some(ids)})", hint))
    if shots.unknown:
        total = many(sum(shots.unknown.values()), "shot")
        text = (
            f"{many(len(shots.unknown), 'circuit id')} not of this kit, with {total} not used ({some(shots.unknown)})"
        )
        hint = "a circuit_id is the name of the circuit's file without its ending"
        if not any(name.endswith((".qasm", ".json")) for name in shots.unknown):
            hint = "compare with the roster.csv of the kit; shots of another kit belong in a folder of their own"
        found.append(Problem("warning", text, hint))
    return found


def of_doubling(frame: pd.DataFrame, shots: Shots) -> list[Problem]:
    """Circuits in which every outcome came an even number of times: the same shots in two files of different form."""
    doubled = []
    for circuit_id, repeat in frame.loc[frame["state"] == "over", ["circuit_id", "repeat"]].itertuples(index=False):
        outcomes = shots.outcomes.get((circuit_id, repeat))
        if outcomes is not None and len(outcomes.counts) >= _DIFFERENT and math.gcd(*outcomes.counts.tolist()) > 1:
            doubled.append(circuit_id)
    if not doubled:
        return []
    text = f"every outcome of {many(len(doubled), 'circuit')} came two or more times over: the same shots twice?"
    return [Problem("error", f"{text} ({some(doubled)})", "keep one of the files that hold the same shots")]


def of_depth(frame: pd.DataFrame) -> tuple[list[Problem], dict[str, float]]:
    """Losses that grow with depth, which leave a better device than ran; and the z of each test by experiment."""
    found, scores = [], {}
    for place, words, hint in (
        (0, "what is missing", "what is left looks better than the device: send the rest"),
        (1, "what is discarded", "the shots kept are post-selected, the more the deeper"),
    ):
        trends: list[Trend] = []
        for experiment, runs in frame[frame["state"] != "extra"].groupby("experiment", sort=False):
            if place == 1:
                runs = runs[runs["returned"] + runs["discards"] > 0]
            lost = lost_fractions(runs)[place]
            depth = runs["depth"].to_numpy(dtype=np.float64)
            tested = trend(depth, lost)
            trends.append(tested)
            scores[f"{experiment}: {words}"] = tested.z
            if tested.z > TREND_LIMIT:
                low, high = (lost[depth == end].mean() for end in (depth.min(), depth.max()))
                text = (
                    f"{experiment}: {words} grows with depth, from {low:.1%} at depth {depth.min():.0f} to {high:.1%} "
                    f"at depth {depth.max():.0f} (linear trend, z = {tested.z:.1f}, limit {TREND_LIMIT:.0f})"
                )
                found.append(Problem("warning", text, hint))
        whole = joined_trend(trends)
        if whole.z > TREND_LIMIT and not any(t.z > TREND_LIMIT for t in trends):
            text = f"all experiments together: {words} grows with depth (z = {whole.z:.1f}, limit {TREND_LIMIT:.0f})"
            found.append(Problem("warning", text, hint))
    return found, scores


def dropped_groups(kit: Kit, shots: Shots) -> list[Dropped]:
    """Instances at a depth of which something came back, but not the runs that all the others need."""
    found: list[Dropped] = []
    for experiment in kit.campaign.experiments:
        if experiment.protocol is None:
            continue
        families = [estimator(name) for name in kit.protocol(experiment.name).estimators]
        groups: dict[tuple[int, int, int], list[Run]] = {}
        for row in kit.rows:
            outcomes = shots.outcomes.get((row.circuit_id, row.repeat)) if row.experiment == experiment.name else None
            if outcomes is not None:
                groups.setdefault((row.instance, row.depth, row.repeat), []).append(_run(row, outcomes))
        for (instance, depth, repeat), runs in sorted(groups.items()):
            group = Group(experiment=experiment.name, depth=depth, instance=instance, runs=tuple(runs))
            lacking = next((words for family in families if (words := family.missing(group))), "")
            if lacking:
                found.append((experiment.name, instance, depth, repeat, lacking))
    return found


def _run(row: RosterRow, outcomes: object) -> Run:
    """A run as far as the question of what its group lacks needs it."""
    return Run(
        circuit_id=row.circuit_id,
        role=row.role,
        setting=row.setting,
        n_qubits=len(row.measured_qubits),
        measured_qubits=row.measured_qubits,
        target=None,
        params=row.params,
        sample=outcomes,  # type: ignore[arg-type]
    )


def of_dropping(dropped: Sequence[Dropped]) -> list[Problem]:
    """Instances that cannot be used at all."""
    found = []
    for lacking in dict.fromkeys(d[4] for d in dropped):
        names = [f"{d[0]} instance {d[1]} depth {d[2]}" for d in dropped if d[4] == lacking]
        text = f"{many(len(names), 'instance')} dropped whole, since {lacking} is missing ({some(names)})"
        found.append(Problem("warning", text, _REBUILD))
    return found


def of_execution(kit: Kit, shots: Shots) -> list[Problem]:
    """What execution.toml states against the kit and against the shots."""
    stated, found = shots.execution, []
    if stated.kit_hash and stated.kit_hash != kit.hash:
        text = f"execution.toml: shots for kit {stated.kit_hash[:12]}; this kit is {kit.hash[:12]}"
        found.append(Problem("error", text, "compare with the kit that was run"))
    wanted = {
        label for row in kit.rows if (row.circuit_id, row.repeat) in shots.returned for label in row.physical_qubits
    }
    ran = set(stated.physical_qubits.split())
    if ran and wanted and ran != wanted:
        parts = [
            f"{word} {' '.join(sorted(q))}"
            for word, q in (("not in the kit:", ran - wanted), ("lacking:", wanted - ran))
            if q
        ]
        found.append(
            Problem("warning", f"execution.toml: other physical qubits than the kit's ({'; '.join(parts)})", "")
        )
    if stated.post_selection.lower() not in ("", "no", "none"):
        text = f"execution.toml: shots were post-selected ({stated.post_selection}); the predictions are not"
        found.append(Problem("warning", text, "send the shots without post-selection"))
    if stated.readout_correction.lower() not in ("", "no", "none"):
        how = stated.readout_correction
        text = f"execution.toml: readout was corrected before sending ({how}); the predictions hold its errors"
        found.append(Problem("warning", text, "send the shots as measured"))
    first, last = span(shots)
    if first is not None and last is not None:
        early = stated.started and first < np.datetime64(moment(stated.started).replace(tzinfo=None), "us")
        late = stated.ended and last > np.datetime64(moment(stated.ended).replace(tzinfo=None), "us")
        if early or late:
            text = f"time_utc runs from {first} to {last}, outside the run of execution.toml"
            found.append(Problem("warning", text, "mend the times that are wrong: shots of another day?"))
    return found


def of_batches(kit: Kit, shots: Shots) -> list[Problem]:
    """Circuits that ran in another batch than the roster plans."""
    other = [
        row.circuit_id
        for row in kit.rows
        if (labels := shots.batches.get((row.circuit_id, row.repeat))) and labels != (str(row.batch),)
    ]
    if not other:
        return []
    text = f"{many(len(other), 'circuit')} ran in another batch than planned: controls may be of another time"
    return [Problem("note", f"{text} ({some(other)})")]


def span(shots: Shots) -> tuple[np.datetime64 | None, np.datetime64 | None]:
    """The first and the last time_utc of all shots."""
    if not shots.times:
        return None, None
    return min(first for first, _ in shots.times.values()), max(last for _, last in shots.times.values())

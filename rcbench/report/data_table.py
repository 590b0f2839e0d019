"""What came back: asked, returned, used, how long it took, and what deviates from the plan."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd

from rcbench.report.printed import MISSING, depths_text, duration, whole
from rcbench.report.source import NOT_STATED, Source
from rcbench.report.table import Row, Table, finding_text, table

_NUMBER = r"\d+(?:\.\d+)?(?:e[-+]?\d+)?"
_SHOWN_ELSEWHERE = ("execution", "not_stated", "text", "needs_attention")


def usage_table(source: Source) -> Table:
    """Instances by experiment and depth, and shots by experiment: planned, returned, used."""
    rows = []
    for experiment in source.campaign.experiments:
        part = source.comparison[source.comparison["experiment"] == experiment.name]
        part = part[part["depth"].notna()]
        if part.empty:
            continue
        by_depth = part.groupby("depth")[["instances_planned", "instances_returned", "instances"]].min()
        total = by_depth.sum()
        asked = source.roster[source.roster["experiment"] == experiment.name]["shots"].sum()
        lost = [f"{depth:g}" for depth, row in by_depth.iterrows() if row["instances"] < row["instances_planned"]]
        rows.append(
            Row(
                cells=(
                    experiment.name,
                    whole(len(source.roster[source.roster["experiment"] == experiment.name])),
                    whole(asked),
                    whole(total["instances_planned"]),
                    whole(total["instances_returned"]),
                    whole(total["instances"]),
                    ", ".join(lost) or "none",
                )
            )
        )
    columns = "experiment, circuits asked>, shots asked>, instances x depths planned>, returned>, used>, depths with fewer than planned"
    return table("data", "Asked, returned and used", columns, rows)


def audit_facts(source: Source) -> list[tuple[str, str]]:
    """The counts of the audit of the shots, as it gave them."""
    return [
        (_words(key), _value(value))
        for key, value in source.audit.items()
        if key not in _SHOWN_ELSEWHERE and not isinstance(value, (list, dict))
    ]


def audit_lists(source: Source) -> list[tuple[str, list[str]]]:
    """The lists of the audit: problems, files, circuits that are short or missing."""
    return [
        (_words(key), [_entry(entry) for entry in value])
        for key, value in source.audit.items()
        if key not in _SHOWN_ELSEWHERE and isinstance(value, list) and value
    ]


def execution_facts(source: Source) -> list[tuple[str, str]]:
    """What the device team stated about the execution, and the wall time from it; the rest is 'not stated'."""
    stated = source.audit.get("execution")
    facts = dict(stated) if isinstance(stated, Mapping) else {}
    rows = [(_words(key), _value(value) if value not in (None, "") else NOT_STATED) for key, value in facts.items()]
    return [("Wall time", wall_time(source)), ("Device time planned", planned_time(source)), *rows]


def wall_time(source: Source) -> str:
    """From the first to the last shot, as stated."""
    try:
        start, end = (pd.to_datetime(source.execution(key), utc=True) for key in ("started", "ended"))
    except (ValueError, TypeError):
        return NOT_STATED
    seconds = (end - start).total_seconds()
    return duration(seconds) if seconds >= 0 else NOT_STATED


def planned_time(source: Source) -> str:
    """Shots times circuit duration, measurement and overhead of the roster; jobs are not counted."""
    times = source.campaign.device.timings
    roster = source.roster
    once = roster["duration_ns"] + times.measure + times.overhead
    seconds = float(np.nansum(roster["shots"] * once)) * 1e-9
    return duration(seconds) if seconds > 0 else MISSING


def deviations(source: Source) -> list[str]:
    """Everything that differs from the plan: missing instances, rows not tested, labelled intervals, notes."""
    found: list[str] = []
    frame = source.comparison
    for experiment in source.campaign.experiments:
        rows = frame[(frame["experiment"] == experiment.name) & frame["depth"].notna()]
        for what, short in (
            ("returned", rows[rows["instances_returned"] < rows["instances_planned"]]),
            ("used", rows[rows["instances"] < rows["instances_returned"]]),
        ):
            if len(short):
                at = depths_text(short["depth"], experiment.depths)
                source_of = "planned" if what == "returned" else "returned"
                found.append(f"{experiment.name}: fewer instances {what} than {source_of} at {at}.")
        for kind, part in rows.groupby("interval_kind"):
            if "shot" in str(kind):
                at = depths_text(part["depth"], experiment.depths)
                found.append(f"{experiment.name}: intervals at {at} are of the kind {kind!r}.")
    return found + _notes(source)


def _notes(source: Source) -> list[str]:
    """Why rows have no finding of their own; notes that differ in numbers only count as one. What more data would
    settle is said in the comparison table."""
    frame = source.comparison
    rows = frame[[note != "" and not note.startswith("would be settled") for note in frame["note"]]]
    alike = rows["note"].astype(str).str.replace(_NUMBER, "#", regex=True)
    found = []
    for (name, finding, _), same in rows.groupby([rows["experiment"], rows["finding"], alike], sort=False):
        count = len(same)
        note = same["note"].iloc[0]
        as_in = " (as in one of them)" if same["note"].nunique() > 1 else ""
        depths = same["depth"].dropna()
        at = f" at {depths_text(depths, source.campaign.experiment(name).depths)}" if len(depths) else ""
        found.append(
            f"{name}: {whole(count)} {'row' if count == 1 else 'rows'} {finding_text(finding)}{at}: {note}{as_in}."
        )
    return found


def _words(key: str) -> str:
    text = str(key).replace("_", " ")
    return text[:1].upper() + text[1:]


def _value(value: Any) -> str:
    if value is None or value == "":
        return NOT_STATED
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int):
        return whole(value)
    if isinstance(value, float):
        return whole(value) if value.is_integer() else f"{value:.4g}"
    return str(value)


def _entry(entry: Any) -> str:
    if isinstance(entry, Mapping):
        return ", ".join(f"{_words(key).lower()} {_value(value)}" for key, value in entry.items())
    if isinstance(entry, (list, tuple)):
        return ", ".join(_value(value) for value in entry)
    return _value(entry)

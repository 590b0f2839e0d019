"""What came back: asked, returned, used, in what time, and what nobody stated."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from rcbench.report.printed import MISSING, duration, whole
from rcbench.report.source import NOT_STATED, Source
from rcbench.report.table import Row, Table, table

_AUDITED = ("asked", "returned", "complete", "short", "missing", "repeats", "shots_asked", "shots_returned")
_FIRST = ("started", "ended", "device", "physical_qubits", "kit_hash", "calibration", "calibrated")
TREND = 3.0  # sigmas
_SHOWN = 40  # entries of a list; the rest is in audit.json


def usage_table(source: Source) -> Table:
    """Circuits and shots by experiment as the audit counted them, then instances times depths: planned and used."""
    audited = {str(row.get("experiment")): row for row in _list(source.audit.get("table")) if isinstance(row, Mapping)}
    names = [experiment.name for experiment in source.campaign.experiments]
    rows = []
    for name in [*names, *(name for name in audited if name not in names)]:
        part = source.comparison[(source.comparison["experiment"] == name) & source.comparison["depth"].notna()]
        by_depth = part.groupby("depth")[["instances_planned", "instances"]].min()
        counts = [whole(audited.get(name, {}).get(key)) for key in _AUDITED]
        used = [whole(value) for value in by_depth.sum()] if len(by_depth) else [MISSING, MISSING]
        rows.append(Row(cells=(name, *counts, *used)))
    columns = (
        "experiment, circuits asked>, returned>, complete>, short>, missing>, repeats>, shots asked>, shots returned>, "
        "instances x depths planned>, used>"
    )
    return table("data", "Asked, returned and used", columns, rows)


def audit_facts(source: Source) -> list[tuple[str, str]]:
    """What the audit counted over all experiments."""
    audit = source.audit
    unknown = audit.get("unknown")
    named = ", ".join(list(unknown)[:_SHOWN]) if isinstance(unknown, Mapping) else ""
    facts = [
        ("Bit order", str(audit.get("bit_order") or NOT_STATED)),
        ("Wall time", wall_time(source)),
        ("Device time planned", planned_time(source)),
        ("Missing circuits", _counted(audit.get("missing_count"), _list(audit.get("missing")))),
        ("Circuits not of this kit", _counted(audit.get("unknown_count"), [named] if named else [])),
        ("Bad rows set aside", whole(audit.get("set_aside"))),
    ]
    trends = audit.get("trend_z")
    if isinstance(trends, Mapping):
        steep = {str(name): float(z) for name, z in trends.items() if abs(float(z)) > TREND}
        listed = "; ".join(f"{name} ({z:.1f} sigmas)" for name, z in steep.items())
        facts.append(("Losses that grow with depth", listed or f"none above {TREND:g} sigmas"))
    return facts


def problems(source: Source) -> list[tuple[str, str]]:
    """(severity, text with the way to mend it) of everything that the audit found."""
    found = []
    for problem in _list(source.audit.get("problems")):
        if isinstance(problem, Mapping):
            hint = f" To mend it: {problem['hint']}" if problem.get("hint") else ""
            found.append((str(problem.get("severity", "note")), f"{problem.get('text', '')}{hint}"))
        else:
            found.append(("note", str(problem)))
    return found


def files_table(source: Source) -> Table:
    """The files that were read, with their hashes."""
    rows = [
        (str(file.get("name", "")), whole(file.get("rows") or None), str(file.get("sha256", "")))
        for file in _list(source.audit.get("files"))
        if isinstance(file, Mapping)
    ]
    return table("files", "Files read", "file, rows>, SHA-256", rows)


def execution_facts(source: Source) -> list[tuple[str, str]]:
    """What the device team stated about the execution; the rest is 'not stated'."""
    stated = source.audit.get("execution")
    facts = stated if isinstance(stated, Mapping) else {}
    order = [*(key for key in _FIRST if key in facts), *(key for key in facts if key not in _FIRST)]
    return [(key.replace("_", " ").capitalize(), str(facts[key] or NOT_STATED)) for key in order]


def wall_time(source: Source) -> str:
    """From the first to the last shot, and where that is from."""
    took = source.audit.get("wall_time")
    if not isinstance(took, Mapping) or "seconds" not in took:
        return NOT_STATED
    return f"{duration(took['seconds'])}, {took.get('first')} to {took.get('last')} (from {took.get('source')})"


def planned_time(source: Source) -> str:
    """Shots times circuit duration, measurement and overhead of the roster; jobs are not counted."""
    times = source.campaign.device.timings
    roster = source.roster
    once = roster["duration_ns"] + times.measure + times.overhead
    seconds = float(np.nansum(roster["shots"] * once)) * 1e-9
    return duration(seconds) if seconds > 0 else MISSING


def _list(value: Any) -> list[Any]:
    return value if isinstance(value, list) else []


def _counted(count: object, names: list[Any]) -> str:
    shown = ", ".join(str(name) for name in names[:_SHOWN])
    more = ", …" if len(names) > _SHOWN else ""
    return whole(count) + (f": {shown}{more}" if shown else "")

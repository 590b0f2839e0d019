"""Everything that differs from the plan, and what was left out of which row."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping

from rcbench.report.printed import depths_text, whole
from rcbench.report.source import Source
from rcbench.report.table import finding_text

_NUMBER = r"\d+(?:\.\d+)?(?:e[-+]?\d+)?"


def deviations(source: Source) -> list[str]:
    """Missing instances, groups dropped whole, labelled intervals and notes, a sentence each."""
    return [*_instances(source), *_dropped(source), *_notes(source)]


def _instances(source: Source) -> list[str]:
    found = []
    for experiment in source.campaign.experiments:
        rows = source.comparison[source.comparison["experiment"] == experiment.name]
        rows = rows[rows["depth"].notna()]
        for fewer, more in (("returned", "planned"), ("used", "returned")):
            columns = {"planned": "instances_planned", "returned": "instances_returned", "used": "instances"}
            short = rows[rows[columns[fewer]] < rows[columns[more]]]
            if len(short):
                at = depths_text(short["depth"], experiment.depths)
                found.append(f"{experiment.name}: fewer instances {fewer} than {more} at {at}.")
        for kind, part in rows.groupby("interval_kind"):
            if "shot" in str(kind):
                at = depths_text(part["depth"], experiment.depths)
                found.append(f"{experiment.name}: intervals at {at} are of the kind '{kind}'.")
    return found


def _dropped(source: Source) -> list[str]:
    entries = source.audit.get("dropped")
    lacking: Counter[tuple[str, str]] = Counter()
    for entry in entries if isinstance(entries, list) else []:
        if isinstance(entry, Mapping):
            lacking[str(entry.get("experiment", "")), str(entry.get("lacking", ""))] += 1
    return [
        f"{name}: {whole(count)} {'case' if count == 1 else 'cases'} of an instance at a depth dropped whole, "
        f"lacking {words}."
        for (name, words), count in lacking.items()
    ]


def _notes(source: Source) -> list[str]:
    """Why rows have no finding of their own; notes that differ in numbers only count as one. What more data would
    settle is said in the comparison table."""
    frame = source.comparison
    rows = frame[[note != "" and not note.startswith("would be settled") for note in frame["note"]]]
    alike = rows["note"].astype(str).str.replace(_NUMBER, "#", regex=True)
    found = []
    for _, same in rows.groupby([rows["experiment"], rows["finding"], alike], sort=False):
        count, name, finding = len(same), str(same["experiment"].iloc[0]), str(same["finding"].iloc[0])
        as_in = " (as in one of them)" if same["note"].nunique() > 1 else ""
        depths = same["depth"].dropna()
        at = f" at {depths_text(depths, source.campaign.experiment(name).depths)}" if len(depths) else ""
        rows_text = f"{whole(count)} {'row' if count == 1 else 'rows'}"
        found.append(f"{name}: {rows_text} {finding_text(finding)}{at}: {same['note'].iloc[0]}{as_in}.")
    return found

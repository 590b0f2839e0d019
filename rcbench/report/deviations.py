"""Everything that differs from the plan, and what was left out of which row."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Mapping

from rcbench.report.printed import depths_text, whole
from rcbench.report.source import Source
from rcbench.report.table import finding_text

_NUMBER = re.compile(r"\d+(?:\.\d+)?(?:e[-+]?\d+)?")
_SAID_ELSEWHERE = (
    "would be settled",
    "more data would not",
    "control value of",
    "further controls",
    "between ",
    "fit to ",
)


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
    """Why rows have no finding of their own, and what else is noted of them; notes that differ in numbers only count as
    one. What more data would settle is said in the comparison table."""
    found: dict[tuple[str, str, str], list[tuple[str, float]]] = {}
    columns = ("experiment", "finding", "note", "depth")
    for name, finding, note, depth in zip(*(source.comparison[column] for column in columns), strict=True):
        for part in str(note).split("; "):
            if part and not part.startswith(_SAID_ELSEWHERE):
                found.setdefault((name, finding, _NUMBER.sub("#", part)), []).append((part, depth))
    sentences = []
    for (name, finding, _), entries in found.items():
        parts, depths = {part for part, _ in entries}, [depth for _, depth in entries if depth == depth]
        at = f" at {depths_text(depths, source.campaign.experiment(name).depths)}" if depths else ""
        count = f"{whole(len(entries))} {'row' if len(entries) == 1 else 'rows'}"
        as_in = " (as in one of them)" if len(parts) > 1 else ""
        sentences.append(f"{name}: {count} {finding_text(finding)}{at}: {entries[0][0]}{as_in}.")
    return sentences

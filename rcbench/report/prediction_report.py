"""Write the report of a prediction: what ideal circuits and the stated error budget would show, with no shots."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rcbench.campaign import Experiment
from rcbench.files import write_text
from rcbench.report.campaign_table import depths_of, qubits_of
from rcbench.report.device_table import device_facts, device_table
from rcbench.report.figures import Picture
from rcbench.report.page import inline, render
from rcbench.report.predicted_figures import predicted_figures
from rcbench.report.printed import MISSING, duration, whole
from rcbench.report.source import Source
from rcbench.report.table import Table, table
from rcbench.report.value_table import fitted_table, value_table, warnings
from rcbench.report.words import about, cards, protocol_name

LAYOUTS = {"report.html": "prediction.html.jinja", "report.md": "prediction.md.jinja"}
LIMITS = (
    "Nothing here was measured: it says what to expect of a device, and nothing about one.",
    "A mean over circuits says what most circuits of the family do, within the error beside it.",
    "Haar-random is the mark for circuits that scramble without a conserved quantity; families that conserve something "
    "end elsewhere.",
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Section:
    """What the report shows of one experiment."""

    experiment: Experiment
    about: str
    pictures: list[Picture]
    values: Table | None
    fitted: Table | None
    warnings: list[str]


def write_prediction(source: Source, folder: Path) -> Path:
    """Write report.html, report.md, tables/ and figures/ of predictions into a folder; returns report.html."""
    context = prediction_context(source, folder / "figures")
    for shown in context["tables"].values():
        shown.write_csv(folder / "tables")
        write_text(folder / "tables" / f"{shown.key}.tex", render("table.tex.jinja", {"table": shown}))
    for name, layout in LAYOUTS.items():
        write_text(folder / name, render(layout, context))
    return folder / "report.html"


def prediction_context(source: Source, figures: Path) -> dict[str, Any]:
    """Everything that the layouts `prediction.*` may show; draws the figures into a folder."""
    sections = [
        Section(
            experiment=experiment,
            about=about(experiment),
            pictures=predicted_figures(source, experiment, figures),
            values=value_table(source, experiment),
            fitted=fitted_table(source, experiment),
            warnings=warnings(source, experiment),
        )
        for experiment in source.campaign.experiments
    ]
    tables = [_experiments(source), device_table(source)]
    tables += [shown for section in sections for shown in (section.values, section.fitted) if shown is not None]
    return {
        "title": source.campaign.title,
        "device": source.campaign.device,
        "limits": LIMITS,
        "facts": _facts(source),
        "sections": sections,
        "tables": {shown.key: shown for shown in tables},
        "device_facts": device_facts(source),
        "cards": cards(source),
        "versions": dict(source.provenance.get("versions") or {}),
        "inline": inline,
    }


def _experiments(source: Source) -> Table:
    rows = [
        (
            experiment.name,
            protocol_name(experiment) or "signatures only",
            f"{experiment.circuits.family}, {experiment.circuits.gates}",
            qubits_of(source, experiment),
            depths_of(experiment),
            str(experiment.instances),
            experiment.control_for or MISSING,
        )
        for experiment in source.campaign.experiments
    ]
    columns = "experiment, protocol, circuits, qubits, depths, instances>, control for"
    return table("experiments", "Experiments", columns, rows)


def _facts(source: Source) -> list[tuple[str, str]]:
    campaign, device = source.campaign, source.campaign.device
    invented = " (invented: no such device exists)" if device.invented else ""
    facts = source.provenance
    noise = "stated, so the noise model is predicted where there is a protocol" if device.errors else "not stated"
    return [
        ("Campaign", campaign.title),
        ("Device", f"{device.name}, {device.layout} of {device.n_qubits} qubits{invented}"),
        ("Error budget", noise),
        ("Seed", str(campaign.seed)),
        ("Circuits simulated", whole(facts.get("simulated_circuits"))),
        ("Number format of the states", source.fact("dtype")),
        ("Predicted", source.fact("started")),
        ("Time", duration(facts.get("seconds"))),
    ]

"""Write the report of a compared campaign: HTML, Markdown, one page, tables and figures, into the same folder."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rcbench.campaign import Experiment
from rcbench.files import write_text
from rcbench.report.bottom_line import BottomLine, bottom_lines
from rcbench.report.campaign_table import experiments_table, facts, margins_table, rule_fixed
from rcbench.report.comparison_table import (
    comparison_table,
    counts,
    departures,
    disagreements,
    disagreements_in_brief,
    fits_table,
)
from rcbench.report.data_table import audit_facts, execution_facts, files_table, problems, usage_table
from rcbench.report.deviations import deviations
from rcbench.report.device_table import device_facts, device_table
from rcbench.report.locate import suspects
from rcbench.report.page import inline, render
from rcbench.report.predicted_table import predicted_table
from rcbench.report.prediction_report import write_prediction
from rcbench.report.printed import fixed, interval, whole
from rcbench.report.rule import DISCLAIMER, KEPT_ABOVE, LIMITS, RULE
from rcbench.report.source import Source, groups, is_prediction, read_prediction, read_source
from rcbench.report.table import SIGNS, Row, Table, finding_text, table
from rcbench.report.uncertainty_table import uncertainty_table
from rcbench.report.value_table import fitted_table, value_table
from rcbench.report.words import about, cards

LAYOUTS = {"report.html": "report.html.jinja", "report.md": "report.md.jinja", "summary.html": "summary.html.jinja"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Section:
    """What the report shows of one experiment."""

    experiment: Experiment
    about: str
    counts: dict[str, int]
    pictures: list[Any]
    fits: Table | None
    predicted: Table | None
    fitted: Table | None


def write_report(folder: Path | str) -> Path:
    """Write report.html, report.md, summary.html, tables/ and figures/ into the folder that a comparison left.

    In a folder that `predict` left, a report of the predictions alone, with no summary.

    Args:
        folder: holds campaign.toml, roster.csv, comparison.csv, estimates.csv, predictions.csv, audit.json and
            provenance.json; of a prediction campaign.toml, predictions.csv and provenance.json.
    Returns:
        The path of report.html. The same folder gives the same bytes again.
    Raises:
        InputError: a file or column is missing, a layout is broken, or the folder cannot be written.
    """
    folder = Path(folder)
    if is_prediction(folder):
        return write_prediction(read_prediction(folder), folder)
    return write_source(read_source(folder), folder)


def write_source(source: Source, folder: Path) -> Path:
    """The same from tables in memory."""
    context = report_context(source, folder / "figures")
    for shown in context["tables"].values():
        shown.write_csv(folder / "tables")
        write_text(folder / "tables" / f"{shown.key}.tex", render("table.tex.jinja", {"table": shown}))
    for name, layout in LAYOUTS.items():
        write_text(folder / name, render(layout, context))
    return folder / "report.html"


def bottom_line_text(folder: Path | str) -> str:
    """The bottom line of a compared folder in plain text, as the last lines of a command print it."""
    lines = []
    for line in bottom_lines(read_source(Path(folder))):
        lines += [line.sentence, line.window, line.scope]
    return "\n".join([*lines, DISCLAIMER])


def report_context(source: Source, figures: Path) -> dict[str, Any]:
    """Everything that the layouts of `reports/` may show; draws the figures into a folder."""
    lines = bottom_lines(source)
    pictures, path_tables = _paths(source, lines, figures)
    sections = [_section(source, experiment, figures) for experiment in source.campaign.experiments]
    tables = [
        disagreements(source), experiments_table(source), margins_table(source), comparison_table(source),
        departures(source), usage_table(source), files_table(source), uncertainty_table(source),
        device_table(source), *path_tables,
        *(
            shown for section in sections for shown in (section.fits, section.fitted, section.predicted)
            if shown is not None
        ),
    ]  # fmt: skip
    return {
        "title": source.campaign.title,
        "device": source.campaign.device,
        "provenance": source.provenance,
        "bottom_lines": lines,
        "disclaimer": DISCLAIMER,
        "limits": LIMITS,
        "rule": RULE,
        "threshold": KEPT_ABOVE,
        "counts": counts(source.comparison),
        "signs": SIGNS,
        "disagreements": disagreements_in_brief(source),
        "suspects": _suspects(source),
        "rule_fixed": rule_fixed(source),
        "facts": facts(source),
        "paths": pictures,
        "sections": sections,
        "tables": {shown.key: shown for shown in tables},
        "audit_facts": audit_facts(source),
        "problems": problems(source),
        "execution": execution_facts(source),
        "deviations": deviations(source),
        "device_facts": device_facts(source),
        "cards": cards(source),
        "versions": dict(source.provenance.get("versions") or {}),
        "inline": inline,
        "whole": whole,
        "finding_text": finding_text,
    }


def _paths(source: Source, lines: list[BottomLine], folder: Path) -> tuple[list[Any], list[Table]]:
    from rcbench.report.figure_path import path_figure
    from rcbench.report.path import path_data

    pictures, tables = [], []
    for at, group in enumerate(groups(source)):
        data = path_data(source, group)
        if data is None:
            continue
        name = "path" if at == 0 else f"path-{at + 1}"
        pictures.append(path_figure(data, KEPT_ABOVE, folder, name))
        points: list[Any] = list(data.points.itertuples())
        rows = [
            Row(
                cells=(
                    row.family,
                    f"{row.depth:g}",
                    f"at most {fixed(row.spread, 3)}"
                    if row.constructed
                    else f"{fixed(row.spread, 3)} {interval(row.spread_low, row.spread_high)}",
                    f"{fixed(row.kept, 3)} {interval(row.kept_low, row.kept_high)}",
                )
            )
            for row in points
        ]
        what = "kept" if data.kept_key == "self_fidelity" else "faithful"
        columns = f"circuits, depth>, spread [interval]>, {what} [interval]>"
        tables.append(table(name, "The path in numbers", columns, rows, data.points))
    return pictures, tables


def _section(source: Source, experiment: Experiment, folder: Path) -> Section:
    from rcbench.report.figure_decay import decay_figure
    from rcbench.report.figure_otoc import otoc_figure
    from rcbench.report.predicted_figures import predicted_figures

    keys = source.signatures(experiment.name)
    pictures = [decay_figure(source, experiment, key, folder) for key in keys]
    pictures.append(otoc_figure(source, experiment, folder))
    if experiment.protocol is None:
        pictures += predicted_figures(source, experiment, folder)
    rows = source.comparison[source.comparison["experiment"] == experiment.name]
    return Section(
        experiment=experiment,
        about=about(experiment),
        counts=counts(rows),
        pictures=[picture for picture in pictures if picture is not None],
        fits=fits_table(source, experiment.name),
        predicted=predicted_table(source, experiment.name) if experiment.protocol else value_table(source, experiment),
        fitted=fitted_table(source, experiment) if experiment.protocol is None else None,
    )


def _suspects(source: Source) -> list[str]:
    return [
        f"{source.qubit_name(found.coupler[0])}–{source.qubit_name(found.coupler[1])}: average infidelity "
        f"{fixed(found.excess, 3)} ± {fixed(found.std_error, 3)} above the stated one, if its errors are depolarising "
        f"(from {found.experiment})."
        for found in suspects(source)
    ]

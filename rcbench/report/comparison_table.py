"""The comparison as a table to read, the rows that depart one by one, and the disagreements in words."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from rcbench.regions import read_setting
from rcbench.report.printed import MISSING, decimals_for, fixed, interval, number, ranges, whole
from rcbench.report.source import Source
from rcbench.report.table import Row, Table, finding_text, table
from rcbench.signatures.registry import signature
from rcbench.tables import FINDINGS

MOST_DEPARTURES = 60
_COLUMNS = (
    "signature, depth>, instances>, measured [interval]>, ideal>, noise model>, difference [interval]>, margin>, finding"
)
_WORST_FIRST = ("departs", "undecided", "not-tested", "agrees")


@dataclass(frozen=True, slots=True, kw_only=True)
class Disagreement:
    """Rows of one signature of one experiment that depart. qubits: device qubits that their regions name."""

    experiment: str
    signature: str
    text: str
    qubits: tuple[int, ...]


def counts(frame: pd.DataFrame) -> dict[str, int]:
    """Rows by finding, every finding named."""
    return {finding: int((frame["finding"] == finding).sum()) for finding in FINDINGS}


def comparison_table(source: Source) -> Table:
    """One line a signature and depth; where it has several regions, their mean, their largest difference and their counts."""
    rows: list[Row] = []
    for experiment in source.campaign.experiments:
        head = _head(source, experiment.name)
        for key in source.signatures(experiment.name):
            part = source.compared(experiment.name, key)
            for _, same in part.groupby("depth", dropna=False):
                rows.append(_line(key, same, head))
                head = ""
    return table("comparison", "Measured against both predictions", _COLUMNS, rows, source.comparison)


def fits_table(source: Source, name: str) -> Table | None:
    """What holds for all depths of an experiment together, as the loss a layer, which no curve shows; None without any."""
    frame = source.comparison
    rows = frame[(frame["experiment"] == name) & frame["depth"].isna()]
    if rows.empty:
        return None
    lines = [_line(str(key), same, "") for key, same in rows.groupby("signature", sort=False)]
    lines = [Row(cells=(line.cells[0], *line.cells[2:]), mark=line.mark) for line in lines]
    return table(f"fits-{name}", "Fits over all depths", _COLUMNS.replace(" depth>,", ""), lines, rows)


def _head(source: Source, name: str) -> str:
    experiment = source.campaign.experiment(name)
    role = f", control for {experiment.control_for}" if experiment.control_for else ""
    return f"{name} ({experiment.circuits.family}{role}; tested against the {experiment.against.replace('-', ' ')})"


def _line(key: str, rows: pd.DataFrame, head: str) -> Row:
    first, several = rows.iloc[0], len(rows) > 1
    mean = rows[["measured", "ideal", "noise_model"]].mean()
    digits = decimals_for(rows["std_error"].median())
    widest = rows.loc[rows["difference"].abs().idxmax()] if rows["difference"].notna().any() else first
    used = int(np.nan_to_num(rows["instances"].min()))
    planned = int(np.nan_to_num(first["instances_planned"]))
    if several:
        by = counts(rows)
        mark = next(name for name in _WORST_FIRST if by[name])
        said = "; ".join(f"{count} {finding_text(name)}" for name, count in by.items() if count)
        measured = f"{fixed(mean['measured'], digits)} (mean)"
        difference = f"{fixed(widest['difference'], digits)} (largest)"
    else:
        mark = str(first["finding"])
        note = f" ({first['note']})" if first["note"] else ""
        said = finding_text(mark, str(first["direction"])) + note
        measured = f"{fixed(first['measured'], digits)} {interval(first['ci_low'], first['ci_high'], digits)}"
        bounds = interval(first["diff_ci_low"], first["diff_ci_high"], digits)
        difference = f"{fixed(first['difference'], digits)} {bounds}"
    row = signature(key)
    unit = f" / {row.unit}" if row.unit else ""
    return Row(
        head=head,
        mark=mark,
        cells=(
            f"{row.title}{unit}, {row.axis}" + (f", {len(rows)} regions" if several else ""),
            f"{first['depth']:g}" if np.isfinite(first["depth"]) else MISSING,
            str(used) if used == planned else f"{used} of {planned}",
            _tidy(measured),
            fixed(mean["ideal"], digits),
            fixed(mean["noise_model"], digits),
            _tidy(difference),
            number(rows["margin"].min(), 2),
            said,
        ),
    )


def _tidy(text: str) -> str:
    return MISSING if text.startswith(MISSING) else text


def departures(source: Source) -> Table:
    """The rows of single regions that depart, the largest against its uncertainty first."""
    frame = source.comparison
    rows = frame[(frame["finding"] == "departs") & (frame["region"] != "")]
    size = (rows["difference"] / rows["u_combined"]).abs()
    rows = rows.loc[size.sort_values(ascending=False, kind="stable").index]
    lines = [
        Row(
            mark="departs",
            cells=(
                row["experiment"],
                signature(row["signature"]).title,
                region_text(source, row["experiment"], row["region"]),
                f"{row['depth']:g}" if np.isfinite(row["depth"]) else MISSING,
                fixed(row["measured"], 3),
                fixed(row["noise_model"], 3),
                fixed(row["difference"], 3),
                fixed(row["u_combined"], 3),
                finding_text("departs", row["direction"]),
            ),
        )
        for _, row in rows.head(MOST_DEPARTURES).iterrows()
    ]
    left = len(rows) - len(lines)
    title = "Single regions that depart" + (f" (the {MOST_DEPARTURES} largest; {left} more in comparison.csv)" if left else "")
    columns = "experiment, signature, region, depth>, measured>, noise model>, difference>, u>, finding"
    return table("departures", title, columns, lines, rows)


def region_text(source: Source, experiment: str, region: str) -> str:
    """A region with the device's own labels beside the experiment's: ``butterfly 1 (T2), probe 4 (T5), W X``."""
    if "=" not in region:
        return region
    qubits = source.campaign.experiment(experiment).qubits
    parts = []
    for name, value in read_setting(region).items():
        place = int(value) if value.isdigit() else -1
        label = f" ({source.qubit_name(qubits[place])})" if 0 <= place < len(qubits) else ""
        parts.append(f"{name} {value}{label}")
    return ", ".join(parts)


def disagreements(source: Source) -> list[Disagreement]:
    """What departs, one statement a signature of an experiment, controls included."""
    found = []
    for experiment in source.campaign.experiments:
        for key in source.signatures(experiment.name):
            rows = source.compared(experiment.name, key)
            off = rows[rows["finding"] == "departs"]
            if len(off):
                found.append(_disagreement(source, experiment.name, key, rows, off))
    return found


def _disagreement(source: Source, name: str, key: str, rows: pd.DataFrame, off: pd.DataFrame) -> Disagreement:
    experiment = source.campaign.experiment(name)
    tested = int((rows["finding"] != "not-tested").sum())
    depths = [int(depth) for depth in off["depth"].dropna()]
    at = f" at depth {ranges(depths)}" if depths else ""
    worst = off.loc[(off["difference"] / off["u_combined"]).abs().idxmax()]
    where = f", {region_text(source, name, worst['region'])}" if worst["region"] else ""
    where += f" at depth {worst['depth']:g}" if np.isfinite(worst["depth"]) else ""
    said = "/".join(sorted({text for text in off["direction"] if text}))
    digits = decimals_for(worst["u_combined"])
    qubits: set[int] = set()
    for region in off["region"]:
        setting = read_setting(region) if "=" in region else {}
        qubits |= {experiment.qubits[int(setting["probe"])]} if setting.get("probe", "").isdigit() else set()
    text = (
        f"{signature(key).title} departs from the {experiment.against.replace('-', ' ')}{at}"
        f"{f' ({said})' if said else ''}: {whole(len(off))} of {whole(tested)} rows tested; "
        f"strongest {fixed(worst['difference'], digits)} ± {fixed(worst['u_combined'], digits)} (u){where}."
    )
    return Disagreement(experiment=name, signature=key, text=text, qubits=tuple(sorted(qubits)))

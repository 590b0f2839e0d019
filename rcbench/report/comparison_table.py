"""The comparison as a table to read, the rows that depart one by one, and the disagreements in words."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd

from rcbench.campaign import Experiment
from rcbench.regions import read_setting
from rcbench.report.printed import MISSING, decimals_for, depths_text, fixed, interval, number, small_power, whole
from rcbench.report.source import Source
from rcbench.report.table import Row, Table, finding_text, table
from rcbench.signatures.registry import signature
from rcbench.tables import FINDINGS

MOST_DEPARTURES = 60
_COLUMNS = "depth>, instances>, measured [interval]>, ideal>, noise model>, control>, difference [interval]>, finding"
_SAID_ELSEWHERE = ("control value of", "further controls", "between ")  # parts of a note; the rest says why
_WORST_FIRST = ("departs", "undecided", "not-tested", "agrees")


def counts(frame: pd.DataFrame) -> dict[str, int]:
    """Rows by finding, every finding named."""
    return {finding: int((frame["finding"] == finding).sum()) for finding in FINDINGS}


def comparison_table(source: Source) -> Table:
    """A block a signature, a line a depth; where it has several regions, their mean, largest difference and counts."""
    rows: list[Row] = []
    for experiment in source.campaign.experiments:
        for key in source.signatures(experiment.name):
            part = source.compared(experiment.name, key)
            rows += _block(experiment, key, part[part["depth"].notna()])
    return table("comparison", "Measured against both predictions", _COLUMNS, rows, source.comparison)


def fits_table(source: Source, name: str) -> Table | None:
    """What holds for all depths of an experiment together, as the loss a layer; None without any."""
    frame = source.comparison
    rows = frame[(frame["experiment"] == name) & frame["depth"].isna()]
    if rows.empty:
        return None
    lines: list[Row] = []
    for key, same in rows.groupby("signature", sort=False):
        lines += _block(source.campaign.experiment(name), str(key), same)
    lines = [replace(line, cells=line.cells[1:]) for line in lines]
    return table(f"fits-{name}", "Fits over all depths", _COLUMNS.removeprefix("depth>, "), lines, rows)


def _block(experiment: Experiment, key: str, rows: pd.DataFrame) -> list[Row]:
    """The lines of one signature; the head holds what they have in common, and the power of ten of small values."""
    if rows.empty:
        return []
    row = signature(key)
    size = rows[["measured", "ideal", "noise_model", "margin"]].abs().max(axis=None)
    power = small_power(size)
    scale = 10.0**power
    digits = decimals_for((rows["std_error"] * scale).median())
    low, high = rows["margin"].min() * scale, rows["margin"].max() * scale
    margin = number(low, 2) if low == high else f"{number(low, 2)} to {number(high, 2)}"
    parts = [
        f"{experiment.name}: {row.title}",
        f"{row.axis} axis",
        f"control for {experiment.control_for}" if experiment.control_for else "",
        f"against the {experiment.against.replace('-', ' ')}",
        f"margin {margin}",
        f"in {row.unit}" if row.unit else "",
        f"numbers in units of {10.0**-power:.{power}f}" if power else "",
    ]
    head = "; ".join(part for part in parts if part)
    lines = [_line(same, scale, digits) for _, same in rows.groupby("depth", dropna=False)]
    return [replace(lines[0], head=head), *lines[1:]]


def _line(rows: pd.DataFrame, scale: float, digits: int) -> Row:
    first, several = rows.iloc[0], len(rows) > 1
    used, planned = _count(rows["instances"].min()), _count(first["instances_planned"])
    mean = rows[["measured", "ideal", "noise_model", "control_value"]].mean() * scale
    if several:
        by = counts(rows)
        mark = next(name for name in _WORST_FIRST if by[name])
        said = f"{len(rows)} regions: " + "; ".join(
            f"{count} {finding_text(name)}" for name, count in by.items() if count
        )
        size = rows["difference"].abs().fillna(-1.0)
        widest = rows.iloc[int(size.argmax())]
        measured = _with(fixed(mean["measured"], digits), "mean")
        difference = _with(fixed(widest["difference"] * scale, digits), "largest")
    else:
        mark = str(first["finding"])
        why = [part for part in str(first["note"]).split("; ") if part and not part.startswith(_SAID_ELSEWHERE)]
        said = finding_text(mark, str(first["direction"])) + (f": {'; '.join(why)}" if why else "")
        ends = first[["ci_low", "ci_high", "diff_ci_low", "diff_ci_high"]].astype(float) * scale
        measured = _with(fixed(mean["measured"], digits), interval(ends["ci_low"], ends["ci_high"], digits))
        bounds = interval(ends["diff_ci_low"], ends["diff_ci_high"], digits)
        difference = _with(fixed(first["difference"] * scale, digits), bounds)
    return Row(
        mark=mark,
        cells=(
            f"{first['depth']:g}" if np.isfinite(first["depth"]) else MISSING,
            str(used) if used == planned else f"{used} of {planned}",
            measured,
            fixed(mean["ideal"], digits),
            fixed(mean["noise_model"], digits),
            fixed(mean["control_value"], digits),
            difference,
            said,
        ),
    )


def _count(value: float) -> int:
    return int(value) if np.isfinite(value) else 0


def _with(value: str, more: str) -> str:
    return value if MISSING in (value, more) else f"{value} {more}"


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
    title = "Single regions that depart" + (
        f" (the {MOST_DEPARTURES} largest; {left} more in comparison.csv)" if left else ""
    )
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


def disagreements(source: Source) -> Table:
    """What departs, one line a signature of an experiment, controls included."""
    lines: list[Row] = []
    for experiment in source.campaign.experiments:
        for key in source.signatures(experiment.name):
            rows = source.compared(experiment.name, key)
            if (rows["finding"] == "departs").any():
                lines.append(_disagreement(source, experiment, key, rows))
    columns = "experiment, signature, rows>, where, strongest difference ± u>, at, finding"
    return table("disagreements", "Departures from the prediction tested against", columns, lines)


def disagreements_in_brief(source: Source) -> list[str]:
    """What departs, one line an experiment."""
    found = []
    for experiment in source.campaign.experiments:
        rows = source.comparison[source.comparison["experiment"] == experiment.name]
        off = rows[rows["finding"] == "departs"]
        if len(off):
            titles = ", ".join(signature(key).title for key in dict.fromkeys(off["signature"]))
            said = "/".join(sorted({text for text in off["direction"] if text})) or "departs"
            tested = int((rows["finding"] != "not-tested").sum())
            found.append(f"{experiment.name}: {titles} ({said}; {whole(len(off))} of {whole(tested)} rows).")
    return found


def _disagreement(source: Source, experiment: Experiment, key: str, rows: pd.DataFrame) -> Row:
    off = rows[rows["finding"] == "departs"]
    tested = int((rows["finding"] != "not-tested").sum())
    depths = off["depth"].dropna()
    worst = off.iloc[int((off["difference"] / off["u_combined"]).abs().fillna(0.0).argmax())]
    digits = decimals_for(worst["u_combined"])
    at = [
        f"depth {worst['depth']:g}" if np.isfinite(worst["depth"]) else "",
        region_text(source, experiment.name, worst["region"]),
    ]
    return Row(
        mark="departs",
        cells=(
            experiment.name,
            signature(key).title,
            f"{whole(len(off))} of {whole(tested)}",
            depths_text(depths, experiment.depths) if len(depths) else "fit over all depths",
            f"{fixed(worst['difference'], digits)} ± {fixed(worst['u_combined'], digits)}",
            ", ".join(part for part in at if part) or MISSING,
            finding_text("departs", "/".join(sorted({text for text in off["direction"] if text}))),
        ),
    )

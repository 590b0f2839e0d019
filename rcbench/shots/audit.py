"""The audit: what was asked, what came back, what is wrong with it, and what nobody stated."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from rcbench.shots import findings
from rcbench.shots.completeness import by_experiment, missing_circuits, runs_frame
from rcbench.shots.declarations import EXECUTION_FILE, NOT_STATED, Execution, moment
from rcbench.shots.findings import Dropped
from rcbench.shots.shots import SEVERITIES, Problem, ShotFile, Shots

if TYPE_CHECKING:
    from rcbench.kit import Kit

__all__ = ["Audit", "check_shots", "missing_circuits"]
LISTED = 1000  # ids that audit.json lists; the counts are of all


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Audit:
    """What came back of a kit.

    Args:
        table: one row an experiment, columns `completeness.TABLE_COLUMNS`.
        frame: one row a run, columns `completeness.RUN_COLUMNS`.
        bit_order, files, execution, unknown: as the shots have them. set_aside: bad rows and whole bad files set aside.
        problems: worst first.
        groups: (experiment, instance, depth, repeat, what it lacks) of everything dropped whole.
        trends: z of the linear trend with depth, by experiment and kind of loss.
        wall_time: `first`, `last` (ISO 8601, UTC), `seconds` and `source`; empty where no time was stated.
    """

    table: pd.DataFrame
    frame: pd.DataFrame
    bit_order: str
    files: tuple[ShotFile, ...]
    execution: Execution
    problems: tuple[Problem, ...]
    groups: tuple[Dropped, ...] = ()
    unknown: Mapping[str, int] = field(default_factory=dict)
    set_aside: int = 0
    trends: Mapping[str, float] = field(default_factory=dict)
    wall_time: Mapping[str, Any] = field(default_factory=dict)

    @property
    def dropped(self) -> frozenset[tuple[str, int, int]]:
        """(experiment, instance, depth) of which no repeat can be used, since what all its runs need is missing."""
        return frozenset((experiment, instance, depth) for experiment, instance, depth, _, _ in self.groups)

    @property
    def needs_attention(self) -> bool:
        """Whether there is more to tell than notes."""
        return any(problem.severity != "note" for problem in self.problems)

    def text(self) -> str:
        """The audit for a terminal."""
        parts = [self._summary(), _table_text(self.table), *self._problems_text(), self._files_text()]
        return "\n\n".join([*parts, self._execution_text()])

    def _summary(self) -> str:
        t = self.table
        line = (
            f"{t['returned'].sum()} of {t['asked'].sum()} circuits came back, with {t['shots_returned'].sum()} usable "
            f"shots of {t['shots_asked'].sum()} asked for; bit order {self.bit_order}"
        )
        if self.set_aside:
            line += f"; {self.set_aside} bad rows set aside"
        if self.wall_time:
            took = self.wall_time
            line += f"\n{took['seconds']:.0f} s from {took['first']} to {took['last']} ({took['source']})"
        return line if self.needs_attention else f"{line}\nNothing needs attention."

    def _problems_text(self) -> list[str]:
        lines = []
        for problem in self.problems:
            lines.append(f"{problem.severity}: {safe(problem.text)}")
            if problem.hint:
                lines.append(f"  to mend it: {safe(problem.hint)}")
        return ["\n".join(lines)] if lines else []

    def _files_text(self) -> str:
        width = max(len(safe(file.name)) for file in self.files) if self.files else 0
        lines = [
            f"{safe(f.name):<{width}}  sha256 {f.sha256[:12]}" + f"  {f.rows} rows" * (f.rows > 0) for f in self.files
        ]
        return "\n".join(["Files read", *lines])

    def _execution_text(self) -> str:
        facts = self.execution.facts()
        width = max(map(len, facts))
        lines = [f"{key:<{width}}  {safe(value)}" for key, value in facts.items() if value != NOT_STATED]
        missing = ", ".join(self.execution.not_stated())
        head = "Execution" if lines else f"Execution: nothing stated (no {EXECUTION_FILE} beside the shots)"
        return "\n".join([head, *lines, *([f"{'not stated':<{width}}  {missing}"] if lines and missing else [])])

    def as_dict(self) -> dict[str, Any]:
        """The audit as JSON holds it; lists of circuits end after LISTED, their counts do not."""
        missing = self.frame.loc[self.frame["state"] == "missing", "circuit_id"].tolist()
        return {
            "bit_order": self.bit_order,
            "needs_attention": self.needs_attention,
            "table": _records(self.table),
            "files": [file._asdict() for file in self.files],
            "problems": [{"severity": p.severity, "text": p.text, "hint": p.hint} for p in self.problems],
            "execution": self.execution.facts(),
            "not_stated": list(self.execution.not_stated()),
            "wall_time": dict(self.wall_time),
            "dropped": [
                {"experiment": e, "instance": i, "depth": d, "repeat": r, "lacking": words}
                for e, i, d, r, words in self.groups[:LISTED]
            ],
            "dropped_count": len(self.groups),
            "missing": missing[:LISTED],
            "missing_count": len(missing),
            "unknown": dict(list(self.unknown.items())[:LISTED]),
            "unknown_count": len(self.unknown),
            "set_aside": self.set_aside,
            "trend_z": {key: round(z, 6) for key, z in self.trends.items()},
        }


def check_shots(kit: Kit, shots: Shots) -> Audit:
    """Audit the shots of a kit: complete, short, missing, unknown, and what the files alone give reason to doubt."""
    frame = runs_frame(kit, shots)
    names = [experiment.name for experiment in kit.campaign.experiments]
    groups = findings.dropped_groups(kit, shots)
    depth_problems, trends = findings.of_depth(frame)
    problems = [
        *shots.problems,
        *findings.of_completeness(frame, shots),
        *findings.of_doubling(frame, shots),
        *depth_problems,
        *findings.of_dropping(groups),
        *findings.of_execution(kit, shots),
        *findings.of_batches(kit, shots),
    ]
    return Audit(
        table=by_experiment(frame, names, len(shots.unknown)),
        frame=frame,
        bit_order=shots.bit_order,
        files=shots.files,
        execution=shots.execution,
        problems=tuple(sorted(problems, key=lambda p: SEVERITIES.index(p.severity))),
        groups=tuple(groups),
        unknown=shots.unknown,
        set_aside=len(shots.bad_rows),
        trends=trends,
        wall_time=_wall_time(shots),
    )


def _wall_time(shots: Shots) -> dict[str, Any]:
    """From the shots' own times where they have them, else from execution.toml."""
    first, last = findings.span(shots)
    if first is not None and last is not None:
        seconds = float((last - first).astype("timedelta64[us]").astype("int64")) / 1e6
        return {"first": utc(first), "last": utc(last), "seconds": seconds, "source": "time_utc of the shots"}
    stated = shots.execution
    if stated.started and stated.ended:
        seconds = (moment(stated.ended) - moment(stated.started)).total_seconds()
        return {"first": stated.started, "last": stated.ended, "seconds": seconds, "source": EXECUTION_FILE}
    return {}


def utc(time: np.datetime64) -> str:
    """A time_utc to the second, ISO 8601."""
    return f"{np.datetime_as_string(time, unit='s')}Z"


def _records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Rows with plain Python numbers."""
    return [
        {str(key): value.item() if hasattr(value, "item") else value for key, value in row.items()}
        for row in table.to_dict(orient="records")
    ]


def _table_text(table: pd.DataFrame) -> str:
    """Columns aligned, words to the left and numbers to the right."""
    heads = [name.replace("_", " ") for name in table.columns]
    rows = [[safe(str(cell)) for cell in row] for row in table.itertuples(index=False)]
    widths = [max(len(row[place]) for row in [heads, *rows]) for place in range(len(heads))]
    lines = [
        "  ".join(
            cell.ljust(w) if place == 0 else cell.rjust(w)
            for place, (cell, w) in enumerate(zip(row, widths, strict=True))
        )
        for row in [heads, *rows]
    ]
    return "\n".join(line.rstrip() for line in lines)


def safe(text: str) -> str:
    """Text from a file without what could steer a terminal."""
    return "".join(c if c.isprintable() or c == "\n" else ascii(c)[1:-1] for c in text)

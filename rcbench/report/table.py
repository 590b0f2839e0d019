"""A table of the report as text, ready for the page, for Markdown and for LaTeX."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from rcbench.files import write_csv
from rcbench.report.printed import MINUS, MISSING

SIGNS = {"agrees": "≈", "departs": "≠", "undecided": "?", "not-tested": "·"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Row:
    """One row. cells: as they are shown; mark: a finding, shown by more than a colour; head: opens a block."""

    cells: tuple[str, ...]
    mark: str = ""
    head: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table. key: name of its files; numeric: columns that stand to the right; frame: raw numbers for the CSV."""

    key: str
    title: str
    headings: tuple[str, ...]
    numeric: tuple[bool, ...]
    rows: tuple[Row, ...]
    frame: pd.DataFrame | None = None

    def blocks(self) -> list[tuple[str, list[Row]]]:
        """The rows by the head that opens each block."""
        out: list[tuple[str, list[Row]]] = []
        for row in self.rows:
            if not out or row.head:
                out.append((row.head, []))
            out[-1][1].append(row)
        return out

    def write_csv(self, folder: Path) -> None:
        """Write <key>.csv: raw numbers where they are known, else the text of the cells."""
        frame = self.frame
        if frame is None:
            rows = [[_plain(cell) for cell in row.cells] for row in self.rows]
            frame = pd.DataFrame(rows, columns=list(self.headings), dtype=object)
        write_csv(folder / f"{self.key}.csv", frame, list(frame.columns))


def _plain(cell: str) -> str:
    """A cell as programs read it: no thin spaces, a plain minus, nothing where nothing is known."""
    return "" if cell == MISSING else cell.replace("\u202f", "").replace("\u00a0", " ").replace(MINUS, "-")


def table(
    key: str, title: str, columns: str, rows: Sequence[Sequence[str] | Row], frame: pd.DataFrame | None = None
) -> Table:
    """A table from its columns, as ``signature, depth>, measured>`` where ``>`` sets a column to the right."""
    names = [name.strip() for name in columns.split(",")]
    return Table(
        key=key,
        title=title,
        headings=tuple(name.removesuffix(">") for name in names),
        numeric=tuple(name.endswith(">") for name in names),
        rows=tuple(row if isinstance(row, Row) else Row(cells=tuple(row)) for row in rows),
        frame=frame,
    )


def finding_text(finding: str, direction: str = "") -> str:
    """A finding as sign and word: ``≠ departs, worse``."""
    word = finding.replace("-", " ")
    said = f", {direction}" if direction and finding != "agrees" else ""
    return f"{SIGNS.get(finding, '?')} {word}{said}"

"""How every figure looks and is written: colours, markers, sizes, and the same bytes for the same data.

The colours are those of Okabe and Ito (Color Universal Design, 2008), which colour-blind readers tell apart. No
colour stands alone: each kind of curve has its own line style and each kind of point its own marker.
"""

from __future__ import annotations

import io
import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import pandas as pd
import seaborn as sns
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

from rcbench.files import write_bytes

BLACK, BLUE, ORANGE, GREEN, PURPLE, SKY, GREY = (
    "#000000", "#0072B2", "#D55E00", "#009E73", "#CC79A7", "#56B4E9", "#6B6B6B",
)  # fmt: skip
MEASURED: dict[str, Any] = {"color": BLACK, "marker": "o", "linestyle": "none"}
IDEAL: dict[str, Any] = {"color": BLUE, "linestyle": "-", "linewidth": 1.4}
NOISE_MODEL: dict[str, Any] = {"color": ORANGE, "linestyle": (0, (5, 2)), "linewidth": 1.4}
CONTROLS: dict[str, dict[str, Any]] = {
    "product": {"color": GREEN, "marker": "s"},
    "dimers": {"color": PURPLE, "marker": "^"},
}
# filled: agrees; open: undecided; a cross: departs
FINDING_MARKERS: dict[str, dict[str, Any]] = {
    "agrees": {"marker": "o", "markerfacecolor": BLACK, "markeredgecolor": BLACK},
    "departs": {"marker": "X", "markerfacecolor": ORANGE, "markeredgecolor": BLACK, "markersize": 7.5},
    "undecided": {"marker": "o", "markerfacecolor": "white", "markeredgecolor": BLACK},
    "not-tested": {"marker": "1", "markerfacecolor": GREY, "markeredgecolor": GREY, "markersize": 8.0},
}
DEPTH_MARKERS = ("o", "s", "^", "D", "v", "P", "<", "X", ">", "p")
WIDE = 7.4  # inches: the text width of an A4 page
DPI = 120
_PREAMBLE = re.compile(r"\A.*?(?=<svg )", re.DOTALL)
_COMMENTS = re.compile(r"<!--.*?-->\s*|<metadata>.*?</metadata>\s*", re.DOTALL)
_ID = re.compile(r' id="([^"]*)"')
_REFERENCE = re.compile(r'(?:href="|url\()#([^")]*)')
_SIZE = re.compile(r'(<svg [^>]*?)\s+width="[^"]*"|\s+height="[0-9.]+pt"')


@dataclass(frozen=True, slots=True)
class Picture:
    """A figure of the report. name: of its files; svg: to stand in the page; caption; alt: the figure in words."""

    name: str
    svg: str
    caption: str
    alt: str


@contextmanager
def style() -> Iterator[None]:
    """The settings of every figure, for as long as the context lasts."""
    settings = {
        **sns.axes_style("ticks"),
        "font.family": "DejaVu Sans",
        "font.size": 8.5,
        "axes.titlesize": 9,
        "axes.titleweight": "bold",
        "axes.titlelocation": "left",
        "axes.labelsize": 8.5,
        "axes.linewidth": 0.8,
        "axes.grid": True,
        "grid.color": "#E3E3E3",
        "grid.linewidth": 0.6,
        "xtick.labelsize": 8,
        "ytick.labelsize": 8,
        "legend.fontsize": 7.8,
        "legend.frameon": False,
        "lines.markersize": 5,
        "lines.linewidth": 1.4,
        "errorbar.capsize": 2.5,
        "hatch.linewidth": 0.5,
        "svg.hashsalt": "rcbench",  # element names depend on the data only, so reruns give the same bytes
        "svg.fonttype": "path",
        "axes.unicode_minus": True,
        "figure.facecolor": "white",
    }
    with mpl.rc_context(settings):
        yield


def whole_depths(axes: Axes, depths: list[float]) -> None:
    """Ticks at the depths measured, thinned where they would touch."""
    ticks = sorted(set(depths))
    while len(ticks) > 10:
        ticks = ticks[::2]
    axes.set_xticks(ticks, [f"{depth:g}" for depth in ticks])
    if len(set(depths)) > 1:
        room = 0.07 * (max(depths) - min(depths))
        axes.set_xlim(min(depths) - room, max(depths) + room)


def legend_above(figure: Figure, axes: Axes, columns: int) -> None:
    """One legend above all axes of a figure: the measurement first, controls last."""
    handles, labels = axes.get_legend_handles_labels()
    order = sorted(range(len(labels)), key=lambda at: (labels[at] != "measured", "control" in labels[at]))
    figure.legend(
        [handles[at] for at in order], [labels[at] for at in order], ncols=columns, columnspacing=1.4, handlelength=2.6,
        borderaxespad=0.1, loc="upper left" if figure.get_layout_engine() is None else "outside upper left",
    )  # fmt: skip


def log_axis(axes: Axes, values: pd.DataFrame) -> float:
    """A logarithmic upright axis round positive values, with plain numbers at its ticks; gives its lower end."""
    numbers = values.to_numpy(dtype=float)
    numbers = numbers[np.isfinite(numbers) & (numbers > 0)]
    low, high = 0.75 * float(numbers.min()), 1.2 * float(numbers.max())
    axes.set_yscale("log")
    axes.set_ylim(low, high)
    steps = (1, 2, 5) if high / low > 8 else (1, 1.5, 2, 3, 4, 5, 6, 8) if high / low > 2 else range(1, 10)
    axes.yaxis.set_major_locator(LogLocator(subs=steps if high / low < 200 else (1,)))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_minor_formatter(NullFormatter())
    return low


def finish(figure: Figure, folder: Path, name: str, caption: str, alt: str) -> Picture:
    """Write a figure as SVG and PNG without dates or versions, and give it for the page."""
    sns.despine(figure)
    engine = figure.get_layout_engine()
    if engine is not None:
        engine.execute(figure)  # once; savefig would lay it out and draw it again for each file
        figure.set_layout_engine("none")
    drawn, painted = io.BytesIO(), io.BytesIO()
    FigureCanvasSVG(figure).print_svg(drawn, metadata={"Date": None, "Creator": None})  # type: ignore[no-untyped-call]
    write_bytes(folder / f"{name}.svg", drawn.getvalue())
    figure.set_dpi(DPI)
    FigureCanvasAgg(figure).print_png(painted, metadata={"Software": None})  # type: ignore[no-untyped-call]
    write_bytes(folder / f"{name}.png", painted.getvalue())
    return Picture(name, inline_svg(drawn.getvalue().decode("utf-8"), name), caption, alt)


def inline_svg(text: str, name: str) -> str:
    """SVG to stand in a page: no preamble, no size of its own, and no name of an element that another figure uses."""
    text = _COMMENTS.sub("", _PREAMBLE.sub("", text, count=1))
    text = _SIZE.sub(r"\1", text, count=2)
    used = set(_REFERENCE.findall(text))
    text = _ID.sub(lambda found: f' id="{name}-{found.group(1)}"' if found.group(1) in used else "", text)
    return _REFERENCE.sub(lambda found: found.group(0).replace("#", f"#{name}-", 1), text)

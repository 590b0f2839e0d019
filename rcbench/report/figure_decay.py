"""A signature against depth: measured, ideal and noise model, what is left between them, and instance by instance."""

from __future__ import annotations

import textwrap
from pathlib import Path

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from rcbench.campaign import Experiment
from rcbench.report import figures as look
from rcbench.report.curves import mean_over_regions
from rcbench.report.printed import number, percent, small_power
from rcbench.report.source import Source
from rcbench.signatures.registry import signature

_SCALED = (
    "measured", "ci_low", "ci_high", "ideal", "noise_model", "null_value", "difference", "diff_ci_low",
    "diff_ci_high", "margin",
)  # fmt: skip
MOST_POINTS = 500  # in the instance panel; beyond, regions are averaged


def decay_figure(source: Source, experiment: Experiment, key: str, folder: Path) -> look.Picture | None:
    """The figure of one signature of one experiment; None where nothing was measured against depth."""
    rows = source.compared(experiment.name, key)
    rows = rows[rows["depth"].notna()]
    if rows["measured"].isna().all():
        return None
    title = signature(key).title
    power = small_power(rows[["measured", "noise_model", "ideal"]].abs().max(axis=None))
    scale = 10.0**power
    words = _words(source, experiment, key, rows)
    rows = rows.assign(**{column: rows[column] * scale for column in _SCALED})
    # a depth with no data still gets its place, and a mark
    with look.style():
        figure = Figure(figsize=(look.WIDE, 3.3))
        # places fixed by hand: to have them found takes longer than to draw
        grid = figure.add_gridspec(
            2, 2, left=0.115, right=0.9, bottom=0.135, top=0.915, wspace=0.3, hspace=0.28, width_ratios=(1.55, 1),
            height_ratios=(2.1, 1),
        )  # fmt: skip
        top = figure.add_subplot(grid[0, 0])
        below = figure.add_subplot(grid[1, 0], sharex=top)
        side = figure.add_subplot(grid[:, 1])
        _curves(top, source, experiment, key, rows, scale)
        _residuals(below, experiment, rows)
        _instances(side, source, experiment, key, scale)
        regions = rows["region"].nunique()
        name = textwrap.fill(title, 22) + (f"\nin units of {10.0**-power:.{power}f}" if power else "")
        top.set_ylabel(name if regions == 1 else f"{name}\nmean of {regions} regions")
        top.tick_params(labelbottom=False)
        below.set_xlabel("depth (layers of two-qubit gates, one way)")
        top.yaxis.set_label_coords(-0.14, 0.5)
        below.yaxis.set_label_coords(-0.14, 0.5)
        look.legend_above(figure, top, columns=6)
        return look.finish(figure, folder, f"{experiment.name}-{key}", *words)


def _words(source: Source, experiment: Experiment, key: str, rows: pd.DataFrame) -> tuple[str, str]:
    title, against = signature(key).title, experiment.against.replace("-", " ")
    counts = rows["finding"].value_counts()
    said = ", ".join(f"{name.replace('-', ' ')} {counts[name]}" for name in look.FINDING_MARKERS if name in counts)
    level = percent(source.campaign.confidence)
    caption = (
        f"{title} of {experiment.name}. Top: measured with {level} intervals, ideal, and noise model with twice the "
        f"standard uncertainty of the stated rates. Below: measured minus {against}, paired by circuit, with the "
        f"margin. Right: measured against {against}, one point an instance. Findings: {said}."
    )
    by_depth = rows.groupby("depth")[["measured", "noise_model"]].mean()
    points = "; ".join(
        f"depth {depth:g}: {number(row['measured'])}"
        + (f" against {number(row['noise_model'])}" if np.isfinite(row["noise_model"]) else "")
        for depth, row in by_depth.iterrows()
        if np.isfinite(row["measured"])
    )
    return caption, f"{title} against depth, measured against noise model. {points}."


def _curves(axes: Axes, source: Source, experiment: Experiment, key: str, rows: pd.DataFrame, scale: float) -> None:
    mean = rows.groupby("depth")[["measured", "ci_low", "ci_high", "ideal", "noise_model", "null_value"]].mean()
    if rows["region"].nunique() > 1:
        points, _ = mean_over_regions(source, experiment.name, key)
        mean = mean.drop(columns=["measured", "ci_low", "ci_high"]).join(
            pd.DataFrame(
                {"measured": points.value * scale, "ci_low": points.low * scale, "ci_high": points.high * scale},
                index=points.depth,
            ).rename_axis("depth"),
            how="left",
        )
        spread = rows.groupby("depth")["measured"].agg(["min", "max"])
        axes.vlines(
            spread.index, spread["min"], spread["max"], color="#BDBDBD", linewidth=4, zorder=1, label="all regions"
        )
    depth = mean.index.to_numpy(dtype=float)
    log = _is_decay(key, mean)
    band = 2 * scale * _rate_uncertainty(source, experiment, key, depth)
    low = mean["noise_model"].to_numpy() - band
    if log:
        low = np.maximum(low, look.log_axis(axes, mean[["measured", "noise_model", "ideal", "ci_high"]]))
    if mean["ideal"].notna().any():
        axes.plot(depth, mean["ideal"], label="ideal", zorder=2, **look.IDEAL)
    if mean["noise_model"].notna().any():
        axes.plot(depth, mean["noise_model"], label="noise model", zorder=3, **look.NOISE_MODEL)
        axes.fill_between(
            depth, low, mean["noise_model"] + band, color=look.ORANGE, alpha=0.18, linewidth=0, zorder=2,
            label="± 2u of stated rates",
        )  # fmt: skip
    null = mean["null_value"]
    bottom = axes.get_ylim()[0]
    if null.notna().any() and (not log or (null > bottom).all()):
        axes.plot(depth, null, color=look.GREY, linestyle=":", linewidth=1.2, label="fully mixed", zorder=1)
    errors = np.abs(np.vstack([mean["measured"] - mean["ci_low"], mean["ci_high"] - mean["measured"]]))
    axes.errorbar(
        depth, mean["measured"], yerr=np.nan_to_num(errors), label="measured", zorder=4, markersize=4.5, elinewidth=1.1,
        **look.MEASURED,
    )  # fmt: skip
    look.whole_depths(axes, depth.tolist())


def _is_decay(key: str, mean: pd.DataFrame) -> bool:
    """Whether a log axis is right: a positive quantity of the kept or faithful axis that falls by more than a third."""
    shown = mean[["measured", "noise_model"]].to_numpy(dtype=float)
    shown = shown[np.isfinite(shown)]
    if signature(key).axis not in ("kept", "faithful") or len(mean) < 3 or not (shown > 0).all():
        return False
    return float(shown.max()) > 1.5 * float(shown.min())


def _rate_uncertainty(source: Source, experiment: Experiment, key: str, depth: np.ndarray) -> np.ndarray:
    """Standard uncertainty of the noise model from the stated rates, by depth; common to regions, so averaged."""
    rows = source.predicted(experiment.name, key, "noise-model")
    by_depth = rows.groupby("depth")["u_model"].mean()
    return by_depth.reindex(depth).fillna(0.0).to_numpy(dtype=float)


def _residuals(axes: Axes, experiment: Experiment, rows: pd.DataFrame) -> None:
    margin = rows.groupby("depth")["margin"].min().dropna()
    if len(margin):
        axes.fill_between(
            margin.index,
            -margin,
            margin,
            facecolor="#F0F0F0",
            edgecolor="#A8A8A8",
            hatch="////",
            linewidth=0.5,
            zorder=0,
        )
    axes.axhline(0, color=look.BLACK, linewidth=0.8, zorder=1)
    several = rows["region"].nunique() > 1
    rows = rows.assign(difference=rows["difference"].where(rows["finding"] != "not-tested", 0.0))
    # regions at one depth stand side by side, not on top of each other
    place: pd.Series[float] = rows.groupby("depth").cumcount() / np.maximum(
        rows.groupby("depth")["region"].transform("count") - 1, 1
    )
    gaps = np.diff(np.unique(rows["depth"]))
    width = 0.6 * float(gaps.min()) if several and len(gaps) else 0.0
    at = rows["depth"] + width * (place - 0.5 if several else 0.0)
    for name, marker in look.FINDING_MARKERS.items():
        chosen = rows["finding"] == name
        part = rows[chosen]
        if part.empty:
            continue
        size = {"markersize": 3.2 if name != "departs" else 5.0} if several else {}
        errors = np.abs(np.vstack([
            part["difference"] - part["diff_ci_low"], part["diff_ci_high"] - part["difference"],
        ]))  # fmt: skip
        axes.errorbar(
            at[chosen], part["difference"], yerr=None if several else np.nan_to_num(errors), linestyle="none",
            color=look.BLACK, elinewidth=1.0, zorder=3, **(marker | size),
        )  # fmt: skip
    axes.set_ylabel(f"measured −\n{experiment.against.replace('-', ' ')}")
    present = [name for name in look.FINDING_MARKERS if (rows["finding"] == name).any()]
    handles = [Line2D([], [], linestyle="none", color=look.BLACK, **look.FINDING_MARKERS[name]) for name in present]
    axes.legend(
        handles, [name.replace("-", " ") for name in present], loc="lower left", bbox_to_anchor=(0, 1.0), ncols=4,
        borderaxespad=0.1, handletextpad=0.2, columnspacing=1.2,
    )  # fmt: skip


def instance_pairs(source: Source, experiment: Experiment, key: str) -> pd.DataFrame:
    """Measured and predicted value of each instance: columns depth, value, std_error, predicted."""
    keys = ["depth", "instance", "region"]
    measured = source.estimated(experiment.name, key).groupby(keys, as_index=False)[["value", "std_error"]].mean()
    model = source.predicted(experiment.name, key, experiment.against, by_instance=True)
    model = model.groupby(keys, as_index=False)[["value"]].mean().rename(columns={"value": "predicted"})
    pairs = measured.merge(model, on=keys, how="inner")
    if len(pairs) > MOST_POINTS:
        pairs = pairs.groupby(["depth", "instance"], as_index=False)[["value", "std_error", "predicted"]].mean()
    return pairs


def _instances(axes: Axes, source: Source, experiment: Experiment, key: str, scale: float) -> None:
    pairs = instance_pairs(source, experiment, key)
    pairs[["value", "predicted"]] *= scale
    axes.set_xlabel(f"predicted ({experiment.against.replace('-', ' ')})")
    axes.set_ylabel("measured")
    if pairs.empty:
        axes.text(0.5, 0.5, "no prediction\nby instance", ha="center", va="center", transform=axes.transAxes)
        return
    both = np.concatenate([pairs["value"], pairs["predicted"]])
    room = 0.06 * float(both.max() - both.min()) or 0.1
    span = (float(both.min()) - room, float(both.max()) + room)
    axes.plot(span, span, color=look.GREY, linewidth=0.9, zorder=1)
    depths = sorted(pairs["depth"].unique())
    shades = np.linspace(0.0, 0.78, len(depths))
    for at, (depth, shade) in enumerate(zip(depths, shades, strict=True)):
        part = pairs[pairs["depth"] == depth]
        axes.plot(
            part["predicted"], part["value"], linestyle="none", marker=look.DEPTH_MARKERS[at % len(look.DEPTH_MARKERS)],
            markersize=3.8, markerfacecolor=(shade, shade, shade), markeredgecolor=look.BLACK, markeredgewidth=0.5,
            label=f"{depth:g}", zorder=3,
        )  # fmt: skip
    axes.set(xlim=span, ylim=span)
    axes.set_box_aspect(1)
    axes.locator_params(nbins=5)
    axes.legend(
        title="depth", loc="center left", bbox_to_anchor=(1.0, 0.5), handletextpad=0.1, borderaxespad=0.3,
        title_fontsize=7.8, alignment="left",
    )  # fmt: skip

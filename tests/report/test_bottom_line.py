"""The bottom line on data with known answers, on dead devices, and where the data decide nothing."""

from __future__ import annotations

import math
from dataclasses import replace

import compared_folder
import numpy as np
import pandas as pd
import pytest

from rcbench.campaign import Margin
from rcbench.report.bottom_line import bottom_lines
from rcbench.report.curves import band, crossing, curve
from rcbench.report.rule import DISCLAIMER
from rcbench.report.source import Source

DEPTHS = compared_folder.DEPTHS


def only(source: Source, *names: str) -> Source:
    """The same campaign with some of its experiments."""
    kept = tuple(e for e in source.campaign.experiments if e.name in names)
    frames = {
        key: frame[frame["experiment"].isin(names)]
        for key, frame in (
            ("roster", source.roster),
            ("comparison", source.comparison),
            ("estimates", source.estimates),
            ("predictions", source.predictions),
        )
    }
    return replace(source, campaign=replace(source.campaign, experiments=kept), **frames)


def with_values(
    source: Source, experiment: str, signature: str, value, error: float = 0.005, scatter: float = 0.0, ideal=True
):
    """The same data with a signature of one experiment set to value(depth, region), the same in every instance.

    ideal: an OTOC's ideal value follows it, so that the circuits spread as the data say.
    """
    draw = np.random.default_rng(11)

    def chosen(frame: pd.DataFrame) -> pd.Series:
        return (frame["experiment"] == experiment) & (frame["signature"] == signature)

    estimates, comparison = source.estimates.copy(), source.comparison.copy()
    rows = chosen(estimates)
    exact = np.array([value(d, r) for d, r in zip(estimates[rows]["depth"], estimates[rows]["region"], strict=True)])
    estimates.loc[rows, "value"] = exact + scatter * draw.normal(size=len(exact))
    estimates.loc[rows, "std_error"] = error
    rows = chosen(comparison)
    exact = np.array([value(d, r) for d, r in zip(comparison[rows]["depth"], comparison[rows]["region"], strict=True)])
    comparison.loc[rows, "measured"] = exact
    if signature == "otoc" and ideal:
        comparison.loc[rows, "ideal"] = exact
    comparison.loc[rows, "std_error"] = error
    comparison.loc[rows, "ci_low"], comparison.loc[rows, "ci_high"] = exact - 2.2 * error, exact + 2.2 * error
    return replace(source, estimates=estimates, comparison=comparison)


@pytest.fixture(scope="module")
def source() -> Source:
    return compared_folder.source()


def test_a_crossing_of_an_exponential_lies_where_linear_interpolation_puts_it():
    depth = np.arange(0.0, 20.0, 2.0)
    value = 0.95 * 0.96**depth
    at = crossing(curve(depth, value, value - 0.03, value + 0.03), 0.5)
    for found, edge in ((at.value, value), (at.low, value - 0.03), (at.high, value + 0.03)):
        assert found == pytest.approx(np.interp(-0.5, -edge, depth), abs=1e-12)  # numpy wants rising values
    assert at.low < at.value < at.high


@pytest.mark.parametrize(("level", "expected"), [(2.0, -math.inf), (0.01, math.inf)])
def test_a_level_outside_the_data_is_not_crossed(level, expected):
    depth = np.arange(0.0, 10.0, 2.0)
    value = 0.9**depth
    assert crossing(curve(depth, value, value, value), level).value == expected


def test_known_depths_of_spreading_and_loss_are_found(source):
    """Spread falls through 0.1 at depth 7 and self-fidelity through 0.5 at depth 11, both straight lines."""
    data = with_values(source, "butterfly", "otoc", lambda d, _: max(0.1 + 0.1 * (7 - d), 0.0))
    data = with_values(data, "sampling", "self_fidelity", lambda d, _: 0.5 + 0.04 * (11 - d))
    (found,) = bottom_lines(data)
    assert (found.spread.status, found.spread.depth) == ("complete", 7)
    assert (found.kept.status, found.kept.depth) == ("until", 11)
    assert found.kept.crossing.value == pytest.approx(11)
    assert found.sentence.startswith("Spread complete by depth 7 [95\u00a0%: 7 to 7]; kept above 0.5 until depth")
    assert found.window.startswith("Both hold from depth 7 to 1")
    assert "T1, T2" in found.scope
    assert "invented" in found.scope
    assert "2031-04-02" in found.scope


def test_an_otoc_that_falls_before_the_circuits_can_spread_is_not_called_spreading(source):
    data = with_values(source, "butterfly", "otoc", lambda *_: 1.0)
    data = with_values(data, "butterfly", "otoc", lambda *_: 0.0, ideal=False)
    (found,) = bottom_lines(data)
    assert found.spread.status == "undecided"
    assert "do not spread so soon" in found.spread.detail


def test_shots_that_coincide_more_often_than_the_circuits_allow_decide_nothing_about_kept(source):
    data = with_values(source, "sampling", "self_fidelity", lambda *_: 6.7)
    (found,) = bottom_lines(data)
    assert found.kept.status == "undecided"
    assert "stuck device" in found.kept.detail


def test_a_device_that_only_decoheres_is_never_called_scrambled(source):
    """All echoes are noise about zero: so is the ratio, and it must not be read as a scrambled OTOC."""
    data = with_values(source, "butterfly", "reference_echo", lambda *_: 0.01, error=0.02)
    data = with_values(data, "butterfly", "otoc", lambda *_: 0.0)
    data = with_values(data, "sampling", "self_fidelity", lambda *_: 0.05, error=0.02)
    (found,) = bottom_lines(data)
    assert found.spread.status == "undecided"
    assert "reference echo" in found.spread.detail
    assert found.kept.status == "never"
    assert "No depth tested" in found.window


def test_a_loss_without_spreading_moves_kept_and_not_spread(source):
    data = with_values(source, "butterfly", "otoc", lambda *_: 1.0)
    data = with_values(data, "butterfly", "reference_echo", lambda d, _: 0.9**d)
    data = with_values(data, "sampling", "self_fidelity", lambda d, _: 0.85**d)
    (found,) = bottom_lines(data)
    assert found.spread.status == "not-complete"
    assert found.kept.status == "until"


def test_a_control_that_falls_as_well_makes_spread_undecided(source):
    campaign = source.campaign
    control = replace(
        campaign.experiment("butterfly"),
        name="idle",
        control_for="butterfly",
        circuits=replace(campaign.experiment("butterfly").circuits, family="product"),
    )
    extra = {
        key: pd.concat([frame, frame[frame["experiment"] == "butterfly"].assign(experiment="idle")], ignore_index=True)
        for key, frame in (("comparison", source.comparison), ("estimates", source.estimates))
    }
    data = replace(source, campaign=replace(campaign, experiments=(*campaign.experiments, control)), **extra)
    (found,) = bottom_lines(data)
    assert found.spread.status == "undecided"
    assert "idle" in found.spread.detail
    still = with_values(data, "idle", "otoc", lambda *_: 1.0)
    assert bottom_lines(still)[0].spread.status == "complete"


def test_an_echo_alone_never_supports_kept(source):
    (found,) = bottom_lines(only(source, "echo", "mirror"))
    assert found.kept.status == "not-measured"
    assert "never supports kept" in found.kept.detail
    assert found.kept.depth is None
    assert found.faithful.status == "until"
    assert found.spread.status == "not-measured"


def test_cross_entropy_bounds_kept_from_below_where_no_collisions_are_counted(source):
    rows = ~((source.comparison["experiment"] == "sampling") & (source.comparison["signature"] == "self_fidelity"))
    data = replace(source, comparison=source.comparison[rows])
    (found,) = bottom_lines(data)
    assert found.kept.status == "at-least"
    assert "at least depth" in found.kept.text
    assert found.kept.depth == found.faithful.depth


def test_without_an_otoc_spread_rests_on_circuits_that_the_device_ran(source):
    data = only(source, "sampling")
    predictions = data.predictions.copy()
    rows = (predictions["signature"] == "collision_probability") & (predictions["model"] == "ideal")
    haar = (2**10 - 1) / (2**10 + 1)  # D C - 1 of Porter-Thomas
    depth = predictions.loc[rows, "depth"]
    predictions.loc[rows, "value"] = (1 + haar * (1.1 + 0.1 * (8 - depth))) / 2**10
    data = replace(data, predictions=predictions)
    (found,) = bottom_lines(data)
    assert (found.spread.status, found.spread.depth) == ("complete", 8)
    assert "no OTOC was measured" in found.spread.text
    dead = with_values(data, "sampling", "xeb_fidelity", lambda *_: 0.0)
    assert bottom_lines(dead)[0].spread.status == "undecided"


def test_a_band_too_wide_for_the_margin_is_undecided(source):
    data = with_values(source, "butterfly", "otoc", lambda d, r: 0.08, scatter=2.0)
    (found,) = bottom_lines(data)
    assert found.spread.status in ("undecided", "not-complete")


def test_few_instances_get_a_labelled_shot_noise_interval(source):
    estimates = source.estimates[source.estimates["instance"] < 3]
    (found,) = bottom_lines(replace(source, estimates=estimates))
    assert "shot noise only" in found.spread.detail


def test_refused_ratios_do_not_stand_for_the_rest(source):
    """Where a third of the instances gave no ratio, the others are a selection: the depth does not count."""
    estimates = source.estimates.copy()
    gone = (estimates["signature"] == "otoc") & (estimates["depth"] > 8) & (estimates["instance"] < 4)
    estimates.loc[gone, ["value", "std_error"]] = np.nan
    (found,) = bottom_lines(replace(source, estimates=estimates))
    assert found.spread.status == "not-complete"
    assert "not alive beyond depth 8" in found.spread.detail


def test_a_relative_otoc_margin_does_not_shrink_to_nothing(source):
    campaign = source.campaign
    changed = replace(campaign.experiment("butterfly"), margins={"otoc": Margin(value=0.2, relative=True)})
    experiments = tuple(changed if e.name == "butterfly" else e for e in campaign.experiments)
    (found,) = bottom_lines(replace(source, campaign=replace(campaign, experiments=experiments)))
    assert "margin 0.1," in found.spread.detail


def test_the_interval_of_a_mean_over_regions_covers_the_truth():
    """2000 invented experiments of 10 instances and 8 regions with shared scatter; 95 % within 4 sigma of 0.0049."""
    draw = np.random.default_rng(3)
    truth, hits, trials = np.linspace(0.2, 0.9, 8), 0, 2000
    for _ in range(trials):
        shared = 0.05 * draw.normal(size=(10, 1))
        values = truth + shared + 0.1 * draw.normal(size=(10, 8))
        centre, half = band(values, np.full((10, 8), 0.1), 0.0, 0.95)
        hits += abs(centre - truth.mean()) <= half
    assert abs(hits / trials - 0.95) < 4 * 0.0049


def test_agreement_with_the_noise_model_is_never_called_scrambling():
    assert "performing to budget" in DISCLAIMER
    assert "not evidence of scrambling" in DISCLAIMER

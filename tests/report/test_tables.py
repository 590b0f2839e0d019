"""Numbers and tables as a reader sees them."""

from __future__ import annotations

import math
from dataclasses import replace

import compared_folder
import numpy as np
import pandas as pd
import pytest

from rcbench.report.campaign_table import rule_fixed
from rcbench.report.comparison_table import comparison_table
from rcbench.report.device_table import device_table
from rcbench.report.path import path_data, spread_bound
from rcbench.report.predicted_table import predicted_table
from rcbench.report.printed import decimals_for, depths_text, duration, fixed, interval, number, small_power, whole
from rcbench.report.source import groups
from rcbench.report.uncertainty_table import between_runs, uncertainty_table


@pytest.mark.parametrize(
    ("value", "shown"),
    [
        (0.012345, "0.0123"), (-0.5, "−0.500"), (1234.5, "1234"), (0, "0"), (3.2e-7, "3.20e−7"), (math.nan, "–"),
        (math.inf, "–"), (None, "–"), ("", "–"), (True, "–"), (np.float64(2.5), "2.50"),
    ],
)  # fmt: skip
def test_numbers_have_three_significant_digits_and_no_nan(value, shown):
    assert number(value) == shown


def test_small_things_of_printing():
    assert fixed(-0.0004, 3) == "0.000"
    assert fixed(-0.0006, 3) == "−0.001"
    assert interval(math.nan, math.nan) == "–"
    assert interval(0.1, math.nan, 2) == "[0.10, –]"
    assert whole(1128000) == "1\u202f128\u202f000"
    assert decimals_for(0.0123) == 3
    assert decimals_for(math.nan) == 3
    assert duration(90) == "90.0 s"
    assert duration(12600) == "3.50 h"
    assert [small_power(v) for v in (0.2, 0.01, 0.0009, math.nan, 0)] == [0, 3, 6, 0, 0]


@pytest.mark.parametrize(
    ("depths", "words"),
    [
        ([2], "depth 2"), ([2, 4], "depths 2 and 4"), ([2, 4, 6, 8], "depths 2 to 8"),
        ([2, 6, 8, 10, 16], "depths 2, 6 to 10 and 16"),
    ],
)  # fmt: skip
def test_depths_are_named_as_runs_of_those_tested(depths, words):
    assert depths_text(depths, compared_folder.DEPTHS) == words


@pytest.fixture(scope="module")
def source():
    return compared_folder.source()


def test_the_comparison_has_a_line_a_depth_and_a_head_a_signature(source):
    shown = comparison_table(source)
    heads = [head for head, _ in shown.blocks()]
    assert sum("Cross-entropy fidelity" in head for head in heads) == 3
    assert all(len(rows) == len(compared_folder.DEPTHS) for _, rows in shown.blocks())
    otoc = next(rows for head, rows in shown.blocks() if "Out-of-time-order" in head)
    assert "20 regions" in otoc[0].cells[-1]
    collisions = next(head for head in heads if head.startswith("sampling: Collision probability"))
    assert "in units of 0.001" in collisions


def test_the_device_table_has_median_and_worst_with_place_kind_and_date(source):
    cells = {row.cells[0]: row.cells[1:] for row in device_table(source).rows}
    pauli = ("0.00600", "0.00900", "T3–T4", "pauli", "simultaneous", "0.15", "2031-04-02")
    assert cells["two-qubit gate error"] == pauli
    assert cells["T1 / µs"][:3] == ("68.0", "31.0", "T6")
    assert cells["readout p(0|1)"][3] == "probability"
    bare = replace(source, campaign=replace(source.campaign, device=replace(source.campaign.device, errors=None)))
    assert device_table(bare).rows == ()


def test_scatter_between_runs_is_found_apart_from_shot_noise():
    """400 circuits run 4 times, 0.03 between runs, shot noise 0.02; 4 sigma of the estimate is 0.0025."""
    draw = np.random.default_rng(8)
    rows = [
        {"depth": 2.0, "instance": float(i), "region": "", "repeat": float(r), "std_error": 0.02,
         "value": 0.7 + 0.03 * draw.normal() + 0.02 * draw.normal()}
        for i in range(400) for r in range(4)
    ]  # fmt: skip
    assert between_runs(pd.DataFrame(rows)) == pytest.approx(0.03, abs=0.0025)
    once = pd.DataFrame(rows)
    assert math.isnan(between_runs(once[once["repeat"] == 0]))


def test_the_uncertainty_budget_names_the_largest_part(source):
    frame = uncertainty_table(source).frame
    row = frame[(frame["experiment"] == "sampling") & (frame["signature"] == "xeb_fidelity")].iloc[0]
    assert row["stated_rates"] > row["statistical"] > row["numerical"] == 0
    assert uncertainty_table(source).rows[0].cells[-1] == "stated rates"


@pytest.mark.parametrize(
    ("facts", "words"),
    [
        ({"rule_fixed_before_data": True}, "Fixed before the data"),
        ({"rule_fixed_before_data": False}, "Not fixed before the data"),
        ({"kit_built": "2031-03-28T10:00:00+00:00"}, "Fixed before the data"),
        ({"kit_built": "2031-05-28T10:00:00+00:00"}, "Not fixed before the data"),
        ({}, "Not shown"),
    ],
)
def test_whether_the_rule_stood_before_the_data_is_said(source, facts, words):
    assert rule_fixed(replace(source, provenance={"kit_hash": "ab" * 32} | facts))[0] == words


def test_different_qubits_or_gates_are_never_joined(source):
    (group,) = groups(source)
    assert set(group.controls) == {"product", "dimers"}
    other = replace(source.campaign.experiment("echo"), qubits=(0, 1, 2, 3))
    experiments = tuple(other if e.name == "echo" else e for e in source.campaign.experiments)
    assert len(groups(replace(source, campaign=replace(source.campaign, experiments=experiments)))) == 2


def test_a_control_without_otocs_stands_at_the_most_its_circuits_can_spread(source):
    """2 of 20 pairs have the probe on the butterfly, 2 more on its partner in the maximum matching of the line."""
    (group,) = groups(source)
    assert spread_bound(source, group, "product") == pytest.approx(2 / 20)
    assert spread_bound(source, group, "dimers") == pytest.approx(4 / 20)
    data = path_data(source, group)
    assert data is not None
    assert data.measured
    control = data.points[data.points["family"] == "product"]
    assert control["constructed"].all()
    assert (control["spread"] == 0.1).all()


def test_the_path_moves_right_as_it_spreads_and_down_as_it_loses(source):
    (group,) = groups(source)
    points = path_data(source, group).points
    path = points[points["family"] == "brickwork"].sort_values("depth")
    assert path["spread"].iloc[-1] - path["spread"].iloc[0] > 0.5
    assert path["kept"].iloc[0] - path["kept"].iloc[-1] > 0.3


def test_what_was_predicted_only_has_its_own_table(source):
    rows = source.predictions[source.predictions["signature"] == "xeb_fidelity"].assign(signature="porter_thomas_ks")
    more = replace(source, predictions=pd.concat([source.predictions, rows], ignore_index=True))
    shown = predicted_table(more, "sampling")
    assert shown is not None
    assert shown.rows[0].head == "Porter-Thomas distance"
    assert len(shown.rows) == len(compared_folder.DEPTHS)
    assert predicted_table(source, "sampling") is None

"""The report of a prediction: figures and tables of every family of signatures, with no shots."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from test_write import Page

from rcbench.campaign import load_campaign
from rcbench.errors import InputError
from rcbench.files import shipped
from rcbench.kit import build_kit
from rcbench.predictions import predict
from rcbench.reference import haar
from rcbench.report import figure_entropy, figure_front
from rcbench.report.predicted import at_depths, by_size, means
from rcbench.report.predicted_figures import predicted_figures
from rcbench.report.prediction_report import write_prediction
from rcbench.report.printed import bracketed
from rcbench.report.source import read_prediction
from rcbench.report.value_table import fitted_table, value_table
from rcbench.report.write import write_report
from rcbench.signatures import ENSEMBLE_KEYS, INSTANCE_KEYS
from rcbench.verbs import compare

DEVICE = """
[campaign]
title = "Six <qubits>"
seed = 5

[device]
name = "Skerry-6"
invented = true
layout = "line"
qubits = 6
one_qubit = "u"
[device.two_qubit.cz]
[device.errors.two_qubit]
rate = 0.01
kind = "pauli"
measured = "simultaneous"
"""
PROTOCOL = """
[[experiment]]
name = "sampling"
protocol = "direct-sampling"
depths = [1, 3]
instances = 2
shots = 50
qubits = [0, 1, 2]
"""
EVERYTHING = """
[[experiment]]
name = "all-of-it"
signatures = [KEYS]
two_qubit = "haar"
one_qubit = "none"
depths = [0, 1, 2, 3, 4, 5, 6]
instances = 4
qubits = [0, 1, 2, 3, 4, 5]
regions = ["0-1", "2-3", "4"]
"""
CUTS = """
[[experiment]]
name = "profile"
signatures = ["vonneumann_entropy"]
two_qubit = "haar"
one_qubit = "none"
depths = [0, 4]
instances = 2
qubits = [0, 1, 2, 3, 4]
regions = ["cuts"]
"""
NAMES = ("entropies", "tmi", "space-time-0", "operator-size", "frame-potentials", "outputs", "twins")


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    place = tmp_path_factory.mktemp("prediction")
    keys = ", ".join(f'"{key}"' for key in (*INSTANCE_KEYS, *ENSEMBLE_KEYS))
    text = DEVICE + PROTOCOL + EVERYTHING.replace("KEYS", keys) + CUTS
    (place / "campaign.toml").write_text(text, encoding="utf-8")
    predict(place / "campaign.toml", place / "out")
    return place / "out"


@pytest.fixture(scope="module")
def written(folder):
    return write_report(folder)


def test_a_folder_that_predict_left_becomes_a_page_with_every_figure(written):
    page = Page(written.read_text(encoding="utf-8"))
    assert page.headings == ["1 What was predicted", "2 Experiments", "3 Device as stated", "4 Signatures predicted"]
    figures = {path.name for path in (written.parent / "figures").iterdir()}
    wanted = [f"all-of-it-{name}" for name in NAMES] + ["sampling-predicted", "profile-entropies"]
    assert figures == {f"{name}.{ending}" for name in wanted for ending in ("svg", "png")}
    markdown = (written.parent / "report.md").read_text(encoding="utf-8")
    assert all(f"figures/{name}.png" in markdown for name in wanted)


def test_names_from_the_campaign_are_escaped_and_each_figure_is_said_in_words(written):
    text = written.read_text(encoding="utf-8")
    assert "Six &lt;qubits&gt;" in text
    assert "<qubits>" not in text
    labels = [dict(found).get("aria-label") for tag, found in Page(text).tags if tag == "figure"]
    assert len(labels) == len(NAMES) + 2
    assert all(label and "nan" not in label for label in labels)


def test_the_same_predictions_give_the_same_bytes_again(folder, tmp_path):
    source = read_prediction(folder)
    few = tuple(experiment for experiment in source.campaign.experiments if experiment.name != "all-of-it")
    source = replace(source, campaign=replace(source.campaign, experiments=few))
    written = []
    for place in (tmp_path / "once", tmp_path / "again"):
        write_prediction(source, place)
        written.append({path.relative_to(place): path.read_bytes() for path in place.rglob("*") if path.is_file()})
    assert written[0] == written[1]
    assert len(written[0]) > 10


def test_every_signature_asked_for_stands_in_a_figure_or_in_a_table(folder):
    source = read_prediction(folder)
    experiment = source.campaign.experiment("all-of-it")
    values, fitted = value_table(source, experiment), fitted_table(source, experiment)
    assert values is not None and values.frame is not None and fitted is not None  # noqa: PT018
    assert set(values.frame["signature"]) | set(ENSEMBLE_KEYS) >= {*INSTANCE_KEYS, *ENSEMBLE_KEYS}
    assert len(fitted.rows) == 4  # velocity, width, misfit, depth of a 2-design


def test_the_haar_column_holds_the_closed_form_of_the_region(folder):
    source = read_prediction(folder)
    frame = value_table(source, source.campaign.experiment("all-of-it")).frame
    rows = frame[(frame["signature"] == "vonneumann_entropy") & (frame["region"] == "0-1")]
    # Page, Phys. Rev. Lett. 71, 1291 (1993)
    page = sum(1 / k for k in range(17, 65)) - 3 / 32
    np.testing.assert_allclose(rows["haar"], page / np.log(2), atol=1e-9)
    np.testing.assert_allclose(page, haar.vonneumann_entropy(2, 6), atol=1e-12)


def test_errors_of_means_are_the_scatter_between_instances(folder):
    source = read_prediction(folder)
    single = source.predicted("all-of-it", "purity", "ideal", by_instance=True)
    part = single[(single["region"] == "0-1") & (single["depth"] == 4)]["value"]
    rows = means(source, "all-of-it", "purity")
    row = rows[(rows["region"] == "0-1") & (rows["depth"] == 4)].iloc[0]
    assert row["value"] == pytest.approx(part.mean(), abs=1e-9)
    assert row["std_error"] == pytest.approx(part.std(ddof=1) / 2, rel=1e-6)


def test_the_front_of_the_map_is_the_one_that_was_fitted(folder):
    source = read_prediction(folder)
    front = figure_front.fitted(source, "all-of-it", 0)
    row = source.predicted("all-of-it", "butterfly_velocity", "ideal").iloc[0]
    assert front is not None
    assert (front.start, front.side, front.velocity) == (0, 1, row["value"])
    assert f"shift {front.shift:.2f}" in row["method"]


def test_all_cuts_are_drawn_as_a_profile_and_other_regions_as_curves(folder):
    source = read_prediction(folder)
    assert figure_entropy.is_profile(means(source, "profile", "vonneumann_entropy"))
    assert not figure_entropy.is_profile(means(source, "all-of-it", "vonneumann_entropy"))


def test_an_experiment_with_one_instance_has_no_scatter_and_is_drawn(folder, tmp_path):
    source = read_prediction(folder)
    rows = source.predictions
    one = rows[rows["instance"].isna() | (rows["instance"] == 0)]
    alone = replace(source, predictions=one)
    assert predicted_figures(alone, source.campaign.experiment("profile"), tmp_path)
    assert (means(alone, "profile", "vonneumann_entropy")["std_error"] == 0).all()


def test_an_unfinished_prediction_is_refused_with_the_way_on(folder, tmp_path):
    text = (folder / "provenance.json").read_text(encoding="utf-8")
    (tmp_path / "provenance.json").write_text(text.replace('"complete": true', '"complete": false'), encoding="utf-8")
    with pytest.raises(InputError, match="a finished prediction; the same predict command finishes it"):
        write_report(tmp_path)


@pytest.mark.parametrize(
    ("value", "error", "text"),
    [
        (2.314, 0.11, "2.31(11)"),
        (-0.5, 0.0123, "−0.500(12)"),
        (534.3, 327.4, "534(327)"),
        (0.25, 0.0, "0.2500"),
        (4.295e9, 0.0, "4.295e9"),
        (5.6e-9, 1e-9, "5.60e−9 ± 1.0e−9"),
        (float("nan"), 0.1, "–"),
    ],
)
def test_errors_stand_in_brackets_in_units_of_the_last_digit(value, error, text):
    assert bracketed(value, error) == text


def test_regions_stand_by_size_and_depths_are_thinned_with_both_ends_kept():
    assert by_size(["10", "2", "0-1", "3"]) == ["2", "3", "10", "0-1"]
    assert by_size(["probe=10;V=Z", "probe=9;V=Z"]) == ["probe=9;V=Z", "probe=10;V=Z"]
    assert at_depths(pd.DataFrame({"depth": range(12)}), 4) == [0, 4, 7, 11]


def test_a_comparison_reports_what_was_only_predicted_and_needs_no_other_folder(tmp_path):
    """With a protocol file of the user's own, which the compared folder carries with it; shots are uniform."""
    (tmp_path / "mine.toml").write_text((shipped("protocols") / "direct-sampling.toml").read_text(encoding="utf-8"))
    text = DEVICE + PROTOCOL.replace('"direct-sampling"', '"mine.toml"') + CUTS
    (tmp_path / "campaign.toml").write_text(text, encoding="utf-8")
    kit = build_kit(load_campaign(tmp_path / "campaign.toml"), tmp_path / "kit")
    counts = [f"{outcome:03b},{6 + (outcome < 2)}" for outcome in range(8)]  # 50 shots
    lines = [f"{row.circuit_id},{count}" for row in kit.rows for count in counts]
    (tmp_path / "shots.csv").write_text("\n".join(["circuit_id,bitstring,count", *lines]) + "\n", encoding="utf-8")
    compare(tmp_path / "kit", tmp_path / "shots.csv", tmp_path / "out", bit_order="q0-first")
    for gone in ("mine.toml", "campaign.toml"):
        (tmp_path / gone).unlink()
    page = write_report(tmp_path / "out").read_text(encoding="utf-8")
    assert (tmp_path / "out" / "figures" / "profile-entropies.svg").is_file()
    assert "Predicted values by depth" in page
    assert "Each line is one depth" in page
    assert "mine.toml, brickwork" in page
    assert str(tmp_path) not in page

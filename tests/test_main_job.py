"""The main job on a small device: kit, predictions, shots drawn by Cirq, comparison, report."""

import json

import numpy as np
import pandas as pd
import pytest
from small_job import cirq_probabilities, write_campaign, write_shots

from rcbench import build_kit, compare, load_campaign, predict, read_kit
from rcbench.errors import InputError
from rcbench.predictions import Options
from rcbench.verbs import IdealProbabilities


@pytest.fixture(scope="module")
def job(tmp_path_factory):
    folder = tmp_path_factory.mktemp("job")
    campaign = write_campaign(folder)
    kit = build_kit(load_campaign(campaign), folder / "kit")
    predicted = predict(folder / "kit", folder / "predictions", options=Options(trajectories=64))
    write_shots(kit, folder / "perfect")
    compared = compare(folder / "kit", folder / "perfect", folder / "report", predictions=folder / "predictions")
    return folder, kit, predicted, compared.table


def test_ideal_probabilities_are_those_of_cirq(job):
    _, kit, _, _ = job
    ideal = IdealProbabilities(kit, Options(dtype="complex128"))
    rows = [row for row in kit.rows if row.instance == 2 and row.depth in (2, 8)]
    assert {row.experiment for row in rows} == {"sampling", "dimers", "echo", "mirror", "butterfly"}
    for row in rows:
        assert np.abs(ideal(row.circuit_id) - cirq_probabilities(kit, row)).max() < 1e-12


def test_ideal_predictions_follow_from_cirqs_probabilities(job):
    """Linear XEB D sum p^2 - 1, echo return p(target), and the OTOC <Z> of the echo, recomputed from Cirq."""
    _, kit, predicted, _ = job
    ideal = predicted[(predicted["model"] == "ideal") & predicted["instance"].notna()]

    def found(row, signature, region=""):
        rows = ideal[(ideal["circuit_id"] == row.circuit_id) & (ideal["signature"] == signature)]
        rows = rows[rows["region"] == region] if region else rows
        return float(rows["value"].iloc[0])

    for row in kit.rows:
        if row.instance != 1 or row.repeat:
            continue
        p = cirq_probabilities(kit, row)
        if row.experiment in ("sampling", "dimers"):
            assert found(row, "xeb_linear") == pytest.approx(len(p) * (p @ p) - 1, abs=2e-5)
            assert found(row, "xeb_fidelity") == pytest.approx(1, abs=2e-5)
        elif row.experiment in ("echo", "mirror"):
            assert p[int(row.target, 2)] == pytest.approx(1, abs=1e-10)
            assert found(row, "echo_return") == pytest.approx(1, abs=2e-5)
        elif row.role == "butterfly":
            z = p.reshape(2, 2).sum(axis=1) @ [1, -1]
            label = "butterfly=4;probe=0;W=X;V=Z"
            rows = ideal[(ideal["signature"] == "otoc") & (ideal["region"] == label)]
            rows = rows[(rows["instance"] == row.instance) & (rows["depth"] == row.depth)]
            assert float(rows["value"].iloc[0]) == pytest.approx(z, abs=2e-5)


def test_the_mean_over_instances_has_a_row_of_its_own(job):
    _, _, predicted, _ = job
    simulated = predicted[predicted["model"].isin(["ideal", "noise-model"])]
    each, mean = simulated[simulated["instance"].notna()], simulated[simulated["instance"].isna()]
    keys = ["experiment", "signature", "region", "depth", "model"]
    by_hand = each.groupby(keys)["value"].mean()
    given = mean.set_index(keys)["value"]
    assert set(given.index) == set(by_hand.index)
    assert np.abs(given.sort_index() - by_hand.sort_index()).max() < 1e-9


def test_whole_state_purity_is_one_and_renyi_entropy_is_minus_its_logarithm(job):
    _, _, predicted, _ = job
    rows = predicted[predicted["experiment"] == "entropies"]
    whole = rows[(rows["signature"] == "purity") & (rows["region"] == "0-4")]
    assert len(whole) > 0
    assert np.abs(whole["value"] - 1).max() < 1e-5
    keys = ["region", "depth", "instance"]
    part = rows[rows["instance"].notna()]
    purity = part[part["signature"] == "purity"].set_index(keys)["value"]
    renyi = part[part["signature"] == "renyi2_entropy"].set_index(keys)["value"]
    assert np.abs(-np.log2(purity) - renyi).max() < 1e-5


def test_a_better_device_than_budgeted_departs_for_the_better_and_a_perfect_one_agrees_with_the_ideal(job, tmp_path):
    folder, _kit, _, table = job
    rows = table[(table["signature"] == "polarization") & (table["depth"] == 8)]
    assert set(rows["finding"]) == {"departs"}
    assert set(rows["direction"]) == {"better"}
    text = (folder / "campaign.toml").read_text().replace("same_circuits_as", "against = 'ideal'\nsame_circuits_as")
    text = text.replace("shots = 800", "shots = 800\nagainst = 'ideal'")
    other = build_kit(load_campaign(write_campaign(tmp_path, text)), tmp_path / "kit")
    write_shots(other, tmp_path / "shots")
    result = compare(tmp_path / "kit", tmp_path / "shots", tmp_path / "out", options=Options(trajectories=16)).table
    decided = result[result["signature"].isin(["polarization", "echo_return", "reference_echo", "otoc", "xeb_linear"])]
    assert set(decided["finding"]) == {"agrees"}
    assert set(result["finding"]) <= {"agrees", "undecided"}


def test_uniform_bitstrings_agree_with_nothing(job, tmp_path):
    folder, kit, _, _ = job
    write_shots(kit, tmp_path / "shots", uniform=True)
    result = compare(folder / "kit", tmp_path / "shots", tmp_path / "out", predictions=folder / "predictions").table
    assert "agrees" not in set(result["finding"])


def test_a_second_run_changes_nothing_and_other_shots_are_refused(job, tmp_path):
    folder, kit, _, _ = job
    before = {p.name: p.read_bytes() for p in (folder / "report").glob("*.csv")}
    compare(folder / "kit", folder / "perfect", folder / "report", predictions=folder / "predictions")
    assert before == {p.name: p.read_bytes() for p in (folder / "report").glob("*.csv")}
    write_shots(kit, tmp_path / "shots", seed=6)
    with pytest.raises(InputError, match="other inputs"):
        compare(folder / "kit", tmp_path / "shots", folder / "report", predictions=folder / "predictions")


def test_the_same_inputs_give_the_same_bytes_without_stored_predictions(job, tmp_path):
    folder, _, _, _ = job
    options = Options(trajectories=64, threads=1)
    compare(folder / "kit", folder / "perfect", tmp_path / "again", options=options)
    for name in ("predictions.csv", "estimates.csv", "comparison.csv"):
        assert (tmp_path / "again" / name).read_bytes() == (folder / "report" / name).read_bytes(), name


def test_predictions_from_the_campaign_are_those_from_its_kit(job, tmp_path):
    folder, _, predicted, _ = job
    direct = predict(folder / "campaign.toml", tmp_path / "direct", options=Options(trajectories=64))
    pd.testing.assert_frame_equal(direct, predicted)


def test_predictions_of_another_kit_are_refused(job, tmp_path):
    folder, _, _, _ = job
    text = (folder / "campaign.toml").read_text().replace("seed = 11", "seed = 12")
    build_kit(load_campaign(write_campaign(tmp_path, text)), tmp_path / "kit")
    with pytest.raises(InputError, match=r"predictions: found .* for kit"):
        compare(tmp_path / "kit", folder / "perfect", tmp_path / "out", predictions=folder / "predictions")


def test_tables_hold_no_nan_and_no_infinity(job):
    folder, _, _, _ = job
    for path in (folder / "report").glob("*.csv"):
        words = {cell.lower() for line in path.read_text().splitlines() for cell in line.split(",")}
        assert not words & {"nan", "inf", "-inf", "infinity"}, path.name
    json.loads((folder / "report" / "audit.json").read_text())
    assert read_kit(folder / "kit").hash

"""The comparison table and its findings on synthetic campaigns with known truth."""

import math

import numpy as np
import pandas as pd
import pytest
from campaigns import PROBES, SIZE, N, compared, draw_shots, draw_truth, experiment, kit_of, pick, predict
from numpy.testing import assert_allclose

from rcbench.campaign import Margin
from rcbench.comparison import compare_frames, estimate, read_comparison
from rcbench.files import write_csv
from rcbench.statistics import JACKKNIFE, OVER_INSTANCES, SHOTS_ONLY
from rcbench.tables import COMPARISON, ESTIMATES, FINDINGS

FIDELITY_MARGINS = {"xeb_fidelity": 0.1, "self_fidelity": 0.2, "layer_loss": 0.01, "spam": 0.1}


def fidelity(row):
    return 0.9 * 0.95**row.depth


def sampling(budget=True, offset=0.0, u_model=0.0, seed=1, margins=FIDELITY_MARGINS, kept=fidelity, skip=None, **more):
    """A sampled campaign whose noise model is off by `offset`."""
    rng = np.random.default_rng(seed)
    kit = kit_of(experiment("sampling", "direct-sampling", margins=margins, **more), budget=budget)
    truth = draw_truth(kit, rng, kept)
    shots = draw_shots(kit, truth, rng, skip=skip or (lambda row: False))
    noise = (lambda row: kept(row) - offset) if budget else (lambda row: None)
    predictions = predict(kit, {"xeb_fidelity": lambda row: ("", 1.0, noise(row))}, u_model=u_model)
    return compared(kit, truth, shots, predictions)


def test_table_has_the_columns_and_words_of_the_file_and_no_nan(tmp_path):
    table = sampling(instances=6)
    assert tuple(table.columns) == COMPARISON
    assert set(table["finding"]) <= set(FINDINGS)
    write_csv(tmp_path / "comparison.csv", table, COMPARISON)
    text = (tmp_path / "comparison.csv").read_text().lower()
    assert "nan" not in text
    assert "inf" not in text
    assert "none" not in text
    again = read_comparison(tmp_path / "comparison.csv")
    pd.testing.assert_frame_equal(again, table, check_dtype=True, rtol=1e-9)


def test_a_device_to_budget_agrees_with_the_noise_model_and_not_with_the_ideal():
    row = pick(sampling(shots=4000), "xeb_fidelity", 8)
    assert row["finding"] == "agrees"
    assert abs(row["z_noise"]) < 4
    assert row["z_ideal"] < -10
    assert row["interval_kind"] == OVER_INSTANCES
    assert row["dof"] == 9
    assert (row["instances_planned"], row["instances_returned"], row["instances"]) == (10, 10, 10)
    assert row["shots"] == 40000
    assert row["null_value"] == 0
    assert_allclose(row["noise_model"], 0.9 * 0.95**8)
    assert_allclose(row["measured"] - row["noise_model"], row["difference"])


@pytest.mark.parametrize(("offset", "direction"), [(0.3, "better"), (-0.3, "worse")])
def test_a_difference_beyond_the_margin_departs_with_its_direction(offset, direction):
    row = pick(sampling(offset=offset, shots=4000), "xeb_fidelity", 2)
    assert (row["finding"], row["direction"]) == ("departs", direction)
    assert_allclose(row["difference"], offset, atol=4 * row["u_combined"])


def test_too_little_data_is_undecided_and_says_what_would_settle_it():
    row = pick(sampling(shots=30, instances=6), "xeb_fidelity", 4)
    assert row["finding"] == "undecided"
    assert "would be settled by about" in row["note"]
    assert "instances of 30 shots" in row["note"]


def test_what_would_settle_it_does():
    """The instances that the note asks for decide in at least 12 of 20 campaigns: 80 % promised, 2.2 sigma below."""
    first = pick(sampling(shots=60, instances=12, seed=5), "xeb_fidelity", 4)
    assert first["finding"] == "undecided"
    needed = int(first["note"].split("about ")[1].split()[0])
    found = [
        pick(sampling(shots=60, instances=needed, seed=seed, depths=(4,)), "xeb_fidelity", 4)["finding"]
        for seed in range(20)
    ]
    assert found.count("agrees") >= 12
    assert "departs" not in found


def test_a_margin_below_the_models_own_uncertainty_decides_nothing():
    row = pick(sampling(u_model=0.2, shots=4000), "xeb_fidelity", 4)
    assert row["finding"] == "undecided"
    assert "margin below the model's own uncertainty" in row["note"]
    assert_allclose([row["u_syst"], row["u_combined"]], [0.2, math.hypot(0.2, row["u_stat"])])


def test_model_uncertainty_is_part_of_the_interval():
    tight, wide = (pick(sampling(u_model=u, shots=4000), "xeb_fidelity", 4) for u in (0.0, 0.08))
    assert tight["finding"] == "agrees"
    assert wide["finding"] == "undecided"
    assert wide["diff_ci_high"] - wide["diff_ci_low"] > 2 * 1.6 * 0.08
    assert wide["dof"] > tight["dof"]
    assert_allclose(wide["measured"], tight["measured"])


def test_no_margin_and_no_budget_are_undecided_with_the_reason():
    assert pick(sampling(margins={}), "xeb_fidelity", 4)["note"].endswith("no margin fixed")
    row = pick(sampling(budget=False), "xeb_fidelity", 4)
    assert row["finding"] == "undecided"
    assert "no error budget" in row["note"]
    assert pd.isna(row["noise_model"])
    assert_allclose(row["difference"], row["measured"] - 1)


def test_a_relative_margin_is_taken_of_the_prediction():
    rng = np.random.default_rng(1)
    e = experiment("sampling", "direct-sampling")
    kit = kit_of(experiment("sampling", "direct-sampling"))
    object.__setattr__(kit.campaign.experiments[0], "margins", {"xeb_fidelity": Margin(value=0.2, relative=True)})
    truth = draw_truth(kit, rng, fidelity)
    table = compared(
        kit, truth, draw_shots(kit, truth, rng), predict(kit, {"xeb_fidelity": lambda r: ("", 1.0, fidelity(r))})
    )
    for depth in e.depths:
        row = pick(table, "xeb_fidelity", depth)
        assert_allclose(row["margin"], 0.2 * row["noise_model"])


def test_a_dead_device_agrees_with_nothing_even_where_the_prediction_is_dead_too():
    table = sampling(kept=lambda row: 0.0, shots=4000)
    for depth in (2, 4, 8, 12):
        row = pick(table, "xeb_fidelity", depth)
        assert row["finding"] == "undecided"
        assert "no signal left: the prediction lies within the margin" in row["note"]
    fit = pick(table, "layer_loss")
    assert fit["finding"] == "undecided"
    assert "no signal left" in fit["note"]
    assert pd.isna(fit["measured"])


def test_a_dead_device_where_signal_was_predicted_says_that_the_difference_is_beyond_the_margin():
    row = pick(sampling(kept=lambda row: 0.0, offset=-0.8, shots=4000), "xeb_fidelity", 4)
    assert (row["finding"], row["direction"]) == ("undecided", "worse")
    assert "no signal left: the data lie within the margin of a fully mixed state" in row["note"]
    assert "beyond the margin (worse)" in row["note"]


def test_few_instances_have_shot_noise_only():
    row = pick(sampling(instances=3, shots=4000), "xeb_fidelity", 4)
    assert row["interval_kind"] == SHOTS_ONLY
    assert pd.isna(row["dof"])
    assert 0 < row["std_error"] < 0.03


def test_fits_give_loss_and_spam_beside_the_same_fits_of_the_predictions():
    table = sampling(shots=4000, instances=20)
    loss, spam = pick(table, "layer_loss"), pick(table, "spam")
    truth = (1 - 4.0**-N) * 0.05
    assert loss["interval_kind"] == JACKKNIFE
    assert_allclose([loss["noise_model"], spam["noise_model"]], [truth, 0.9], rtol=1e-9)
    assert_allclose([loss["ideal"], spam["ideal"]], [0, 1], atol=1e-9)
    assert abs(loss["measured"] - truth) < 4 * loss["std_error"]
    assert abs(spam["measured"] - 0.9) < 4 * spam["std_error"]
    assert (loss["finding"], spam["finding"]) == ("agrees", "agrees")


def test_fits_carry_the_models_uncertainty_of_all_depths_together():
    loss = pick(sampling(u_model=0.02, shots=4000), "layer_loss")
    m = np.array([2.0, 4, 8, 12])
    assert 0 < loss["u_syst"] < 0.02
    shifted = 0.9 * 0.95**m - 0.02
    slope = np.polyfit(m, np.log(shifted), 1)[0]
    assert_allclose(loss["u_syst"], (1 - 4.0**-N) * abs(0.95 - np.exp(slope)), rtol=0.5)


def test_two_depths_are_no_fit():
    table = sampling(depths=(2, 6))
    assert not set(table["signature"]) & {"layer_loss", "spam"}


def test_data_that_are_no_exponential_say_so():
    table = sampling(kept=lambda row: 0.9 if row.depth < 8 else 0.3, shots=4000, instances=20)
    assert "one exponential fits poorly" in pick(table, "layer_loss")["note"]


def test_no_data_is_not_tested_and_still_says_what_was_expected():
    table = sampling(skip=lambda row: row.depth == 12)
    row = pick(table, "xeb_fidelity", 12)
    assert (row["finding"], row["note"].split("; ")[-1]) == ("not-tested", "no data returned")
    assert_allclose(row["noise_model"], 0.9 * 0.95**12)
    assert (row["instances_returned"], row["instances"]) == (0, 0)


def test_missing_that_grows_with_depth_is_warned_of():
    table = sampling(skip=lambda row: row.instance < row.depth // 2)
    assert "what is missing grows with depth" in pick(table, "xeb_fidelity", 8)["note"]
    assert pick(table, "xeb_fidelity", 8)["instances"] == 6
    even = sampling(skip=lambda row: row.instance < 3)
    assert "grows" not in pick(even, "xeb_fidelity", 8)["note"]


def test_planned_instances_are_those_of_the_roster_at_each_depth():
    rng = np.random.default_rng(2)
    kit = kit_of(experiment("sampling", "direct-sampling", instances=4, depths=(2, 4)))
    kit.rows = [row for row in kit.rows if row.depth == 2 or row.instance < 3]
    truth = draw_truth(kit, rng, fidelity)
    table = compared(kit, truth, draw_shots(kit, truth, rng), predict(kit, {}))
    assert [pick(table, "xeb_fidelity", depth)["instances_planned"] for depth in (2, 4)] == [4, 3]


def test_predictions_are_averaged_over_the_used_instances():
    kept = lambda row: 0.2 + 0.06 * row.instance  # noqa: E731
    row = pick(sampling(kept=kept, skip=lambda row: row.instance < 5, shots=4000), "xeb_fidelity", 4)
    assert_allclose(row["noise_model"], np.mean([0.2 + 0.06 * i for i in range(5, 10)]))
    assert row["finding"] == "agrees"


def test_a_perfect_paired_device_with_wide_circuit_scatter_agrees():
    rng = np.random.default_rng(4)
    wide = rng.uniform(0.1, 0.99, 10)
    row = pick(sampling(kept=lambda row: wide[row.instance], shots=8000), "xeb_fidelity", 4)
    assert row["finding"] == "agrees"
    assert row["std_error"] > 5 * row["u_stat"]


def test_scatter_between_live_circuits_does_not_make_the_guard_doubt_the_signal():
    """Fidelities from 0.1 to 0.99: their mean is less than 2 of its standard errors above the margin."""
    wide = np.linspace(0.1, 0.99, 6)
    kept = lambda row: wide[row.instance]  # noqa: E731
    row = pick(sampling(kept=kept, shots=8000, instances=6, margins={"xeb_fidelity": 0.3}), "xeb_fidelity", 4)
    assert row["measured"] - 0.3 < 2 * row["std_error"]
    assert row["finding"] == "agrees"


def test_an_instance_without_a_prediction_is_left_out_of_the_difference_and_noted():
    rng = np.random.default_rng(12)
    kit = kit_of(experiment("sampling", "direct-sampling", margins=FIDELITY_MARGINS, instances=7))
    truth = draw_truth(kit, rng, lambda row: 0.3 + 0.1 * row.instance)
    values = {"xeb_fidelity": lambda row: ("", 1.0, 0.3 + 0.1 * row.instance if row.instance else None)}
    table = compared(kit, truth, draw_shots(kit, truth, rng), predict(kit, values))
    row = pick(table, "xeb_fidelity", 4)
    assert "1 used instances have no prediction" in row["note"]
    assert row["dof"] == 5
    assert abs(row["difference"]) < 4 * row["u_stat"]
    assert np.isfinite(pick(table, "layer_loss")["u_stat"])


def test_self_fidelity_is_the_root_of_the_mean_square():
    rng = np.random.default_rng(6)
    kit = kit_of(experiment("sampling", "direct-sampling", margins=FIDELITY_MARGINS, shots=2000, instances=20))
    truth = draw_truth(kit, rng, fidelity)
    predictions = predict(kit, {"self_fidelity": lambda row: ("", 1.0, fidelity(row))})
    table = compared(kit, truth, draw_shots(kit, truth, rng), predictions)
    row = pick(table, "self_fidelity", 4)
    assert row["finding"] == "agrees"
    assert row["ci_low"] < fidelity(type("Row", (), {"depth": 4})) < row["ci_high"]


def otoc_campaign(seed=1, reference=0.8, ratio=0.5, predicted=0.5, skip=None, shots=1000, **more):
    rng = np.random.default_rng(seed)
    margins = {"otoc": 0.1, "reference_echo": 0.1}
    kit = kit_of(experiment("otoc", "butterfly-echo", depths=(2, 4), margins=margins, shots=shots, **more))
    kept = lambda row: reference * (ratio if row.role == "butterfly" else 1.0)  # noqa: E731
    truth = draw_truth(kit, rng, kept)
    drawn = draw_shots(kit, truth, rng, skip=skip or (lambda row: False))
    predictions = predict(
        kit,
        {
            "otoc": lambda row: ("butterfly=3;probe=1;W=X;V=Z", 0.4, predicted) if row.params else None,
            "reference_echo": lambda row: None if row.params else ("probe=1", 1.0, reference),
        },
    )
    return compared(kit, truth, drawn, predictions), estimate(kit, drawn, truth.ideal.get)


OTOC = "butterfly=3;probe=1;W=X;V=Z"


def test_an_otoc_agrees_while_its_reference_echo_is_alive():
    table, _ = otoc_campaign(shots=4000)
    row = pick(table, "otoc", 2, OTOC)
    assert row["finding"] == "agrees"
    assert abs(row["measured"] - 0.5) < 4 * row["std_error"]
    assert pick(table, "reference_echo", 2, "probe=1")["finding"] == "agrees"


def test_a_scrambled_otoc_near_zero_may_agree_since_its_companion_guards_it():
    table, _ = otoc_campaign(ratio=0.0, predicted=0.0, shots=4000)
    assert pick(table, "otoc", 4, OTOC)["finding"] == "agrees"


def test_otocs_of_uniform_bitstrings_have_no_signal_left():
    table, estimates = otoc_campaign(reference=0.0, predicted=0.0, shots=4000)
    row = pick(table, "otoc", 2, OTOC)
    assert row["finding"] == "undecided"
    assert "no signal left" in row["note"]
    refused = estimates[estimates["signature"] == "otoc"]
    assert refused["value"].isna().mean() > 0.99
    assert not estimates["value"].map(lambda v: v is not None and np.isinf(v)).any()


def test_an_instance_without_its_reference_is_dropped_whole_and_counted():
    table, estimates = otoc_campaign(skip=lambda row: row.role == "reference" and row.instance < 2, shots=4000)
    row = pick(table, "otoc", 2, OTOC)
    assert (row["instances_returned"], row["instances"]) == (10, 8)
    assert "2 returned instances dropped: a role is missing" in row["note"]
    assert estimates.attrs["dropped"][0] == ("otoc", 2, 0, 0, "the reference echo")
    gone, _ = otoc_campaign(skip=lambda row: row.role == "reference")
    row = pick(gone, "otoc", 2, OTOC)
    assert (row["finding"], row["note"]) == ("not-tested", "a role is missing in every returned instance")


def test_rows_come_in_natural_order_of_regions_and_depths():
    table, _ = otoc_campaign()
    rows = table[table["signature"] == "otoc"]
    assert rows["region"].tolist() == [f"butterfly=3;probe={q};W=X;V=Z" for q in PROBES for _ in range(2)]
    assert rows["depth"].tolist() == [2, 4] * 2


def test_controls_stand_beside_what_they_control_product_and_dimers_first():
    rng = np.random.default_rng(8)
    names = {"main": 0.5, "same": 0.6, "dimers": 0.7}
    kit = kit_of(
        experiment("main", "direct-sampling"),
        experiment("same", "direct-sampling", control_for="main"),
        experiment("dimers", "direct-sampling", control_for="main", family="dimers"),
    )
    truth = draw_truth(kit, rng, lambda row: names[row.experiment])
    table = compared(kit, truth, draw_shots(kit, truth, rng), predict(kit, {}))
    row = pick(table, "xeb_fidelity", 4, experiment="main")
    assert row["control_value"] == pick(table, "xeb_fidelity", 4, experiment="dimers")["measured"]
    assert "further controls: same" in row["note"]
    assert pd.isna(pick(table, "xeb_fidelity", 4, experiment="dimers")["control_value"])


def test_repeats_show_the_variation_between_runs_apart_and_in_the_uncertainty():
    rng = np.random.default_rng(9)
    kit = kit_of(experiment("sampling", "direct-sampling", margins=FIDELITY_MARGINS, shots=4000, repeats=3))
    truth = draw_truth(kit, rng, fidelity)
    shots = draw_shots(kit, truth, rng)
    for run, kept in ((1, 0.5), (2, 0.7)):  # two more runs on worse days
        worse = draw_truth(kit, rng, fidelity)
        for row in kit.rows:
            worse.real[row.circuit_id] = kept * truth.real[row.circuit_id] + (1 - kept) / SIZE
        later = draw_shots(kit, worse, rng)
        shots.outcomes |= {(name, run): found for (name, _), found in later.outcomes.items()}
    predictions = predict(kit, {"xeb_fidelity": lambda row: ("", 1.0, fidelity(row))})
    row = pick(compared(kit, truth, shots, predictions), "xeb_fidelity", 4)
    spread = np.std([fidelity(kit.rows[1]) * kept for kept in (1, 0.5, 0.7)], ddof=1)
    assert "between 3 runs of a circuit: standard deviation" in row["note"]
    assert_allclose(row["std_error"], spread / math.sqrt(3), rtol=0.1)
    assert row["dof"] < 3
    assert row["shots"] == 3 * 40000


def test_estimates_survive_their_file(tmp_path):
    """Compared from memory and from the CSV, the table is the same."""
    from rcbench.files import read_csv

    rng = np.random.default_rng(10)
    kit = kit_of(experiment("sampling", "direct-sampling", margins=FIDELITY_MARGINS, instances=5))
    truth = draw_truth(kit, rng, fidelity)
    estimates = estimate(kit, draw_shots(kit, truth, rng), truth.ideal.get)
    predictions = predict(kit, {"xeb_fidelity": lambda row: ("", 1.0, fidelity(row))})
    write_csv(tmp_path / "estimates.csv", estimates, ESTIMATES)
    text = ("experiment", "protocol", "signature", "axis", "unit", "region", "circuit_id")
    again = read_csv(tmp_path / "estimates.csv", ESTIMATES, text=text)
    first, second = compare_frames(kit, estimates, predictions), compare_frames(kit, again, predictions)
    pd.testing.assert_frame_equal(first, second, rtol=1e-7)


def test_experiments_that_only_predict_have_no_rows_and_an_empty_return_is_not_tested():
    kit = kit_of(experiment("sampling", "direct-sampling"))
    empty = pd.DataFrame(columns=list(ESTIMATES))
    table = compare_frames(kit, empty, predict(kit, {}))
    assert set(table["finding"]) == {"not-tested"}
    assert set(table["note"]) == {"no data returned"}

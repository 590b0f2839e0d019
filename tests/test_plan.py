"""The plan's closed forms against the simulated noise model and against counting by hand."""

import numpy as np
import pytest
from small_job import CAMPAIGN, write_campaign

from rcbench.campaign import load_campaign
from rcbench.plan import RULES, plan, plan_text


@pytest.fixture(scope="module")
def table(tmp_path_factory):
    return plan(write_campaign(tmp_path_factory.mktemp("plan")))


def test_circuits_shots_and_time_are_counted(table, tmp_path):
    campaign = load_campaign(write_campaign(tmp_path))
    once = table.drop_duplicates(["experiment", "depth"]).set_index(["experiment", "depth"])
    assert once.loc[("sampling", 4), "circuits"] == 8
    assert once.loc[("sampling", 4), "shots"] == 8 * 800
    assert once.loc[("butterfly", 4), "circuits"] == 2 * 8
    assert campaign.experiments[0].shots == 800
    # a shot of depth 4: five one-qubit layers of 30 ns, four of 60 ns, and the measurement of 1000 ns
    assert once.loc[("sampling", 4), "device_seconds"] == pytest.approx(8 * 800 * (5 * 30 + 4 * 60 + 1000) * 1e-9)


def test_expected_fidelity_is_the_product_over_gates_and_readout(table):
    """Gate counting as in the supplement of Arute et al., Nature 574, 505 (2019), by hand for 5 qubits on a line."""
    rows = table[(table["signature"] == "xeb_fidelity") & (table["experiment"] == "sampling")].set_index("depth")
    for depth in (2, 4, 6, 8):
        gates = 2 * depth  # two couplers in each parity of five qubits
        assert rows.loc[depth, "expected"] == pytest.approx((1 - 0.004) ** gates * (1 - 0.01) ** 5, rel=1e-9)


def test_the_planned_standard_error_of_an_echo_is_binomial(table):
    row = table[(table["signature"] == "echo_return") & (table["depth"] == 6)].iloc[0]
    p = row["expected"]
    assert row["std_error"] == pytest.approx(np.sqrt(p * (1 - p) / (8 * 800)))


def test_more_shots_are_asked_for_where_the_margin_is_too_narrow(tmp_path):
    text = CAMPAIGN.replace("shots = 800", "shots = 20\nmargins = { xeb_fidelity = 0.02 }", 1)
    rows = plan(write_campaign(tmp_path, text))
    row = rows[(rows["signature"] == "xeb_fidelity") & (rows["experiment"] == "sampling")].iloc[0]
    assert row["instances_needed"] > 8
    assert "instances, or" in row["advice"]


def test_no_signal_left_is_said(tmp_path):
    text = CAMPAIGN.replace("rate = 0.004", "rate = 0.3")
    rows = plan(write_campaign(tmp_path, text))
    deepest = rows[(rows["signature"] == "polarization") & (rows["depth"] == 8)]
    assert set(deepest["advice"]) == {"no signal left to test at this depth"}


def test_every_rule_is_a_signature_of_the_registry():
    from rcbench.signatures.registry import SIGNATURES

    assert set(RULES) <= set(SIGNATURES)


def test_the_text_ends_with_what_the_plan_does_not_cover(table):
    assert plan_text(table).splitlines()[-1].endswith("cover no coherent errors.")

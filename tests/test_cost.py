"""What predictions will cost, said before they are made, against what they do cost."""

import json
import sys

import pytest
from small_job import CAMPAIGN, write_campaign

from rcbench import build_kit, load_campaign, predict
from rcbench.cli import main
from rcbench.cost import cost_text, expected_cost
from rcbench.predictions import Options

SMALL = CAMPAIGN.replace("instances = 8", "instances = 3").replace("depths = [2, 4, 6, 8]", "depths = [2, 4]")


def done(folder):
    return json.loads((folder / "provenance.json").read_text())


def test_circuits_trajectories_and_gates_are_counted_as_they_are_done(tmp_path):
    campaign, options = write_campaign(tmp_path, SMALL), Options(trajectories=32)
    costs = expected_cost(campaign, options=options)
    predict(campaign, tmp_path / "p", options=options)
    facts = done(tmp_path / "p")
    assert [cost.experiment for cost in costs[1:]] == [
        "sampling", "dimers", "echo", "mirror", "butterfly", "entropies"
    ]  # fmt: skip
    assert sum(cost.circuits for cost in costs) == facts["simulated_circuits"]
    assert sum(cost.trajectories for cost in costs) == facts["simulated_trajectories"]
    # of three instances one is looked at, and where trajectories start is a mean
    total = sum(cost.amplitudes for cost in costs)
    assert total == pytest.approx(facts["amplitudes_times_gates"], rel=0.3)
    assert facts["amplitudes_times_gates_per_second"] > 0
    assert max(cost.peak_bytes for cost in costs) == pytest.approx(facts["peak_memory_bytes"], rel=0.5)


def test_a_kit_costs_what_its_campaign_costs(tmp_path):
    campaign, options = write_campaign(tmp_path, SMALL), Options(trajectories=16)
    kit = build_kit(load_campaign(campaign), tmp_path / "kit")
    first, second = expected_cost(campaign, options=options), expected_cost(kit.folder, options=options)
    assert [(c.experiment, c.circuits, c.trajectories, c.amplitudes) for c in first] == [
        (c.experiment, c.circuits, c.trajectories, c.amplitudes) for c in second
    ]


def test_the_table_warns_where_the_memory_limit_is_too_small(tmp_path):
    costs = expected_cost(write_campaign(tmp_path, SMALL), options=Options(trajectories=16))
    assert "refused" not in cost_text(costs)
    assert "refused" in cost_text(costs, memory_limit=2**20)


def test_estimate_needs_no_folder_and_writes_none(tmp_path, capsys, monkeypatch):
    campaign = write_campaign(tmp_path, SMALL)
    before = sorted(tmp_path.rglob("*"))
    monkeypatch.setattr(sys, "argv", ["rcbench", "predict", str(campaign), "--estimate"])
    with pytest.raises(SystemExit) as stop:
        main()
    assert not stop.value.code
    out = capsys.readouterr().out
    assert out.splitlines()[0].split()[0] == "experiment"
    assert out.splitlines()[-1].split()[0] == "total"
    assert sorted(tmp_path.rglob("*")) == before


def test_predict_without_a_folder_says_what_is_missing(tmp_path, capsys, monkeypatch):
    campaign = write_campaign(tmp_path, SMALL)
    monkeypatch.setattr(sys, "argv", ["rcbench", "predict", str(campaign)])
    with pytest.raises(SystemExit) as stop:
        main()
    assert stop.value.code == 2
    assert "--out" in capsys.readouterr().err


@pytest.mark.benchmark
@pytest.mark.parametrize("qubits", [5, 12, 16])
def test_time_is_forecast_within_a_factor_of_two(tmp_path, qubits):
    campaign = write_campaign(tmp_path, CAMPAIGN.replace("qubits = 5", f"qubits = {qubits}"))
    predict(campaign, tmp_path / "warm", options=Options(trajectories=16))  # libraries loaded, code compiled
    expected = sum(cost.seconds for cost in expected_cost(campaign))
    predict(campaign, tmp_path / "p")
    seconds = done(tmp_path / "p")["seconds"]
    print(f"\n{qubits} qubits: forecast {expected:.2f} s, took {seconds:.2f} s")
    assert 0.5 < expected / seconds < 2

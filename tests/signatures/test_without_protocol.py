"""Experiments that list signatures and no protocol: every key gets its rows, beside Haar, and bad ones a reason."""

from __future__ import annotations

import numpy as np
import pytest

from rcbench.campaign import load_campaign
from rcbench.circuits.families import draw_circuits
from rcbench.engine.state import final_state
from rcbench.errors import InputError
from rcbench.predictions import Options, predict
from rcbench.reference import frame_potentials, haar
from rcbench.signatures import ENSEMBLE_KEYS, INSTANCE_KEYS, of_ensemble, of_instance, of_state
from rcbench.signatures.ensemble import Gathering
from rcbench.signatures.found import Question
from rcbench.signatures.registry import SIGNATURES, signature

FRONT = ("butterfly_velocity", "front_width", "front_misfit")
HEAD = """
[campaign]
title = "invented"
seed = 3
[device]
name = "Invented-6"
invented = true
layout = "line"
qubits = {n}
one_qubit = "u"
[device.two_qubit.cz]
[[experiment]]
name = "states"
two_qubit = "haar"
"""


def campaign(tmp_path, text: str, n: int = 4):
    path = tmp_path / "campaign.toml"
    path.write_text(HEAD.format(n=n) + text)
    return path


def table(tmp_path, text: str, n: int = 4, **more):
    return predict(campaign(tmp_path, text, n), tmp_path / "out", options=Options(**more))


def test_every_key_has_a_row_of_the_registry_and_the_hooks_share_none():
    assert not set(INSTANCE_KEYS) & set(ENSEMBLE_KEYS)
    for key in (*INSTANCE_KEYS, *ENSEMBLE_KEYS):
        row = signature(key)
        assert row.key == key
        assert row.low < row.high
    for row in SIGNATURES.values():
        assert not row.guard or row.guard in SIGNATURES


def test_one_prediction_holds_every_signature_once_for_each_place(tmp_path):
    keys = [key for key in (*INSTANCE_KEYS, *ENSEMBLE_KEYS) if key not in FRONT]
    frame = table(
        tmp_path,
        f"signatures = {keys}\ndepths = [0, 2, 30]\ninstances = 5\nregions = ['quarters']\n",
        dtype="complex128",
    )
    assert set(frame["signature"]) == set(keys)
    assert not frame.duplicated(["signature", "region", "depth", "instance", "model"]).any()
    assert set(frame["model"]) == {"ideal", "haar"}
    ideal = frame[frame["model"] == "ideal"]
    for key in INSTANCE_KEYS:
        rows = ideal[ideal["signature"] == key]
        regions = rows["region"].nunique()
        assert len(rows) == 3 * regions * (5 + 1), key  # depths, instances and their mean
    bounds = {key: (signature(key).low - 1e-9, signature(key).high + 1e-9) for key in keys}
    for key, value in zip(ideal["signature"], ideal["value"], strict=True):
        assert np.isnan(value) or bounds[key][0] <= value <= bounds[key][1], key
    haar_rows = frame[frame["model"] == "haar"].groupby("signature")["value"].first()
    assert haar_rows["frame_potential_k2"] == frame_potentials.unitary(2, 16)
    assert haar_rows["otoc"] == pytest.approx(haar.otoc(4))
    assert haar_rows["tmi_vonneumann"] == pytest.approx(haar.tmi_vonneumann(1, 1, 1, 4) / np.log(2))


def test_the_front_is_fitted_over_all_instances_and_belongs_to_no_depth(tmp_path):
    text = f"signatures = {list(FRONT)}\ndepths = [1, 2, 3, 4, 5, 6]\ninstances = 4\n"
    frame = table(tmp_path, text, n=6)
    assert len(frame) == 3
    assert frame["depth"].isna().all()
    assert frame["instance"].isna().all()
    velocity = frame[frame["signature"] == "butterfly_velocity"].iloc[0]
    assert 0.3 < velocity["value"] < 0.9
    assert velocity["std_error"] > 0
    assert "front fitted to" in velocity["method"]


def test_named_regions_are_those_of_the_register(tmp_path):
    text = "signatures = ['purity']\ndepths = [1]\ninstances = 1\nregions = ['cuts', '0,2']\n"
    experiment = load_campaign(campaign(tmp_path, text)).experiments[0]
    assert experiment.regions == ((0,), (0, 1), (0, 1, 2), (0, 2))
    with pytest.raises(InputError, match="at least 4 qubits for 4 regions"):
        load_campaign(campaign(tmp_path, text.replace("cuts", "quarters"), n=3))


def test_the_hooks_serve_the_api_as_they_serve_the_table(tmp_path):
    """States of drawn circuits; a large register takes random states for the OTOC."""
    text = "signatures = ['purity']\ndepths = [1, 4]\ninstances = 1\n"
    loaded = load_campaign(campaign(tmp_path, text))
    circuits = draw_circuits(loaded.experiments[0], loaded.device, 3, 0)
    question = Question(keys=("purity", "frame_potential_k1"), n_qubits=4, dtype="complex128", regions=[(0, 1)])
    gathering = Gathering(question, list(circuits), 4)
    for instance in range(4):
        found = of_instance(question, circuits, instance=instance, gathering=gathering)
    exact = dict(of_state("purity", final_state(circuits[4], "complex128"), [(0, 1)]))
    assert found[-1].value == pytest.approx(exact["0-1"])
    # the same circuit four times: the trace with itself, D^2
    assert [value.value for value in of_ensemble(gathering)] == pytest.approx([256, 256])


def test_large_registers_take_random_states_and_state_their_error(tmp_path):
    text = (
        "signatures = ['otoc_infinite_temperature', 'otoc']\ndepths = [2]\ninstances = 1\n"
        "[experiment.sites]\nprobe = [0]\nbutterfly = [1, 12]\n"
    )
    frame = table(tmp_path, text, n=13)
    rows = frame[(frame["signature"] == "otoc_infinite_temperature") & (frame["model"] == "ideal")]
    near, far = (rows[rows["region"].str.startswith(f"butterfly={site};")].iloc[0] for site in (1, 12))
    assert near["std_error"] > 0
    assert far["value"] == pytest.approx(1, abs=1e-5)
    assert "random states" in near["method"]


@pytest.mark.parametrize(
    ("text", "n", "message"),
    [
        ("signatures = ['frame_potential_k2']\ndepths = [1]\ninstances = 3\n", 4, "states: instances: found 3"),
        ("signatures = ['butterfly_velocity']\ndepths = [1, 2]\ninstances = 9\n", 4, "3 depths or more above 0"),
        ("signatures = ['operator_size']\ndepths = [1]\ninstances = 1\n", 13, "at most 12"),
        ("signatures = ['echo_return']\ndepths = [1]\ninstances = 1\n", 4, "the others need a protocol"),
        ("signatures = ['tmi_renyi2']\ndepths = [1]\ninstances = 1\nregions = ['0|0-1|3']\n", 4, "share no qubit"),
        ("signatures = ['tmi_renyi2']\ndepths = [1]\ninstances = 1\n", 3, "at least 4 qubits"),
        ("signatures = ['mutual_information_renyi2']\ndepths = [1]\ninstances = 1\n", 4, "two regions or more"),
    ],
)
def test_what_cannot_be_predicted_is_refused_with_the_experiment_and_what_would_work(tmp_path, text, n, message):
    with pytest.raises(InputError, match=message):
        table(tmp_path, text, n)


def test_frame_potentials_beyond_the_memory_say_how_many_instances_fit(tmp_path):
    text = "signatures = ['frame_potential_k1']\ndepths = [1, 2]\ninstances = 50\n"
    with pytest.raises(InputError, match="15 instances at these depths"):
        table(tmp_path, text, memory_limit=64_000)

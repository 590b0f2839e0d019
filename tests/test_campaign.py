import dataclasses

import pytest

from rcbench.campaign import dump_campaign, load_campaign, load_device
from rcbench.errors import InputError

DEVICE = """\
[campaign]
title = "t"
seed = 3

[device]
name = "Brindle-6"
invented = true
layout = "line"
qubits = 6
[device.two_qubit.cz]
[device.patches]
left = [0, 1, 2]
[device.errors.two_qubit]
rate = 0.006
kind = "pauli"
"""
EXPERIMENT = """
[[experiment]]
name = "sampling"
protocol = "direct-sampling"
depths = [1, 2]
instances = 3
"""


@pytest.fixture
def load(tmp_path):
    def read(text: str):
        path = tmp_path / "campaign.toml"
        path.write_text(text)
        return load_campaign(path)

    return read


def test_what_is_left_out_is_filled_in(load):
    campaign = load(DEVICE + EXPERIMENT)
    experiment = campaign.experiments[0]
    assert experiment.qubits == (0, 1, 2, 3, 4, 5)
    assert experiment.circuits.gates == "cz+quarter-turns"
    assert experiment.against == "noise-model"
    assert experiment.margins["xeb_fidelity"].value == 0.05
    assert campaign.confidence == 0.95
    assert campaign.device.physical == ("0", "1", "2", "3", "4", "5")


def test_the_resolved_campaign_reads_back_as_the_same_campaign(load, tmp_path):
    text = (
        DEVICE
        + EXPERIMENT
        + "patch = 'left'\nsites = { butterfly = [2] }\nmargins = { xeb_linear = { relative = 0.1 } }\n"
    )
    campaign = load(text)
    (tmp_path / "again.toml").write_text(dump_campaign(campaign))
    assert load_campaign(tmp_path / "again.toml") == campaign


LAYOUTS = {
    "line": ("qubits = 4", {(0, 1), (1, 2), (2, 3)}),
    "ring": ("qubits = 4", {(0, 1), (1, 2), (2, 3), (0, 3)}),
    "grid": ("rows = 2\ncolumns = 2", {(0, 1), (2, 3), (0, 2), (1, 3)}),
    "edges": ("qubits = 4\nedges = [[0, 3], [2, 1], '0-1']", {(0, 3), (1, 2), (0, 1)}),
    "all-to-all": ("qubits = 3", {(0, 1), (0, 2), (1, 2)}),
}


@pytest.mark.parametrize("layout", LAYOUTS)
def test_each_layout_has_its_couplers(layout, tmp_path):
    keys, couplers = LAYOUTS[layout]
    (tmp_path / "d.toml").write_text(f"[device]\nname = 'd'\nlayout = '{layout}'\n{keys}\n")
    assert set(load_device(tmp_path / "d.toml").couplers) == couplers


def test_broken_qubits_and_couplers_are_avoided(tmp_path):
    (tmp_path / "d.toml").write_text(
        "[device]\nname = 'd'\nlayout = 'line'\nqubits = 6\nbroken_qubits = [5]\nbroken_couplers = ['0-1']\n"
    )
    device = load_device(tmp_path / "d.toml")
    assert device.couplers == ((1, 2), (2, 3), (3, 4))
    assert device.working_qubits == (0, 1, 2, 3, 4)


def test_a_rate_may_differ_from_place_to_place(tmp_path):
    (tmp_path / "d.toml").write_text(
        "[device]\nname = 'd'\nlayout = 'line'\nqubits = 3\n[device.errors.two_qubit]\nrate = 0.01\nkind = 'pauli'\n"
        "by_coupler = { '2-1' = 0.03 }\n[device.errors.readout_0to1]\nby_qubit = { '0' = 0.02 }\n"
    )
    errors = load_device(tmp_path / "d.toml").errors
    assert (errors.two_qubit.at(0, 1), errors.two_qubit.at(2, 1)) == (0.01, 0.03)
    assert (errors.readout_0to1.at(0), errors.readout_0to1.at(1)) == (0.02, 0.0)


def test_an_experiment_takes_what_it_leaves_out_from_the_one_whose_circuits_it_shares(load):
    text = (
        DEVICE
        + EXPERIMENT
        + "patch = 'left'\nshots = 77\n"
        + ("[[experiment]]\nname = 'echo'\nprotocol = 'loschmidt-echo'\nsame_circuits_as = 'sampling'\n")
    )
    echo = load(text).experiments[1]
    assert (echo.qubits, echo.depths, echo.shots, echo.circuit_source) == ((0, 1, 2), (1, 2), 77, "sampling")


BAD = [
    ("seed = 3", "seed = -1", "campaign.toml:3: seed: found -1; allowed: a whole number from 0"),
    ("title = ", "titel = ", "campaign.toml:2: titel: found 't'; allowed: circuit_format, confidence"),
    ('layout = "line"', 'layout = "lime"', r"campaign.toml:8: layout: found 'lime'; .* \(did you mean 'line'\?\)"),
    ("qubits = 6", "qubits = 0", "campaign.toml:9: qubits: found 0"),
    ("two_qubit.cz", "two_qubit.cy", "campaign.toml:10: cy: found 'cy'; allowed: cz, iswap"),
    ("left = [0, 1, 2]", "left = [0, 9]", r"campaign.toml:12: left: found \[9\]; allowed: different working qubits"),
    ("rate = 0.006", "rate = 0.9", "campaign.toml:14: rate: found 0.9"),
    ('kind = "pauli"', 'kind = "fidelity"', "campaign.toml:15: kind: found 'fidelity'; allowed: pauli, average"),
    (
        "depths = [1, 2]",
        "depths = [-1, 2]",
        r"campaign.toml:20: depths: found \(-1, 2\); allowed: whole numbers from 0",
    ),
    ("depths = [1, 2]", "depths = [2, 1]", "campaign.toml:20: depths"),
    ("instances = 3", "instances = 0", "campaign.toml:21: instances: found 0"),
    ("direct-sampling", "direct-samplin", r"campaign.toml:19: protocol: .*\(did you mean 'direct-sampling'\?\)"),
    ("instances = 3", "instances = 3\ntwo_qubit = 'iswap'", r"campaign.toml:22: two_qubit: found 'iswap'; allowed: cz"),
    ("instances = 3", "instances = 3\npatch = 'right'", "campaign.toml:22: patch: found 'right'; allowed: left"),
    ("instances = 3", "instances = 3\nqubits = [0, 6]", "campaign.toml:22: qubits: found 6"),
    ("instances = 3", "instances = 3\nregions = ['0-9']", "campaign.toml:22: regions"),
    ("instances = 3", "instances = 3\nsites = { probe = [7] }", "campaign.toml:22: sites.probe: found 7"),
    ("instances = 3", "instances = 3\nmargins = { otok = 1 }", r"otok: found 1; .*\(did you mean 'otoc'\?\)"),
    (
        "instances = 3",
        "instances = 3\nmargins = { xeb_fidelity = 0 }",
        "xeb_fidelity: found 0.0; allowed: a number above 0",
    ),
    ("instances = 3", "instances = 3\nsame_circuits_as = 'other'", "campaign.toml:22: same_circuits_as: found 'other'"),
    ("instances = 3", "instances = 3\ncontrol_for = 'other'", "campaign.toml:22: control_for: found 'other'"),
    ('name = "sampling"', 'name = "../x"', "campaign.toml:18: name: found '../x'; allowed: letters"),
]


@pytest.mark.parametrize(("old", "new", "message"), BAD)
def test_bad_input_gives_file_line_key_found_and_allowed(load, old, new, message):
    text = DEVICE + EXPERIMENT
    assert old in text
    with pytest.raises(InputError, match=message):
        load(text.replace(old, new))


def test_all_errors_of_a_file_come_at_once(load):
    text = (DEVICE + EXPERIMENT).replace("seed = 3", "seed = 'x'").replace("depths = [1, 2]", "depths = 'all'")
    with pytest.raises(InputError) as caught:
        load(text)
    lines = str(caught.value).splitlines()
    assert len(lines) == 2
    assert lines[0].startswith("campaign.toml:3: seed")
    assert lines[1].startswith("campaign.toml:20: depths")


def test_t2_beyond_twice_t1_is_refused(load):
    text = DEVICE + "[device.errors.idle]\nt1_us = 10\nt2_us = 25\n" + EXPERIMENT
    with pytest.raises(InputError, match=r"t2_us: found 25\.0; allowed: at most 2 T1 = 20"):
        load(text)


def test_objects_are_frozen(load):
    with pytest.raises(dataclasses.FrozenInstanceError):
        load(DEVICE + EXPERIMENT).seed = 4

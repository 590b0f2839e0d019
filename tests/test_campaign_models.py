"""Campaign files that name a family with parameters: read, checked with file and line, written and read back."""

from __future__ import annotations

import json

import pytest

from rcbench.campaign import dump_campaign, load_campaign
from rcbench.circuits.families import MODELS
from rcbench.errors import InputError
from rcbench.kit import build_kit

HEAD = """\
[campaign]
title = "t"
seed = 3

[device]
name = "Brindle-6"
invented = true
layout = "{layout}"
qubits = 6
[device.two_qubit.cz]

[[experiment]]
name = "spread"
protocol = "{protocol}"
depths = {depths}
instances = 1
"""


@pytest.fixture
def load(tmp_path):
    def read(text: str, layout: str = "line", protocol: str = "direct-sampling", depths: str = "[0, 2, 4]"):
        path = tmp_path / "campaign.toml"
        path.write_text(HEAD.format(layout=layout, protocol=protocol, depths=depths) + text)
        return load_campaign(path)

    return read


@pytest.mark.parametrize("family", MODELS)
def test_a_family_reads_back_as_it_was_with_every_parameter(load, tmp_path, family):
    campaign = load(f'family = "{family}"\n')
    circuits = campaign.experiments[0].circuits
    assert (circuits.family, circuits.two_qubit) == (family, family)
    again = tmp_path / "again.toml"
    again.write_text(dump_campaign(campaign))
    assert load_campaign(again) == campaign
    assert ("[experiment.model]" in again.read_text()) == bool(circuits.model)


def test_parameters_are_read_and_controls_share_them(load):
    campaign = load(
        """\
family = "trotter"
one_qubit = "azimuth"
[experiment.model]
hamiltonian = "xxz"
anisotropy = 0.5
order = 2
step = 0.1

[[experiment]]
name = "dimers"
protocol = "direct-sampling"
family = "dimers"
same_circuits_as = "spread"
control_for = "spread"
""",
        depths="[0, 3, 9]",
    )
    own, control = (experiment.circuits for experiment in campaign.experiments)
    assert own.parameters == {
        "hamiltonian": "xxz",
        "step": 0.1,
        "order": 2,
        "coupling": 1.0,
        "disorder": 0.0,
        "anisotropy": 0.5,
        "field_x": 0.0,
        "field_z": 0.0,
    }
    assert (control.family, control.two_qubit, control.one_qubit) == ("dimers", "trotter", "azimuth")
    assert control.model == own.model
    assert own.gates == control.gates == "trotter+azimuth"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            'family = "kicked"\n',
            "campaign.toml:17: family: found 'kicked'; allowed: brickwork, product, dimers, kicked-ising, "
            "dual-unitary, charge-conserving, matchgate, trotter, adopted (did you mean 'kicked-ising'?)",
        ),
        (
            'family = "trotter"\n[experiment.model]\nstep = "short"\n',
            "campaign.toml:19: step: found 'short'; allowed: a number above 0 to 100",
        ),
        (
            'family = "trotter"\n[experiment.model]\nhamiltonian = "xyz"\n',
            "campaign.toml:19: hamiltonian: found 'xyz'; allowed: mixed-field-ising, xxz (did you mean 'xxz'?)",
        ),
        (
            'family = "trotter"\nmodel = { order = true, kick = 2 }\n',
            "campaign.toml:18: order: found True; allowed: 1, 2\n"
            "campaign.toml:18: kick: found 2; allowed: hamiltonian, step, order, coupling, disorder, field_x, field_z",
        ),
        (
            'family = "kicked-ising"\n[experiment.model]\ndisorder = -0.1\n',
            "campaign.toml:19: disorder: found -0.1; allowed: a number from 0 to 3.14159",
        ),
        (
            '[experiment.model]\nstep = 0.1\n',
            "campaign.toml:18: step: found 0.1; allowed: no key: only families with parameters have a model",
        ),
        (
            'family = "trotter"\nmodel = 3\n',
            "campaign.toml:18: model: found 3; allowed: a table [experiment.0.model]",
        ),
        (
            'family = "matchgate"\none_qubit = "hair"\n',
            "campaign.toml:18: one_qubit: found 'hair'; allowed: none, alternating, haar, quarter-turns, azimuth, "
            "clifford (did you mean 'haar'?)",
        ),
        (
            'family = "kicked-ising"\n[[experiment]]\nname = "other"\nprotocol = "direct-sampling"\nfamily = "dimers"\n'
            'same_circuits_as = "spread"\n[experiment.model]\nkick_detuning = 0.1\n',
            "campaign.toml:22: same_circuits_as: found 'spread'; allowed: an experiment with the same model, "
            "coupling_detuning = 0.0, kick_detuning = 0.1, field = 0.0, disorder = 1.5707963267948966",
        ),
    ],
)  # fmt: skip
def test_each_error_has_its_line(load, text, message):
    with pytest.raises(InputError) as error:
        load(text)
    assert str(error.value) == message


def test_the_roster_says_what_time_a_depth_stands_for(load, tmp_path):
    campaign = load('family = "trotter"\n[experiment.model]\nstep = 0.15\n')
    kit = build_kit(campaign, tmp_path / "kit")
    assert {row.depth: row.params["time"] for row in kit.rows} == {0: 0, 2: 0.15, 4: 0.3}
    assert {(row.params["period_layers"], row.params["time_unit"]) for row in kit.rows} == {(2, "1/energy")}
    assert {(row.family, row.gates) for row in kit.rows} == {("trotter", "trotter+alternating")}
    text = (tmp_path / "kit" / "roster.csv").read_text()
    assert json.dumps(kit.rows[0].params, sort_keys=True, separators=(",", ":")).replace('"', '""') in text


@pytest.mark.parametrize("family", MODELS)
@pytest.mark.parametrize("protocol", ["direct-sampling", "mirror-echo"])
def test_kits_of_every_family_are_built(load, tmp_path, family, protocol):
    kit = build_kit(load(f'family = "{family}"\n', protocol=protocol), tmp_path / "kit")
    assert {row.depth for row in kit.rows} >= {2, 4}
    assert all(len(kit.circuit(row)) for row in kit.rows)


@pytest.mark.parametrize(
    ("family", "layout", "depths", "message"),
    [
        (
            "kicked-ising", "line", "[2, 3]",
            "experiment 'spread': depths: found 3; allowed: multiples of 2, the layers of one kick: 2 and 4",
        ),
        (
            "matchgate", "ring", "[2]",
            "experiment 'spread': qubits: found 'a ring of Brindle-6'; allowed: qubits that are coupled along a line, "
            "since elsewhere matchgates are not free fermions",
        ),
        (
            "trotter", "all-to-all", "[2]",
            "experiment 'spread': layout: found 'all-to-all'; allowed: line, ring, grid or edges, where the same "
            "layers repeat",
        ),
    ],
)  # fmt: skip
def test_what_the_device_cannot_run_is_told_before_anything_is_written(load, tmp_path, family, layout, depths, message):
    campaign = load(f'family = "{family}"\n', layout=layout, depths=depths)
    with pytest.raises(InputError) as error:
        build_kit(campaign, tmp_path / "kit")
    assert str(error.value) == message
    assert not (tmp_path / "kit" / "roster.csv").exists()

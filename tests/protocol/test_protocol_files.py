"""Protocol files: the shipped ones, a user's own, and what is said about a file that is wrong."""

from __future__ import annotations

import pytest
from protocol_cases import campaign, circuits, device, line, protocol_of

from rcbench.campaign import Circuits, load_campaign
from rcbench.device import NativeGate
from rcbench.errors import InputError
from rcbench.kit import plan_kit
from rcbench.protocol import load_protocol, protocol_path, protocol_text, shipped_protocols
from rcbench.signatures.registry import SIGNATURES

ECHOES = ["loschmidt-echo", "mirror-echo", "butterfly-echo"]


def test_the_shipped_protocols_are_these():
    assert {"direct-sampling", "mirror-return", *ECHOES} <= set(shipped_protocols())


@pytest.mark.parametrize("name", shipped_protocols())
def test_every_shipped_protocol_loads_and_measures_known_signatures(name):
    protocol = load_protocol(name)
    assert protocol.name == name
    assert protocol.title
    assert protocol.summary.strip()
    assert set(protocol.measured) <= set(SIGNATURES)
    assert protocol.measured == protocol.signature_keys
    assert protocol.text == protocol_text(name)


@pytest.mark.parametrize("name", [name for name in shipped_protocols() if load_protocol(name).template])
def test_the_example_campaign_of_a_protocol_loads_and_plans(name, tmp_path):
    path = tmp_path / "campaign.toml"
    path.write_text(load_protocol(name).template)
    loaded = load_campaign(path)
    assert loaded.device.invented
    assert name in [experiment.protocol for experiment in loaded.experiments]
    assert len(plan_kit(loaded).runs) > 20


@pytest.mark.parametrize("name", ECHOES)
def test_an_echo_comes_with_direct_sampling_of_the_same_circuits(name, tmp_path):
    path = tmp_path / "campaign.toml"
    path.write_text(load_protocol(name).template)
    experiments = load_campaign(path).experiments
    sampling = [experiment.name for experiment in experiments if experiment.protocol == "direct-sampling"]
    assert next(e.same_circuits_as for e in experiments if e.protocol == name) in sampling


def test_a_users_own_file_works_like_a_shipped_one(tmp_path):
    path = tmp_path / "mine.toml"
    path.write_text(protocol_text("mirror-echo"))
    own, shipped = load_protocol(str(path)), load_protocol("mirror-echo")
    of = campaign(device(line(4)), depths=(2,))
    assert own.name == "mine"
    one, two = circuits(own, of)[0], circuits(shipped, of)[0]
    assert (one.circuit_id, one.target, one.circuit.parameters.tolist()) == (
        two.circuit_id,
        two.target,
        two.circuit.parameters.tolist(),
    )


def test_an_unknown_name_gets_the_list_of_names_and_a_missing_file_is_named(tmp_path):
    with pytest.raises(InputError, match=r"protocol: found 'miror-echo'; allowed: .*did you mean 'mirror-echo'"):
        load_protocol("miror-echo")
    with pytest.raises(InputError, match=r"protocol: found '.*nothing.toml'; allowed: a file that can be read"):
        load_protocol(str(tmp_path / "nothing.toml"))
    assert protocol_path("mirror-echo").name == "mirror-echo.toml"


def test_a_protocol_for_adopted_circuits_builds_none():
    with pytest.raises(InputError, match=r"experiment 'e': protocol: found 'mirror-return'.*serves adopted circuits"):
        circuits(load_protocol("mirror-return"), campaign(device(line(4))))
    adopted = campaign(device(line(4)), circuits=Circuits(family="adopted"))
    with pytest.raises(InputError, match=r"experiment 'e': family: found 'adopted'"):
        circuits(load_protocol("direct-sampling"), adopted)


def test_a_gate_that_cannot_be_reversed_is_refused_with_experiment_and_reason():
    gate = NativeGate(name="fsim", parameters=(0.5, 0.3))
    of = campaign(device(line(4), gate), circuits=Circuits(two_qubit="fsim", one_qubit="haar"))
    assert circuits(load_protocol("direct-sampling"), of)
    with pytest.raises(InputError, match=r"experiment 'e': fsim: found .*only there is an exact inverse"):
        circuits(load_protocol("loschmidt-echo"), of)


BASE = protocol_text("butterfly-echo")
WRONG = [
    ('take = "all"', 'take = "al"', 'take: found \'al\'; allowed: "all", "share", "rest"'),
    ('take = "all"', "take = 0", "take: found 0"),
    ('take = "all"', 'part_of = "probe"', "part_of: found 'probe'; allowed: with it one of sites and same_as"),
    ('coupling = "circuit"', 'coupling = "circiut"', 'coupling: found \'circiut\'; allowed: "circuit", "pairwise'),
    (
        'coupling = "circuit"',
        'coupling = "pairwise with sytem"',
        "coupling: found 'sytem'; allowed: system, probe (did",
    ),
    ('coupling = "circuit"', 'couplings = "circuit"', "couplings: found 'circuit'; allowed: coupling, join"),
    ('form = "inverse" }', 'form = "inverted" }', "form: found 'inverted'; allowed: U, inverse, conjugate, transpose"),
    ('apply = "system", form = "U"', 'aply = "system", form = "U"', "aply: found ['aply', 'form']; allowed: one of"),
    ('perturb = "X", at = "$butterfly"', 'perturb = "W", at = "$butterfly"', "perturb: found 'W'; allowed: X, Y, Z"),
    ('at = "$butterfly"', 'at = "$site"', "at: found 'site'; allowed: butterfly"),
    (
        'at = "$butterfly"',
        'at = "sites.butterflies"',
        "at: found 'butterflies'; allowed: butterfly, probe (did you mean",
    ),
    ('at = "$butterfly" }', 'at = "$butterfly", angel = 1 }', "angel: found 1; allowed: angle, at, controlled_by"),
    ('measure = "probe"', 'measure = "prob"', "measure: found 'prob'; allowed: system, probe (did you mean 'probe'?)"),
    ('    { measure = "probe" },\n]\n\n[[measured]]', "]\n\n[[measured]]", "steps: found 'no measure'"),
    ("for_each = { butterfly =", "for_each = { depth =", "depth: found 'depth'; allowed: a letter, then"),
    ('"sites.butterfly" }', '"sites.butterflys" }', "butterfly: found 'butterflys'; allowed: butterfly, probe"),
    ('signature = "otoc"', 'signature = "otok"', "signature: found 'otok'; allowed: "),
    ('signature = "otoc"', 'signature = "polarization"', "a signature of butterfly-echo: otoc, reference_echo"),
    ('estimator = "butterfly-echo"', 'estimator = "butterfly"', "estimator: found 'butterfly'; allowed: cross-entropy"),
    ('name = "butterfly"', 'name = "reference"', "name: found 'reference'; allowed: a name that no other role has"),
    ('name = "butterfly"', 'name = "../x"', "name: found '../x'; allowed: a letter, then letters"),
    ('in = "system" }', 'in = "sistem" }', "in: found 'sistem'; allowed: system"),
    ('default = "all"', 'default = "some"', "default: found 'some'; allowed: a list of qubits, or \"all\""),
    (
        "[registers.probe]",
        '[draws.input]\nkind = "bit"\n\n[registers.probe]',
        "kind: found 'bit'; allowed: pauli-layer",
    ),
    ('title = "Butterfly echo"', "title = 3", "title: found 3; allowed: a text in quotes"),
    ('title = "Butterfly echo"', "tilte = 3", "title: found 'nothing'; allowed: a text in quotes"),
    (
        '{ perturb = "X"',
        '{ prepare = "system" },\n    { perturb = "X"',
        "found 'step 3'; allowed: prepare first, measure",
    ),
    ("[[role]]", "[[roles]]", "role: found 'nothing'; allowed: one or more tables headed [[role]]"),
]


@pytest.mark.parametrize(("old", "new", "message"), WRONG)
def test_what_is_wrong_is_said_with_key_found_and_allowed(old, new, message):
    assert old in BASE
    with pytest.raises(InputError) as caught:
        protocol_of(BASE.replace(old, new))
    assert message in str(caught.value)
    assert str(caught.value).startswith("mine.toml:")


def test_a_wrong_step_is_named_by_its_own_line():
    text = BASE.replace('{ perturb = "X"', '{ perturb = "Q"')
    number = text.splitlines().index('    { perturb = "Q", at = "$butterfly" },') + 1
    with pytest.raises(InputError, match=rf"mine.toml:{number}: perturb: found 'Q'"):
        protocol_of(text)


def test_all_errors_of_a_file_are_told_at_once():
    text = BASE.replace('take = "all"', "take = -1").replace('form = "U"', 'form = "V"').replace('"otoc"', '"otac"')
    with pytest.raises(InputError) as caught:
        protocol_of(text)
    lines = str(caught.value).splitlines()
    assert len(lines) == 4  # form = "V" stands in both roles
    assert all(line.startswith("mine.toml:") for line in lines)


def test_a_syntax_error_is_told_with_its_line():
    with pytest.raises(InputError, match=r"mine.toml:1: syntax: found 'title ='"):
        protocol_of("title = \n" + BASE)


ECHO = protocol_text("loschmidt-echo")


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ('form = "inverse"', 'form = "U"'),
        ('form = "inverse"', 'form = "transpose"'),
        (", inverse = true", ""),
        ('{ apply = "system", form = "inverse" },\n', '{ perturb = "X", at = "system" },\n'),
        ('{ prepare = "system" }', '{ prepare = "system", state = "plus" }'),
        ('{ prepare = "system" }', '{ prepare = "system", draw = "frame" }'),
    ],
)
def test_a_target_is_refused_where_the_steps_do_not_undo_themselves(old, new):
    assert old in ECHO
    with pytest.raises(InputError, match=r'target = "prepared"|do not undo themselves'):
        protocol_of(ECHO.replace(old, new))


@pytest.mark.parametrize(("state", "target"), [("01", "0101"), ("one", "1111"), ("100", "1001")])
def test_a_prepared_pattern_is_the_target_of_its_echo(state, target):
    text = ECHO.replace('{ prepare = "system" }', f'{{ prepare = "system", state = "{state}" }}')
    made = circuits(protocol_of(text), campaign(device(line(4)), depths=(2,)))
    assert [one.target for one in made] == [target]


@pytest.mark.parametrize(
    ("sites", "message"),
    [
        ({}, "sites.butterfly: found 'nothing'; allowed: a list of the experiment's qubits"),
        (
            {"butterfly": (3,), "probes": (0,)},
            "sites.probes: found [0]; allowed: butterfly, probe (did you mean 'probe'?)",
        ),
        (
            {"butterfly": (3,), "probe": (0, 0)},
            "sites.probe: found [0, 0]; allowed: different qubits of register 'system'",
        ),
    ],
)
def test_sites_that_the_protocol_does_not_take_or_lacks_are_refused(sites, message):
    with pytest.raises(InputError) as caught:
        circuits(load_protocol("butterfly-echo"), campaign(device(line(4)), sites=sites))
    assert message in str(caught.value)


def test_a_draw_that_is_fresh_for_a_loop_needs_that_loop():
    text = ECHO.replace('kind = "clifford-layer"', 'kind = "clifford-layer"\nfresh = ["setting"]')
    with pytest.raises(InputError, match=r"fresh: found 'setting'; allowed: role, depth"):
        protocol_of(text)
    looped = text.replace('target = "prepared"', 'target = "prepared"\nfor_each = { setting = 2 }')
    assert protocol_of(looped).role("echo").for_each[0].values == (0, 1)

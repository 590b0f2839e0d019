"""The step language as a whole: protocols that are not shipped, written as text, against dense linear algebra."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from protocol_cases import (
    GATES,
    campaign,
    circuits,
    complete,
    device,
    final_state,
    ladder,
    line,
    outcome_probabilities,
    pauli,
    protocol_of,
    unitary,
)

from rcbench.campaign import Circuits
from rcbench.circuits.families import draw_circuits
from rcbench.circuits.gates import N_QUBITS
from rcbench.device import Limits
from rcbench.errors import InputError
from rcbench.kit import duration_ns
from rcbench.protocol import circuit_id, load_protocol, place, plan

MEASURED = '[[measured]]\nsignature = "echo_return"\nestimator = "echo"\n'

RECOVERY = (
    """
title = "Recovery"

[sites]
output = { in = "system" }

[registers.reference]
take = 1
coupling = ["pairwise with message", "pairwise with reference_copy"]

[registers.message]
take = 1

[registers.rest]
take = "share"

[registers.reference_copy]
take = 1
coupling = "pairwise with message_copy"

[registers.message_copy]
take = 1

[registers.rest_copy]
take = "share"

[registers.system]
join = ["message", "rest"]
coupling = "circuit"

[registers.copy]
join = ["message_copy", "rest_copy"]
coupling = ["circuit", "pairwise with system"]

[registers.output]
part_of = "system"
sites = "output"

[registers.output_copy]
part_of = "copy"
same_as = "output"

[[role]]
name = "decode"
steps = [
    { prepare = "reference", bell_with = "message" },
    { prepare = "rest", bell_with = "rest_copy" },
    { prepare = "reference_copy", bell_with = "message_copy" },
    { apply = ["system", "copy"], form = ["U", "conjugate"] },
    { measure = "output", bell_with = "output_copy" },
    { measure = "reference", bell_with = "reference_copy" },
]
"""
    + MEASURED
)
# on a ladder of four rungs: reference, message and rest (2 qubits) above, their copies below


@pytest.mark.parametrize("gate", ["cz", "iswap"])
def test_recovery_with_bell_pairs_obeys_the_decoder_identity(gate):
    """P F = 1/d_A^2 exactly, and P the average OTOC over all Paulis on message and output: F45 of Yoshida and Kitaev.

    arXiv:1710.03363; 3 qubits a side, message and output one qubit each.
    """
    on = device(ladder(4), GATES[gate])
    of = campaign(on, circuits=Circuits(two_qubit=gate, one_qubit="haar"), depths=(0, 3), sites={"output": (3,)})
    for planned in circuits(protocol_of(RECOVERY), of):
        assert planned.params["bell_pairs"] == [[0, 1], [2, 3]]
        p = outcome_probabilities(planned.circuit).reshape(4, 4)
        projection, both = p[0].sum(), p[0, 0]
        assert both == pytest.approx(0.25, abs=1e-10)  # P F
        if planned.depth == 0:
            assert projection == pytest.approx(1, abs=1e-10)
        else:
            assert projection == pytest.approx(average_otoc(of, gate), abs=1e-10)


def average_otoc(of, gate):
    """Mean over Paulis on the message (site 0) and on the output (site 2) of tr(U^-1 P U Q U^-1 P U Q) / 8."""
    alone = device(line(3), GATES[gate])
    experiment = campaign(alone, circuits=of.experiments[0].circuits, depths=of.experiments[0].depths).experiments[0]
    u = unitary(draw_circuits(experiment, alone, of.seed, 0)[3])
    total = 0.0
    for a in "IXYZ":
        for d in "IXYZ":
            q = pauli(a, 0, 3) if a != "I" else np.eye(8)
            p = pauli(d, 2, 3) if d != "I" else np.eye(8)
            w = u.conj().T @ p @ u
            total += (np.trace(w @ q @ w @ q) / 8).real
    return total / 16


def test_circuits_side_by_side_take_no_longer_than_one():
    on = device(ladder(4))
    of = campaign(on, depths=(3,), sites={"output": (3,)})
    both = circuits(protocol_of(RECOVERY), of)[0].circuit
    one_after_the_other = RECOVERY.replace(
        '{ apply = ["system", "copy"], form = ["U", "conjugate"] }',
        '{ apply = "system", form = "U" },\n    { apply = "copy", form = "conjugate" }',
    )
    slow = circuits(protocol_of(one_after_the_other), of)[0].circuit
    assert np.allclose(outcome_probabilities(both), outcome_probabilities(slow), atol=1e-12)
    assert slow.n_layers - both.n_layers == 7  # three two-qubit layers and four one-qubit layers
    timings = on.timings
    assert duration_ns(slow, timings) - duration_ns(both, timings) == 3 * timings.two_qubit + 4 * timings.one_qubit


def test_side_by_side_respects_the_limit_on_gates_at_once():
    on = replace(device(ladder(4)), limits=Limits(parallel_gates=1))
    of = campaign(on, depths=(3,), sites={"output": (3,)})
    circuit = circuits(protocol_of(RECOVERY), of)[0].circuit
    free = circuits(protocol_of(RECOVERY), campaign(device(ladder(4)), depths=(3,), sites={"output": (3,)}))[0].circuit
    together = [np.bincount(one.layer[N_QUBITS[one.kind] == 2]).max() for one in (circuit, free)]
    assert together == [1, 2]
    assert np.allclose(outcome_probabilities(circuit), outcome_probabilities(free), atol=1e-12)


def test_a_register_that_the_couplers_cannot_host_is_refused_with_the_couplers_it_lacks():
    of = campaign(device(line(8)), depths=(3,), sites={"output": (3,)})
    with pytest.raises(InputError) as caught:
        circuits(protocol_of(RECOVERY), of)
    text = str(caught.value)
    assert "registers.reference: found 'no couplers 0-4'; allowed: pairwise with reference_copy" in text
    assert "registers.copy: found 'no couplers 1-5, 2-6, 3-7'" in text
    assert "experiment 'e' with protocol 'mine'" in text


def test_brickwork_on_qubits_that_are_not_connected_is_refused():
    broken = [pair for pair in line(6) if pair != (2, 3)]
    with pytest.raises(InputError, match=r"no couplers between 0-2 and 3-5.*such as 2-3 are lacking"):
        circuits(load_protocol("direct-sampling"), campaign(device(broken)))
    product = campaign(device(broken), circuits=Circuits(two_qubit="cz", one_qubit="haar", family="product"))
    assert circuits(load_protocol("direct-sampling"), product)


def test_qubits_that_do_not_come_out_even_are_refused():
    of = campaign(device(line(5)), sites={"output": (3,)})
    with pytest.raises(InputError, match=r"qubits: found 5; allowed: .*even: 4 qubits and 2 equal shares"):
        circuits(protocol_of(RECOVERY), of)


INTERFEROMETER = (
    """
title = "Interferometer"

[sites]
ancilla = { in = "ancilla", default = [0] }
probe = { in = "system" }
butterfly = { in = "system" }

[registers.ancilla]
take = "sites.ancilla"
coupling = "every with probe"

[registers.system]
take = "rest"
coupling = "circuit"

[registers.probe]
part_of = "system"
sites = "probe"

[draws.input]
kind = "haar-layer"

[[role]]
name = "interferometer"
for_each = { site = "sites.butterfly", pauli = ["X", "Y"], quadrature = ["X", "Y"] }
params = { butterfly = "$site", pauli = "$pauli", quadrature = "$quadrature" }
steps = [
    { prepare = "ancilla", state = "plus" },
    { prepare = "system", draw = "input" },
    { perturb = "Z", at = "sites.probe", controlled_by = "ancilla" },
    { apply = "system", form = "U" },
    { perturb = "$pauli", at = "$site" },
    { apply = "system", form = "inverse" },
    { perturb = "Z", at = "sites.probe", controlled_by = "ancilla" },
    { rotate = "ancilla", basis = "$quadrature" },
    { measure = "ancilla" },
]
"""
    + MEASURED
)


@pytest.mark.parametrize("gate", ["cz", "zz at any angle", "sqrt-iswap"])
def test_the_ancilla_interferometer_measures_the_complex_otoc(gate):
    """<X> of the ancilla is the real part of <B(t) M B(t) M>, |<Y>| the size of the imaginary one: E13.

    Swingle et al., arXiv:1602.06271.
    """
    angle = 0.8 if gate == "zz at any angle" else None
    gates = Circuits(two_qubit=GATES[gate].name, one_qubit="haar", angle=angle)
    on = device(line(4), GATES[gate])
    of = campaign(on, circuits=gates, depths=(3,), sites={"probe": (1,), "butterfly": (3, 2)})
    made = circuits(protocol_of(INTERFEROMETER), of)
    assert [one.setting for one in made[:3]] == [
        "site=3;pauli=X;quadrature=X",
        "site=3;pauli=X;quadrature=Y",
        "site=3;pauli=Y;quadrature=X",
    ]
    assert made[0].circuit_id == "e-interferometer-i000-d003-s000"
    mean = {
        (one.params["butterfly"], one.params["pauli"], one.params["quadrature"]): outcome_probabilities(one.circuit)
        @ [1, -1]
        for one in made
    }
    state = input_state(of, gate)
    alone = device(line(3), GATES[gate])
    u = unitary(draw_circuits(campaign(alone, circuits=gates, depths=(3,)).experiments[0], alone, of.seed, 0)[3])
    m = pauli("Z", 0, 3)
    for site, letter in ((3, "X"), (2, "Y")):
        b = u.conj().T @ pauli(letter, site - 1, 3) @ u
        value = state.conj() @ b @ m @ b @ m @ state
        assert mean[site, letter, "X"] == pytest.approx(value.real, abs=1e-10)
        assert abs(mean[site, letter, "Y"]) == pytest.approx(abs(value.imag), abs=1e-10)


def input_state(of, gate):
    """The random product state of the interferometer's system, from a protocol that only prepares it."""
    text = INTERFEROMETER.replace("$pauli", "X")
    text = text[: text.index("[[role]]")].replace('coupling = "every with probe"', "") + (
        '[[role]]\nname = "interferometer"\nsteps = [\n    { prepare = "system", draw = "input" },\n'
        '    { measure = "system" },\n]\n' + MEASURED
    )
    made = circuits(protocol_of(text), of)[0].circuit
    return final_state(made).reshape(2, 8)[0]


def test_an_ancilla_without_a_coupler_to_its_site_is_refused():
    of = campaign(device(line(4)), depths=(3,), sites={"probe": (2,), "butterfly": (3,)})
    with pytest.raises(InputError, match=r"registers.ancilla: found 'no couplers 0-2'; allowed: every with probe"):
        circuits(protocol_of(INTERFEROMETER), of)


SETTINGS = (
    """
title = "Random settings"

[registers.system]
take = "all"
coupling = "circuit"

[draws.basis]
kind = "bases"
fresh = ["setting"]

[draws.input]
kind = "bits"
fresh = ["input", "depth"]

[[role]]
name = "plain"
for_each = { input = 2, setting = "settings" }
steps = [
    { prepare = "system", draw = "input" },
    { apply = "system" },
    { rotate = "system", draw = "basis" },
    { measure = "system" },
]

[[role]]
name = "turned"
for_each = { input = 2, setting = "settings" }
params = { V = "X", site = 0 }
steps = [
    { prepare = "system", draw = "input" },
    { rotate = "system", basis = "X" },
    { apply = "system" },
    { rotate = "system", draw = "basis" },
    { measure = "system" },
]

[[role]]
name = "calibration"
every_batch = true
for_each = { state = ["0", "1", "01"] }
steps = [
    { prepare = "system", state = "$state" },
    { measure = "system" },
]
"""
    + MEASURED
)


def test_draws_are_shared_or_fresh_as_their_scope_says():
    of = campaign(device(line(4)), depths=(1, 2), settings=5, instances=2)
    made = circuits(protocol_of(SETTINGS), of)
    runs = [one for one in made if one.role != "calibration"]
    assert len(runs) == 2 * 2 * 2 * 2 * 5  # instances, depths, roles, inputs, settings
    bases: dict[tuple, set] = {}
    inputs: dict[tuple, set] = {}
    for one in runs:
        values = dict(part.split("=") for part in one.setting.split(";"))
        bases.setdefault((one.instance, values["setting"]), set()).add(one.params["basis"])
        inputs.setdefault((one.instance, values["input"], one.depth), set()).add(one.params["input"])
    assert all(len(found) == 1 for found in bases.values())  # the same for roles, depths and inputs
    assert all(len(found) == 1 for found in inputs.values())  # the same for roles and settings
    assert len({next(iter(found)) for found in bases.values()}) > 5
    assert len({next(iter(found)) for found in inputs.values()}) > 3
    assert set("".join(next(iter(found)) for found in bases.values())) == set("XYZ")


def test_bases_measure_the_paulis_that_the_roster_names():
    """A Bell state has <XX> = <ZZ> = 1 and <YY> = -1: the parity of each setting follows from its letters."""
    text = SETTINGS[: SETTINGS.index("[[role]]")] + (
        """
[registers.first]
part_of = "system"
sites = "first"

[registers.second]
part_of = "system"
sites = "second"

[sites]
first = { in = "system", default = [0] }
second = { in = "system", default = [1] }

[[role]]
name = "bell"
for_each = { setting = 90, input = 1 }
steps = [
    { prepare = "first", bell_with = "second" },
    { rotate = "system", draw = "basis" },
    { measure = "system" },
]
"""
        + MEASURED
    )
    of = campaign(device(line(2)), depths=(0,))
    seen = set()
    for one in circuits(protocol_of(text), of):
        parity = outcome_probabilities(one.circuit) @ [1, -1, -1, 1]
        letters = one.params["basis"]
        assert parity == pytest.approx({"XX": 1, "YY": -1, "ZZ": 1}.get(letters, 0), abs=1e-10)
        seen.add(letters)
    assert len(seen) == 9


def test_circuits_for_every_batch_have_no_depth_and_no_instance():
    of = campaign(device(line(4)), depths=(1, 2), settings=2, instances=2)
    protocol = protocol_of(SETTINGS)
    made = [one for one in circuits(protocol, of) if one.role == "calibration"]
    assert [(one.instance, one.depth, one.setting) for one in made] == [
        (0, 0, "state=0"),
        (0, 0, "state=1"),
        (0, 0, "state=01"),
    ]
    for one, outcome in zip(made, ("0000", "1111", "0101"), strict=True):
        assert outcome_probabilities(one.circuit)[int(outcome, 2)] == pytest.approx(1, abs=1e-12)


def test_a_pauli_twirl_of_a_sampled_circuit_leaves_its_distribution_alone():
    text = SETTINGS[: SETTINGS.index("[[role]]")].replace('"bits"', '"pauli-layer"').replace("input", "twirl") + (
        '[[role]]\nname = "twirled"\nfor_each = { twirl = 3, setting = 1 }\nsteps = [\n'
        '    { apply = "system", pauli_layers = "twirl" },\n    { measure = "system" },\n]\n' + MEASURED
    )
    of = campaign(device(line(4)), depths=(3,))
    ideal = outcome_probabilities(circuits(load_protocol("direct-sampling"), of)[0].circuit)
    made = circuits(protocol_of(text), of)
    assert len({tuple(one.circuit.parameters) for one in made}) == 3
    for one in made:
        assert np.allclose(outcome_probabilities(one.circuit), ideal, atol=1e-10)


def test_a_rotation_as_perturbation_turns_by_its_angle():
    """exp(-i angle Y / 2) on |0> leaves <Z> = cos(angle)."""
    text = (
        'title = "t"\n[registers.system]\ntake = "all"\ncoupling = "circuit"\n[[role]]\nname = "r"\nsteps = [\n'
        '    { perturb = "Y", at = "system", angle = 0.35 },\n    { measure = "system" },\n]\n' + MEASURED
    )
    made = circuits(protocol_of(text), campaign(device(line(2)), depths=(1,)))[0]
    p = outcome_probabilities(made.circuit).reshape(2, 2)
    assert p.sum(axis=1) @ [1, -1] == pytest.approx(np.cos(0.35), abs=1e-12)


def test_ids_and_plans_agree_with_the_circuits_and_need_no_circuit():
    of = campaign(device(complete(4)), depths=(1, 2), settings=2, instances=2, repeats=2)
    protocol = protocol_of(SETTINGS)
    experiment = of.experiments[0]
    where = place(protocol, experiment, of.device)
    planned = [
        circuit_id(experiment, slot, repeat)
        for instance in range(2)
        for slot in plan(protocol, experiment, where, instance)
        for repeat in range(2)
    ]
    assert planned == [one.circuit_id for one in circuits(protocol, of)]
    assert planned[7] == "e-plain-i000-d001-s000-r1"
    assert len(set(planned)) == len(planned)

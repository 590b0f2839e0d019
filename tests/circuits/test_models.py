"""What holds for every family with gates of its own, over their table: a new row is tested at birth."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import qiskit.qasm2
import qiskit.qasm3
from circuit_cases import HEAVY_HEX, make_device, phase_distance, unitary
from model_cases import NATIVES, draw, experiment, line
from qiskit.quantum_info import Operator

from rcbench.campaign import Circuits, Experiment
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.export import to_qasm2, to_qasm3
from rcbench.circuits.families import CONTROLS, MODELS, draw_circuits, family_of, period, time_of
from rcbench.circuits.gates import CODE, KINDS, N_QUBITS
from rcbench.circuits.transform import conjugate, inverse, transpose
from rcbench.device import NATIVE_ONE_QUBIT, NativeGate
from rcbench.engine.state import final_state
from rcbench.errors import InputError
from rcbench.signatures.entropy import purity

HAMILTONIANS = [{"hamiltonian": "xxz", "order": 2}, {"order": 2}, {"hamiltonian": "xxz", "disorder": 2.0}]
CASES = [*[(name, {}) for name in MODELS], *[("trotter", model) for model in HAMILTONIANS]]


def rows(circuit: Circuit) -> list[tuple]:
    return [
        (int(layer), KINDS[kind].name, *pair, circuit.row_parameters(row))
        for row, (layer, kind, pair) in enumerate(
            zip(circuit.layer, circuit.kind, circuit.qubits.tolist(), strict=True)
        )
    ]


@pytest.mark.parametrize("family", ["", *CONTROLS])
@pytest.mark.parametrize(("name", "model"), CASES)
def test_shorter_depths_are_the_first_rows_of_longer_ones_whatever_else_is_asked_for(name, model, family):
    device = line(5)
    step = getattr(period(experiment(name, device, (0,), **model), device), "layers", 1)
    one = experiment(name, device, (0, step, 2 * step, 4 * step), family=family, **model)
    found = draw_circuits(one, device, 4, 1)
    deepest = rows(found[4 * step])
    for circuit in found.values():
        assert rows(circuit) == deepest[: len(circuit)]
        assert len(circuit.parameters) == sum(len(row[-1]) for row in rows(circuit))
        assert not len(circuit) or circuit.kind[-1] != CODE["barrier"]
    assert len(found[0]) < len(found[step]) or family == "product"
    few = draw_circuits(replace(one, depths=(step, 2 * step)), device, 4, 1)
    assert [rows(few[depth]) for depth in few] == [rows(found[depth]) for depth in few]
    assert rows(draw_circuits(one, device, 4, 2)[4 * step]) != deepest or (
        name == "trotter" and "disorder" not in model
    )


@pytest.mark.parametrize("native", NATIVES)
@pytest.mark.parametrize("name", MODELS)
def test_all_native_gates_make_the_same_circuit(name, native):
    # azimuth: between Haar layers the outer one-qubit gates of a dual-unitary gate are left out
    expected = unitary(draw(name, line(4), 4, one_qubit="azimuth"))
    for one_qubit in NATIVE_ONE_QUBIT:
        circuit = draw(name, line(4, native, one_qubit=one_qubit), 4, one_qubit="azimuth")
        assert phase_distance(unitary(circuit), expected) < 1e-10
        kinds = {KINDS[kind].name for kind in circuit.kind if N_QUBITS[kind] == 2}
        assert kinds == {native.split("-half")[0].replace("-", "_")}


@pytest.mark.parametrize("native", NATIVES)
@pytest.mark.parametrize(("name", "model"), CASES)
def test_the_native_inverse_undoes_the_circuit(name, model, native):
    device = line(4, native, one_qubit="r+rz")
    circuit = draw(name, device, 6, **model)
    whole = unitary(circuit)
    assert phase_distance(unitary(inverse(circuit, device, range(4))) @ whole, np.eye(16)) < 1e-10
    if native == "cz":
        assert phase_distance(unitary(conjugate(circuit, device, range(4))), whole.conj()) < 1e-10
        assert phase_distance(unitary(transpose(circuit, device, range(4))), whole.T) < 1e-10


@pytest.mark.parametrize("native", NATIVES)
@pytest.mark.parametrize("name", MODELS)
def test_qiskit_reads_the_exports_as_the_same_unitary(name, native):
    circuit = draw(name, line(3, native, one_qubit="sx+rz"), 2)
    for read in (qiskit.qasm2.loads(to_qasm2(circuit)), qiskit.qasm3.loads(to_qasm3(circuit))):
        found = Operator(read.reverse_bits()).data  # qiskit's qubit 0 is the least significant bit
        assert phase_distance(found, unitary(circuit)) < 1e-10


@pytest.mark.parametrize("family", ["", *CONTROLS])
@pytest.mark.parametrize(("name", "model"), CASES)
def test_nothing_is_lost_purity_of_the_whole_and_overlap_of_twin_inputs_are_kept(name, model, family):
    circuit = draw(name, line(6), 12, family=family, **model)
    tilted = CircuitBuilder(6)
    for qubit, angle in enumerate(np.linspace(0.3, 2.5, 6)):
        tilted.add("r", (qubit,), (angle, 0.4 * qubit))
    before = final_state(tilted.build(), "complex128", threads=1)[0]
    tilted.append(circuit)
    one, two = (final_state(each, "complex128", threads=1) for each in (circuit, tilted.build()))
    assert abs(np.vdot(one, two)) == pytest.approx(abs(before), abs=1e-12)
    assert purity(np.array([one, two]), range(6)) == pytest.approx(np.ones(2), abs=1e-12)


@pytest.mark.parametrize(("name", "model"), CASES)
def test_controls_share_the_one_qubit_layers_and_spread_nothing(name, model):
    device, depth = line(6), 12
    own, product, dimers = (draw(name, device, depth, family=family, **model) for family in ("", *CONTROLS))
    assert product.two_qubit_gates == 0
    assert dimers.two_qubit_gates == own.two_qubit_gates
    partners = {frozenset(pair) for pair in dimers.qubits[N_QUBITS[dimers.kind] == 2].tolist()}
    assert partners == {frozenset(pair) for pair in ((0, 1), (2, 3), (4, 5))}
    state = final_state(dimers, "complex128", threads=1)[None]
    assert [purity(state, region)[0] for region in ([0, 1], [2, 3])] == pytest.approx([1, 1], abs=1e-12)
    state = final_state(product, "complex128", threads=1)[None]
    assert [purity(state, [qubit])[0] for qubit in range(6)] == pytest.approx(np.ones(6), abs=1e-12)
    if name not in ("charge-conserving", "matchgate"):  # whose gates hold their one-qubit gates
        turns = [[row[1:] for row in rows(one) if row[1] == "u"] for one in (own, product, dimers)]
        assert all(row in turns[0] and row in turns[2] for row in turns[1])


@pytest.mark.parametrize("name", [name for name in MODELS if name != "matchgate"])
@pytest.mark.parametrize(
    "device",
    [line(5, layout="ring"), make_device("grid", 6, columns=3), make_device("edges", 15, edges=HEAVY_HEX)],
    ids=["ring", "grid", "edges"],
)
def test_every_coupler_takes_part_on_other_layouts(name, device):
    step = getattr(period(experiment(name, device, (0,)), device), "layers", 4)
    circuit = draw(name, device, step)
    found = {tuple(sorted(pair)) for pair in circuit.qubits[N_QUBITS[circuit.kind] == 2].tolist()}
    assert found == set(device.couplers)


@pytest.mark.parametrize(
    ("device", "model", "layers", "times"),
    [
        (line(5), {}, 2, [0.0, 0.2, 0.4]),
        (make_device("grid", 6, columns=3), {}, 4, [0.0, 0.2, 0.4]),
        (line(5), {"hamiltonian": "xxz", "step": 0.1}, 2, [0.0, 0.1, 0.2]),
        (line(5), {"hamiltonian": "xxz", "order": 2, "step": 0.1}, 3, [0.0, 0.1, 0.2]),
        (line(5, layout="ring"), {"order": 2}, 3, [0.0, 0.2, 0.4]),
        (line(2), {"hamiltonian": "xxz", "order": 2}, 1, [0.0, 0.2, 0.4]),
    ],
)
def test_depth_means_time(device, model, layers, times):
    one = experiment("trotter", device, (0, layers, 2 * layers), **model)
    found = period(one, device)
    assert found is not None
    assert found.layers == layers
    assert [time_of(one, device, depth) for depth in one.depths] == pytest.approx(times)
    kicked = experiment("kicked-ising", line(5), (4,))
    assert time_of(kicked, line(5), 4) == 2
    assert time_of(experiment("matchgate", line(5), (4,)), line(5), 4) is None


@pytest.mark.parametrize(
    ("two_qubit", "message"),
    [
        ("kicked-ising", "depths: found 3; allowed: multiples of 2, the layers of one kick: 2 and 4"),
        ("trotter", "depths: found 3; allowed: multiples of 2, the layers of one step: 2 and 4"),
    ],
)
@pytest.mark.parametrize("family", ["", *CONTROLS])
def test_a_depth_inside_a_period_is_refused(two_qubit, message, family):
    with pytest.raises(InputError) as error:
        draw(two_qubit, line(5), 3, family=family)
    assert str(error.value) == message


def test_what_repeats_needs_couplers_that_repeat():
    device = make_device("all-to-all", 4)
    for name in ("kicked-ising", "trotter"):
        with pytest.raises(InputError) as error:
            draw(name, device, 4)
        expected = "layout: found 'all-to-all'; allowed: line, ring, grid or edges, where the same layers repeat"
        assert str(error.value) == expected


def test_a_device_without_a_gate_that_serves_is_refused_by_name():
    device = make_device("line", 4, gates=(NativeGate(name="fsim", parameters=(1.2, 0.3)),))
    with pytest.raises(InputError) as error:
        draw("charge-conserving", device, 2)
    assert str(error.value) == "two_qubit: found 'charge-conserving'; allowed: what invented serves: fsim"


@pytest.mark.parametrize(
    ("facts", "message"),
    [
        (
            {"family": "kicked-ising", "two_qubit": "cz"},
            "two_qubit: found 'cz'; allowed: no other gates than those of kicked-ising; leave it out",
        ),
        (
            {"two_qubit": "trotter"},
            "two_qubit: found 'trotter'; allowed: haar, clifford, cz, iswap, sqrt-iswap, fsim, zz, in a brickwork",
        ),
        (
            {"family": "dual-unitary", "one_qubit": "none"},
            "one_qubit: found 'none'; allowed: haar, quarter-turns, azimuth, clifford",
        ),
        (
            {"family": "trotter", "model": (("stpe", 0.1),)},
            "stpe: found 0.1; allowed: hamiltonian, step, order, coupling, disorder, field_x, field_z "
            "(did you mean 'step'?)",
        ),
        (
            {"family": "trotter", "model": (("anisotropy", 0.5),)},
            "anisotropy: found 0.5; allowed: hamiltonian, step, order, coupling, disorder, field_x, field_z",
        ),
        ({"family": "trotter", "model": (("order", 3),)}, "order: found 3; allowed: 1, 2"),
        ({"family": "trotter", "model": (("step", 0),)}, "step: found 0; allowed: a number above 0 to 100"),
        (
            {"family": "kicked-ising", "model": (("disorder", float("nan")),)},
            "disorder: found nan; allowed: a number from 0 to 3.14159",
        ),
        (
            {"family": "matchgate", "model": (("step", 0.1),)},
            "step: found 0.1; allowed: no parameter: the family has none",
        ),
    ],
)
def test_circuits_that_cannot_be_are_refused(facts, message):
    with pytest.raises(InputError) as error:
        Circuits(**facts)
    assert str(error.value) == message


def test_parameters_left_out_are_filled_in_and_circuits_can_be_keys():
    circuits = Circuits(family="trotter", model=(("step", 1),))
    assert circuits.parameters["step"] == 1.0
    assert isinstance(circuits.parameters["step"], float)
    assert circuits.parameters["hamiltonian"] == "mixed-field-ising"
    assert circuits.gates == "trotter+alternating"
    assert len({circuits, Circuits(family="trotter", model=(("step", 1.0),)), Circuits()}) == 2
    assert family_of("cz") is not family_of("trotter")


def test_depths_drawn_apart_have_fields_of_their_own():
    device = line(4)
    one = experiment("kicked-ising", device, (2, 4))
    apart = draw_circuits(Experiment(**{**_facts(one), "nested": False}), device, 1, 0)
    assert rows(apart[4])[: len(apart[2])] != rows(apart[2])


def _facts(one: Experiment) -> dict:
    return {key: getattr(one, key) for key in ("name", "circuits", "depths", "instances", "qubits")}

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import scipy.stats
from circuit_cases import HEAVY_HEX, make_device, phase_distance, unitary

from rcbench.campaign import Circuits, Experiment
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.ensembles import haar_unitaries
from rcbench.circuits.families import draw_circuits, served
from rcbench.circuits.gates import CODE, KINDS, N_QUBITS
from rcbench.circuits.schedule import layers, native_slots
from rcbench.device import Limits, NativeGate
from rcbench.errors import InputError
from rcbench.randomness import Draw

SETS = [
    ("haar", "none"),
    ("haar", "haar"),
    ("clifford", "none"),
    ("cz", "quarter-turns"),
    ("cz", "azimuth"),
    ("cz", "clifford"),
]
DEVICES = {
    "line": make_device("line", 5),
    "ring": make_device("ring", 5, one_qubit="r+rz"),
    "grid": make_device("grid", 6, columns=3, one_qubit="sx+rz"),
    "edges": make_device("edges", 15, edges=HEAVY_HEX),
    "all-to-all": make_device("all-to-all", 5, limits=Limits(parallel_gates=1)),
}  # fmt: skip


def experiment_on(device, family="brickwork", two_qubit="cz", one_qubit="quarter-turns", depths=(0, 1, 2, 5), **more):
    circuits = Circuits(family=family, two_qubit=two_qubit, one_qubit=one_qubit, angle=more.pop("angle", None))
    more.setdefault("qubits", device.working_qubits)
    return Experiment(name="one", circuits=circuits, depths=depths, instances=3, **more)


def rows(circuit: Circuit) -> list[tuple]:
    return [
        (int(layer), KINDS[kind].name, *pair, circuit.row_parameters(row))
        for row, (layer, kind, pair) in enumerate(
            zip(circuit.layer, circuit.kind, circuit.qubits.tolist(), strict=True)
        )
    ]


def blocks(circuit: Circuit) -> list[np.ndarray]:
    """Row numbers between barriers."""
    edges = np.flatnonzero(circuit.kind == CODE["barrier"])
    return [part[circuit.kind[part] != CODE["barrier"]] for part in np.split(np.arange(len(circuit)), edges)]


@pytest.mark.parametrize("family", ["brickwork", "product", "dimers"])
@pytest.mark.parametrize("gates", SETS, ids="+".join)
@pytest.mark.parametrize("name", DEVICES)
def test_nested_depths_are_the_first_rows_of_the_deepest_circuit(name, gates, family):
    device = DEVICES[name]
    found = draw_circuits(experiment_on(device, family, *gates), device, 4, 1)
    deepest = rows(found[5])
    per_layer = 1 if family == "product" or gates[1] == "none" else 2
    for depth, circuit in found.items():
        assert rows(circuit) == deepest[: len(circuit)]
        assert len(circuit.parameters) == sum(len(row[-1]) for row in rows(circuit))
        n_blocks = per_layer * depth + (0 if gates[1] == "none" and family != "product" else 1)
        assert len(blocks(circuit)) == max(n_blocks, 1)
        if len(circuit):
            assert circuit.kind[-1] != CODE["barrier"]


@pytest.mark.parametrize("name", DEVICES)
def test_a_circuit_does_not_depend_on_what_other_depths_are_asked_for(name):
    device = DEVICES[name]
    for gates in SETS:
        few = draw_circuits(experiment_on(device, "brickwork", *gates, depths=(1, 3)), device, 4, 1)
        many = draw_circuits(experiment_on(device, "brickwork", *gates, depths=(1, 3, 9)), device, 4, 1)
        assert rows(few[3]) == rows(many[3])


def test_depths_that_are_not_nested_are_drawn_apart():
    device = DEVICES["line"]
    found = draw_circuits(experiment_on(device, nested=False), device, 4, 1)
    assert rows(found[2]) != rows(found[5])[: len(found[2])]
    assert [len(blocks(circuit)) for circuit in found.values()] == [1, 3, 5, 11]


def test_instances_seeds_and_experiments_differ_and_the_same_comes_again():
    device = DEVICES["line"]
    one = experiment_on(device)
    base = rows(draw_circuits(one, device, 4, 1)[5])
    assert rows(draw_circuits(one, device, 4, 1)[5]) == base
    others = [(one, 4, 2), (one, 5, 1), (replace(one, name="two"), 4, 1)]
    assert all(rows(draw_circuits(e, device, seed, instance)[5]) != base for e, seed, instance in others)
    named = replace(one, name="two", same_circuits_as="one")
    assert rows(draw_circuits(named, device, 4, 1)[5]) == base


@pytest.mark.parametrize("name", DEVICES)
def test_two_qubit_blocks_hold_the_layers_of_the_schedule(name):
    device = DEVICES[name]
    experiment = experiment_on(device)
    circuit = draw_circuits(experiment, device, 4, 0)[5]
    schedule = layers(device, experiment.qubits, 5, Draw(4, "one", 0, "schedule"))
    for block, pairs in zip(blocks(circuit)[1::2], schedule, strict=True):
        assert sorted(map(tuple, circuit.qubits[block].tolist())) == sorted(pairs)
        assert len(np.unique(circuit.layer[block])) == len(native_slots(pairs, device, experiment.qubits))


@pytest.mark.parametrize("name", ["line", "ring", "grid"])
def test_haar_circuits_are_the_product_of_the_haar_gates_drawn(name):
    """The compiled circuit against gates drawn from the same key and multiplied densely, to 1e-9 up to phase."""
    device = DEVICES[name]
    n = device.n_qubits
    circuit = draw_circuits(experiment_on(device, "brickwork", "haar", "haar", depths=(3,)), device, 4, 0)[3]
    draws = {p: Draw(4, "one", 0, p) for p in ("schedule", "one-qubit", "two-qubit")}
    whole = np.eye(2**n)
    for pairs in [*layers(device, range(n), 3, draws["schedule"]), ()]:
        singles = haar_unitaries(draws["one-qubit"], n, 2)
        product = np.eye(1)
        for matrix in singles:
            product = np.kron(product, matrix)
        whole = product @ whole
        for pair, gate in zip(pairs, haar_unitaries(draws["two-qubit"], len(pairs), 4), strict=True):
            state = whole.reshape((2,) * n + (-1,))
            state = np.tensordot(gate.reshape(2, 2, 2, 2), state, ((2, 3), pair))
            whole = np.moveaxis(state, (0, 1), pair).reshape(2**n, 2**n)
    assert phase_distance(unitary(circuit), whole) < 1e-9


def test_product_circuits_share_the_one_qubit_layers_of_their_experiment():
    device = DEVICES["line"]
    one = draw_circuits(experiment_on(device), device, 4, 0)[5]
    product = draw_circuits(experiment_on(device, "product"), device, 4, 0)[5]
    assert product.two_qubit_gates == 0
    for a, b in zip(blocks(one)[::2], blocks(product), strict=True):
        assert [row[1:] for row in np.array(rows(one), dtype=object)[a].tolist()] == [
            row[1:] for row in np.array(rows(product), dtype=object)[b].tolist()
        ]


def test_the_product_of_haar_circuits_is_of_haar_one_qubit_gates():
    """Each qubit's chance of 0 is uniform: Kolmogorov-Smirnov over 200 instances, p > 1e-4."""
    device = make_device("line", 3)
    experiment = experiment_on(device, "product", "haar", "none", depths=(2,))
    found = [draw_circuits(experiment, device, 4, i)[2] for i in range(200)]
    assert all(circuit.two_qubit_gates == 0 for circuit in found)
    chances = [np.abs(unitary(circuit)[:4, 0]) ** 2 for circuit in found]
    assert scipy.stats.kstest(np.sum(chances, axis=1), "uniform").pvalue > 1e-4


@pytest.mark.parametrize("gates", SETS, ids="+".join)
@pytest.mark.parametrize("name", DEVICES)
def test_dimers_have_the_gates_and_duration_of_their_model_and_never_spread(name, gates):
    device = DEVICES[name]
    model = draw_circuits(experiment_on(device, "brickwork", *gates), device, 4, 0)[5]
    dimers = draw_circuits(experiment_on(device, "dimers", *gates), device, 4, 0)[5]
    assert dimers.two_qubit_gates == model.two_qubit_gates
    assert len(blocks(dimers)) == len(blocks(model))
    for a, b in zip(blocks(dimers), blocks(model), strict=True):
        assert np.count_nonzero(dimers.kind[a] == CODE["cz"]) == np.count_nonzero(model.kind[b] == CODE["cz"])
        assert len(np.unique(dimers.layer[a])) == len(np.unique(model.layer[b]))
    assert dimers.n_layers == model.n_layers
    pairs = {tuple(sorted(p)) for p in dimers.qubits[N_QUBITS[dimers.kind] == 2].tolist()}
    used = [q for pair in pairs for q in pair]
    assert len(set(used)) == len(used)


def test_qubits_of_the_experiment_give_calibrated_angles_by_device_coupler():
    gate = NativeGate(name="fsim", parameters=(1.5, 0.1), by_coupler={(3, 4): (1.4, 0.2)})
    device = make_device("line", 8, gates=[gate])
    experiment = experiment_on(device, two_qubit="fsim", depths=(2,), qubits=(4, 3, 2))
    circuit = draw_circuits(experiment, device, 4, 0)[2]
    found = [row for row in rows(circuit) if row[1] == "fsim"]
    assert [row[2:] for row in found] == [(0, 1, (1.4, 0.2)), (1, 2, (1.5, 0.1))]


def test_clifford_circuits_on_cz_have_exact_angles_only():
    device = make_device("line", 4, one_qubit="r+rz")
    circuit = draw_circuits(experiment_on(device, "brickwork", "clifford", "none", depths=(8,)), device, 4, 0)[8]
    assert {KINDS[k].name for k in circuit.kind} == {"r", "rz", "cz", "barrier"}
    assert set(np.abs(circuit.parameters)) <= {k * (np.pi / 4) for k in range(5)}


def test_served_lists_native_gates_and_what_is_compiled_to_them():
    assert served(make_device("line", 3)) == [("cz", "cz"), ("haar", "cz"), ("clifford", "cz")]
    odd = [NativeGate(name="fsim", parameters=(1.5, 0.3)), NativeGate(name="zz", parameters=(0.3,))]
    assert served(make_device("line", 3, gates=odd)) == [("fsim", "fsim"), ("zz", "zz")]


def test_a_random_gate_is_compiled_to_the_first_native_gate_that_serves_it():
    gates = [NativeGate(name="fsim", parameters=(1.5, 0.3)), NativeGate(name="sqrt-iswap"), NativeGate(name="cz")]
    device = make_device("line", 3, gates=gates)
    for name in ("haar", "clifford"):
        circuit = draw_circuits(experiment_on(device, "brickwork", name, "none"), device, 4, 0)[5]
        assert {KINDS[k].name for k in circuit.kind} == {"u", "sqrt_iswap", "barrier"}


def test_the_same_clifford_is_drawn_whatever_the_native_gate():
    found = []
    for name in ("cz", "iswap", "sqrt-iswap", "zz"):
        device = make_device("line", 4, gates=[NativeGate(name=name)])
        found.append(unitary(draw_circuits(experiment_on(device, "brickwork", "clifford", "none"), device, 4, 0)[5]))
    assert max(phase_distance(other, found[0]) for other in found[1:]) < 1e-13


def test_a_single_qubit_has_one_qubit_layers_only():
    device = make_device("line", 3)
    circuit = draw_circuits(experiment_on(device, qubits=(1,), depths=(3,)), device, 4, 0)[3]
    assert circuit.two_qubit_gates == 0
    assert np.count_nonzero(circuit.kind == CODE["u"]) == 4


FSIM = NativeGate(name="fsim", parameters=(1.5, 0.3))


@pytest.mark.parametrize(
    ("gates", "circuits", "message"),
    [
        ([NativeGate(name="cz")], {"two_qubit": "iswap"}, r"two_qubit: found 'iswap'; allowed: cz .*\(native to"),
        ([FSIM], {"two_qubit": "haar", "one_qubit": "none"}, r"two_qubit: found 'haar'; allowed: .* serves: fsim$"),
        ([FSIM], {"two_qubit": "clifford", "one_qubit": "none"}, r"two_qubit: found 'clifford'; allowed: what"),
        ([], {"two_qubit": "haar", "one_qubit": "none"}, r"two_qubit: found 'haar'; allowed: .* no two-qubit gate"),
        ([NativeGate(name="zz")], {"two_qubit": "zz"}, r"angle: found None; allowed: an angle for zz, since"),
        ([NativeGate(name="cz")], {"angle": 0.4}, r"angle: found 0\.4; allowed: no angle; only zz takes one, not cz"),
        ([NativeGate(name="zz", parameters=(0.3,))], {"two_qubit": "zz", "angle": 0.4}, r"angle: found 0\.4; allowed"),
        ([NativeGate(name="cz")], {"qubits": (0, 2)}, r"couplers: found 'none among qubits 0,2'; allowed: qubits of"),
        ([NativeGate(name="cz")], {"qubits": (0, 7)}, r"qubits: found 7; allowed: working qubits of invented: 0-3"),
        (
            [NativeGate(name="cz")],
            {"qubits": (1,), "two_qubit": "haar", "one_qubit": "none"},
            r"one_qubit: found 'none'; allowed: a one-qubit layer",
        ),
    ],
)  # fmt: skip
def test_what_the_device_lacks_is_refused_by_name(gates, circuits, message):
    device = make_device("line", 4, gates=gates)
    with pytest.raises(InputError, match=message):
        draw_circuits(experiment_on(device, **circuits), device, 4, 0)


@pytest.mark.benchmark
@pytest.mark.parametrize("gates", [("haar", "none"), ("cz", "quarter-turns")], ids="+".join)
def test_two_thousand_circuits_of_12_qubits_and_depth_20_build_in_time(gates):
    """2,000 circuits drawn apart in well under the 60 s that a whole kit of them may take."""
    import time

    device = make_device("line", 12, one_qubit="sx+rz")
    experiment = experiment_on(device, "brickwork", *gates, depths=(20,))
    start = time.perf_counter()
    for instance in range(200):
        draw_circuits(experiment, device, 4, instance)
    assert 10 * (time.perf_counter() - start) < 40

from __future__ import annotations

import networkx
import numpy as np
import pytest
from circuit_cases import HEAVY_HEX, make_device

from rcbench.circuits.schedule import couplers_among, dimer_layers, edge_colouring, layers, native_slots
from rcbench.device import Limits
from rcbench.errors import InputError
from rcbench.randomness import Draw

DEVICES = {
    "line of 7": make_device("line", 7),
    "ring of 8": make_device("ring", 8),
    "ring of 7": make_device("ring", 7),
    "grid 3 x 4": make_device("grid", 12, columns=4),
    "grid 2 x 2": make_device("grid", 4, columns=2),
    "grid of one row": make_device("grid", 5, columns=5),
    "heavy hexagon": make_device("edges", 15, edges=HEAVY_HEX),
    "wheel": make_device("edges", 6, edges=[(q, 5) for q in range(5)] + [(0, 1), (1, 2), (2, 3), (3, 4), (0, 4)]),
    "all-to-all": make_device("all-to-all", 7),
    "line with gaps": make_device("line", 11, broken_qubits=(4,), broken_couplers=((7, 8),)),
}  # fmt: skip


def draw() -> Draw:
    return Draw(11, "experiment", 0, "schedule")


@pytest.mark.parametrize("name", DEVICES)
def test_no_layer_uses_a_qubit_twice_or_a_coupler_the_device_lacks(name):
    device = DEVICES[name]
    qubits = device.working_qubits
    for layer in layers(device, qubits, 12, draw()):
        used = [q for pair in layer for q in pair]
        assert layer
        assert len(set(used)) == len(used)
        assert all((qubits[a], qubits[b]) in device.couplers for a, b in layer)


@pytest.mark.parametrize("name", [name for name in DEVICES if name != "all-to-all"])
def test_every_coupler_runs_once_in_each_round_of_the_patterns(name):
    device = DEVICES[name]
    qubits = device.working_qubits
    found = layers(device, qubits, 20, draw())
    period = next(p for p in range(1, 20) if found[p] == found[0])
    assert sorted(pair for layer in found[:period] for pair in layer) == list(couplers_among(device, qubits))
    assert found[period : 2 * period] == found[:period]


def test_a_line_starts_with_the_even_bonds():
    """The convention of the published recursions: layer 1 on (0, 1), (2, 3), ...; layer 2 on (1, 2), (3, 4), ..."""
    found = layers(make_device("line", 6), range(6), 3, draw())
    assert found == [((0, 1), (2, 3), (4, 5)), ((1, 2), (3, 4)), ((0, 1), (2, 3), (4, 5))]


def test_an_even_ring_has_two_parities_and_an_odd_ring_three():
    assert layers(make_device("ring", 6), range(6), 2, draw())[1] == ((0, 5), (1, 2), (3, 4))
    odd = layers(make_device("ring", 5), range(5), 4, draw())
    assert odd == [((0, 1), (2, 3)), ((1, 2), (3, 4)), ((0, 4),), ((0, 1), (2, 3))]


def test_labels_of_the_experiment_decide_which_parity_is_first():
    device = make_device("line", 8)
    assert layers(device, (3, 4, 5, 6), 2, draw()) == [((0, 1), (2, 3)), ((1, 2),)]
    assert layers(device, (6, 5, 4, 3), 2, draw()) == [((0, 1), (2, 3)), ((1, 2),)]
    # a part of an odd ring that holds its closing coupler is a line
    assert layers(make_device("ring", 7), (5, 6, 0, 1), 2, draw()) == [((0, 1), (2, 3)), ((1, 2),)]


def test_a_grid_has_four_patterns_in_which_each_qubit_meets_its_four_neighbours():
    found = layers(make_device("grid", 25, columns=5), range(25), 5, draw())
    assert found[4] == found[0]
    partners = [next(a + b - 12 for a, b in layer if 12 in (a, b)) for layer in found[:4]]
    assert partners == [13, 17, 11, 7]
    assert {len(layer) for layer in found} == {10}


@pytest.mark.parametrize("seed", range(12))
def test_edge_colouring_is_proper_and_within_one_colour_of_the_best_known(seed):
    """Koenig: a bipartite graph needs as many colours as its largest degree; Shannon: no graph more than 3/2 of it."""
    graph = networkx.gnm_random_graph(14, 26, seed=seed)
    if seed % 2:
        graph = networkx.bipartite.gnmk_random_graph(7, 7, 20, seed=seed)
    colours = edge_colouring(tuple(sorted((min(e), max(e)) for e in graph.edges)))
    line = networkx.line_graph(graph)
    assert len(colours) == graph.number_of_edges()
    for one, two in line.edges:
        assert colours[tuple(sorted(one))] != colours[tuple(sorted(two))]
    degree = max(degree for _, degree in graph.degree)
    n_colours = len(set(colours.values()))
    assert n_colours == degree if seed % 2 else n_colours <= degree + 1


def test_a_heavy_hexagon_takes_three_colours():
    assert len(set(edge_colouring(HEAVY_HEX).values())) == 3


def test_random_matchings_are_fresh_in_each_layer_and_uniform():
    found = layers(make_device("all-to-all", 4), range(4), 3000, draw())
    kinds, counts = np.unique([str(layer) for layer in found], return_counts=True)
    assert len(kinds) == 3  # 3 perfect matchings of four qubits
    assert np.abs(counts - 1000).max() < 4 * np.sqrt(3000 * (1 / 3) * (2 / 3))  # 4 sigma, fixed seed


def test_random_matchings_avoid_broken_couplers():
    device = make_device("all-to-all", 6, broken_couplers=((0, 1), (2, 5)))
    found = layers(device, range(6), 200, draw())
    assert all(len(layer) == 3 for layer in found)
    assert not {(0, 1), (2, 5)} & {pair for layer in found for pair in layer}
    star = make_device("all-to-all", 4, broken_couplers=((1, 2), (1, 3), (2, 3)))
    with pytest.raises(InputError, match=r"broken_couplers: found '3 broken of 6'"):
        layers(star, range(4), 1, draw())


def test_a_smaller_depth_is_the_start_of_a_larger_one():
    device = make_device("all-to-all", 6)
    assert layers(device, range(6), 9, draw())[:4] == layers(device, range(6), 4, draw())


@pytest.mark.parametrize("name", DEVICES)
def test_dimers_keep_one_partner_and_the_count_of_every_layer(name):
    device = DEVICES[name]
    qubits = device.working_qubits
    model, dimers = layers(device, qubits, 24, draw()), dimer_layers(device, qubits, 24, draw())
    assert [len(layer) for layer in dimers] == [len(layer) for layer in model]
    partners = {pair for layer in dimers for pair in layer}
    used = [q for pair in partners for q in pair]
    assert len(set(used)) == len(used)
    assert partners <= set(couplers_among(device, qubits))
    graph = networkx.Graph(couplers_among(device, qubits))
    assert len(partners) == len(networkx.max_weight_matching(graph, maxcardinality=True))


def test_dimers_share_the_left_out_layers_evenly():
    dimers = dimer_layers(make_device("line", 8), range(8), 16, draw())
    times = [sum(pair in layer for layer in dimers) for pair in ((0, 1), (2, 3), (4, 5), (6, 7))]
    assert times == [14, 14, 14, 14]  # 8 layers of 4 gates and 8 of 3


def test_slots_respect_gates_at_once_and_couplers_that_must_not_run_together():
    limits = Limits(parallel_gates=2, exclusive=(((2, 3), (4, 5)), ((7, 6), (8, 9))))
    device = make_device("line", 12, limits=limits)
    qubits = range(2, 12)
    layer = layers(device, qubits, 1, draw())[0]
    slots = native_slots(layer, device, qubits)
    assert sorted(pair for slot in slots for pair in slot) == sorted(layer)
    assert len(slots) == 3
    for slot in slots:
        assert len(slot) <= 2
        physical = {(qubits[a], qubits[b]) for a, b in slot}
        assert not {(2, 3), (4, 5)} <= physical
        assert not {(6, 7), (8, 9)} <= physical


def test_dimers_take_as_many_slots_as_their_model_under_exclusive_couplers():
    device = make_device("line", 8, limits=Limits(exclusive=(((1, 2), (3, 4)), ((0, 1), (2, 3)))))
    model, dimers = layers(device, range(8), 8, draw()), dimer_layers(device, range(8), 8, draw())
    slots = [[len(native_slots(layer, device, range(8))) for layer in each] for each in (model, dimers)]
    assert slots[0] == slots[1] == [2] * 8


@pytest.mark.parametrize(
    ("qubits", "message"),
    [
        ((0, 1, 9), r"qubits: found 9; allowed: working qubits of invented: 0-3,5-7"),
        ((0, 4), r"qubits: found 4; allowed"),
        ((0, 1, 0), r"qubits: found \(0, 1, 0\); allowed: each qubit once"),
        ((0, 2), r"couplers: found 'none among qubits 0,2'; allowed: qubits of invented that are coupled"),
    ],
)
def test_qubits_that_do_not_fit_are_refused_by_name(qubits, message):
    with pytest.raises(InputError, match=message):
        layers(make_device("line", 8, broken_qubits=(4,)), qubits, 2, draw())


def test_a_single_qubit_has_empty_layers():
    device = make_device("line", 3)
    assert layers(device, (1,), 2, draw()) == [(), ()]
    assert dimer_layers(device, (1,), 2, draw()) == [(), ()]

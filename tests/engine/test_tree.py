"""Sharing: the walk gives the states of separate runs, evolves common beginnings once and keeps few states."""

from __future__ import annotations

import numpy as np
import pytest
from engine_cases import random_circuit

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.engine.reference import final_state_reference
from rcbench.engine.tree import build_tree, walk
from rcbench.engine.work import Work
from rcbench.errors import InputError


def nested(n: int, depths: range, seed: int) -> list[Circuit]:
    """Circuits of which each is the first rows of the next, with measurements of their own."""
    rng = np.random.default_rng(seed)
    angles = rng.uniform(-3, 3, size=(max(depths) + 1, n, 3))
    out = []
    for depth in depths:
        builder = CircuitBuilder(n)
        for layer in range(depth + 1):
            for qubit in range(n):
                builder.add("u", [qubit], angles[layer, qubit])
            builder.barrier()
            for qubit in range(layer % 2, n - 1, 2) if layer < depth else ():
                builder.add("cz", [qubit, qubit + 1])
            builder.barrier()
        builder.measure(range(n))
        out.append(builder.build())
    return out


def echoes(n: int, seed: int) -> list[Circuit]:
    """One forward half, a different Pauli, the same backward half."""
    (forward,) = nested(n, range(6, 7), seed)
    out = []
    for qubit in range(n):
        builder = CircuitBuilder(n)
        builder.append(random_circuit(n, 5, seed, measure=False))
        builder.add("x", [qubit])
        builder.next_layer()
        builder.append(random_circuit(n, 3, seed + 1, measure=False))
        out.append(builder.build())
    return [*out, forward]


@pytest.mark.parametrize("dtype", ["complex64", "complex128"])
def test_walk_gives_the_states_of_separate_runs(dtype):
    circuits = [*nested(5, range(6), 1), *echoes(5, 2), *nested(4, range(2, 5), 3), random_circuit(5, 3, 9)]
    found = {index: state.copy() for index, state in walk(circuits, dtype=dtype)}
    assert sorted(found) == list(range(len(circuits)))
    for index, state in found.items():
        tolerance = 2e-6 if dtype == "complex64" else 1e-13
        np.testing.assert_allclose(state, final_state_reference(circuits[index]), atol=tolerance)


def test_equal_circuits_are_evolved_once():
    (circuit,) = nested(5, range(4, 5), 1)
    once, twice = Work(), Work()
    assert len(list(walk([circuit], work=once))) == 1
    assert len(list(walk([circuit, circuit], work=twice))) == 2
    assert once.amplitudes == twice.amplitudes


def test_nested_depths_cost_one_sweep():
    work = Work()
    circuits = nested(6, range(11), 4)
    assert len(list(walk(circuits, work=work))) == 11
    # 5 (3 + 2) pairs; one-qubit gates alone on 6 qubits before the first layer and on both ends in 5 layers
    assert work.amplitudes == 2**6 * (25 + 6 + 2 * 5)
    assert build_tree(circuits).states == 1


def test_branches_keep_one_state_an_open_branch_point():
    circuits = echoes(5, 2)
    root = build_tree(circuits[:-1])
    assert root.states == 2
    (forward,) = root.branches.values()
    assert len(forward.branches) == 5


def test_different_parameters_are_different_circuits():
    one, two = nested(3, range(2, 3), 1), nested(3, range(2, 3), 2)
    root = build_tree([*one, *two])
    assert len(root.branches) == 2


def test_measurements_and_barriers_make_no_difference():
    bare, measured = CircuitBuilder(2), CircuitBuilder(2)
    bare.add("h", [0])
    bare.next_layer()
    bare.add("cz", [0, 1])
    measured.add("h", [0])
    measured.barrier()
    measured.add("cz", [0, 1])
    measured.measure([1])
    root = build_tree([bare.build(), measured.build()])
    (node,) = root.branches.values()
    assert sorted(node.ends) == [0, 1]


def test_the_memory_of_all_open_states_is_predicted_and_refused():
    circuits = echoes(6, 1)
    with pytest.raises(InputError, match=r"1024 bytes for 2 states of 6 qubits.*at most 1000 bytes"):
        list(walk(circuits, memory_limit=1000))


def test_no_circuits_give_no_states():
    assert list(walk([])) == []

from __future__ import annotations

import hashlib

import numpy as np
import pytest
import stim
from circuit_cases import phase_distance

from rcbench.circuits import compile as compiler
from rcbench.circuits import native
from rcbench.circuits.cliffords import CLASSES, CLIFFORD1, ORDER, decompose_cliffords, two_qubit_cliffords
from rcbench.circuits.ensembles import LAYERS, QUARTER_TURNS, haar_unitaries, one_qubit_layer
from rcbench.circuits.gates import gate_matrix
from rcbench.circuits.kak import kron
from rcbench.device import NativeGate
from rcbench.errors import InputError
from rcbench.randomness import Draw

NATIVE = [
    NativeGate(name="cz"),
    NativeGate(name="iswap"),
    NativeGate(name="sqrt-iswap"),
    NativeGate(name="zz"),
    NativeGate(name="zz", parameters=(np.pi / 2,)),
    NativeGate(name="zz", parameters=(-np.pi / 2,)),
    NativeGate(name="fsim", parameters=(np.pi / 2, 0.0)),
    NativeGate(name="fsim", parameters=(-np.pi / 2, 0.0)),
]


@pytest.mark.parametrize("dimension", [2, 4])
def test_haar_draws_are_unitary(dimension):
    u = haar_unitaries(Draw(1, "haar"), 500, dimension)
    assert np.abs(u @ u.conj().swapaxes(1, 2) - np.eye(dimension)).max() < 1e-13


@pytest.mark.parametrize("name", LAYERS)
def test_layers_are_unitary_and_the_same_again_from_the_same_draw(name):
    matrices, choice = one_qubit_layer(name, 40, Draw(1, name))
    assert np.abs(matrices @ matrices.conj().swapaxes(1, 2) - np.eye(2)).max() < 1e-14
    again, same = one_qubit_layer(name, 40, Draw(1, name))
    assert np.array_equal(matrices, again)
    assert np.array_equal(choice, same)


def test_quarter_turns_are_about_x_y_and_their_diagonal():
    turns = [gate_matrix("sx"), gate_matrix("r", np.pi / 2, np.pi / 2)]
    diagonal = (gate_matrix("x") + gate_matrix("y")) / np.sqrt(2)
    turns.append((np.eye(2) - 1j * diagonal) / np.sqrt(2))
    for found, wanted in zip(QUARTER_TURNS, turns, strict=True):
        assert phase_distance(found, wanted) < 1e-15


def test_quarter_turns_never_repeat_and_are_uniform_over_the_rest():
    draw, previous = Draw(3, "turns"), None
    steps = np.zeros((3, 3))
    for _ in range(400):
        _, choice = one_qubit_layer("quarter-turns", 30, draw, previous)
        if previous is not None:
            np.add.at(steps, (previous, choice), 1)
        previous = choice
    assert np.trace(steps) == 0
    share = steps / steps.sum(axis=1, keepdims=True)
    sigma = 0.5 / np.sqrt(steps.sum(axis=1).min())
    assert np.abs(share[~np.eye(3, dtype=bool)] - 0.5).max() < 4 * sigma  # fixed seed


def test_azimuth_layers_turn_by_a_quarter_about_any_equatorial_axis():
    matrices, _ = one_qubit_layer("azimuth", 4000, Draw(5, "azimuth"))
    assert np.abs(np.einsum("mii->mi", matrices) - np.sqrt(0.5)).max() < 1e-15
    axis = np.angle(1j * matrices[:, 1, 0])
    for order in (1, 2, 3, 4):  # Fourier moments of a uniform angle vanish; 4 sigma
        assert abs(np.exp(1j * order * axis).mean()) < 4 / np.sqrt(4000)


def _numbers(key: tuple[str, ...], bound: int, size: int) -> list[int]:
    """The mapping from raw words in whole-number arithmetic, apart from the package's own."""
    digest = hashlib.sha256("\x1f".join(["9", *(f"str:{part}" for part in key)]).encode()).digest()
    words = np.random.PCG64(int.from_bytes(digest, "big")).random_raw(size)
    return [(int(word) >> 32) * bound >> 32 for word in words]


def test_discrete_choices_come_from_raw_words_only():
    _, choice = one_qubit_layer("clifford", 50, Draw(9, "layer"))
    assert choice.tolist() == _numbers(("layer",), 24, 50)
    _, choice = one_qubit_layer("quarter-turns", 50, Draw(9, "layer"))
    assert choice.tolist() == _numbers(("layer",), 3, 50)
    draw = Draw(9, "layer")
    _, first = one_qubit_layer("quarter-turns", 50, draw)
    _, second = one_qubit_layer("quarter-turns", 50, draw, first)
    rest = _numbers(("layer",), 2, 100)[50:]
    assert second.tolist() == [(a + 1 + b) % 3 for a, b in zip(first.tolist(), rest, strict=True)]


def test_an_unknown_layer_is_refused_by_name():
    with pytest.raises(InputError, match=r"one_qubit: found 'quarter-turn'; allowed: .*did you mean 'quarter-turns'"):
        one_qubit_layer("quarter-turn", 2, Draw(1, "x"))


def test_all_24_one_qubit_cliffords_are_there():
    """Compared with the tableaus that stim enumerates."""
    found = {str(stim.Tableau.from_unitary_matrix(u.astype(np.complex64), endian="big")) for u in CLIFFORD1}
    assert found == {str(tableau) for tableau in stim.Tableau.iter_all(1)}


def test_clifford_numbers_outside_the_group_are_refused():
    for bad in (-1, ORDER):
        with pytest.raises(InputError, match=f"clifford: found {bad}; allowed: 0 to 11519"):
            two_qubit_cliffords(np.array([3, bad]))


@pytest.mark.parametrize("gate", NATIVE, ids=lambda gate: f"{gate.name}{gate.parameters}")
def test_cliffords_in_native_gates_are_exact_with_every_angle_a_multiple_of_a_quarter_turn(gate):
    index = np.arange(0, ORDER, 7)
    found = decompose_cliffords(index, gate)
    # r and rz take sums and differences of the angles of u, which here are multiples of pi/2, bit for bit
    sums = native.snap(found.euler[..., 1] + found.euler[..., 2])
    assert set(np.unique(found.euler[..., 0])) <= {0, np.pi / 2, np.pi}
    assert set(np.unique(np.abs(sums))) <= {0, np.pi / 2, np.pi}
    assert set(np.unique(np.abs(found.euler))) <= {0, np.pi / 4, np.pi / 2, np.pi}
    wanted = two_qubit_cliffords(index).matrices()
    made = kron(found.locals[:, 0])
    for step in range(1, compiler.MOST + 1):
        here = found.count >= step
        parameters = gate.parameters or ((np.pi / 2,) if gate.name == "zz" else ())
        middle = gate_matrix(gate.name.replace("-", "_"), *parameters)
        made[here] = kron(found.locals[here, step]) @ middle @ made[here]
    overlap = np.abs(np.einsum("mij,mij->m", made, wanted.conj())) / 4
    assert np.abs(overlap - 1).max() < 1e-13
    assert max(phase_distance(a, b) for a, b in zip(made[:300], wanted[:300], strict=True)) < 1e-13


def test_classes_of_cliffords_take_as_many_gates_as_published():
    """Corcoles et al., Phys. Rev. A 87, 030301 (2013): 576, 5184, 5184 and 576 with 0, 1, 2 and 3 CNOT; mean 1.5."""
    count = decompose_cliffords(np.arange(ORDER), NATIVE[0]).count
    assert np.bincount(count).tolist() == list(CLASSES) == [576, 5184, 5184, 576]
    assert count.mean() == 1.5
    iswap = decompose_cliffords(np.arange(ORDER), NATIVE[1]).count
    assert np.bincount(iswap).tolist() == [576, 5184, 5184, 576]

"""Charge-conserving circuits keep the number of ones; how it spreads is in tests/published."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_cases import HEAVY_HEX, make_device, unitary
from model_cases import NATIVES, at, draw, line

from rcbench.circuits.families.charge_conserving import gates
from rcbench.engine.state import final_state
from rcbench.randomness import Draw


def ones(n: int) -> np.ndarray:
    return np.array([bin(index).count("1") for index in range(2**n)])


def test_gates_are_a_phase_a_unitary_and_a_phase_of_mean_zero():
    found = gates(Draw(5, "gates"), 4000)
    assert np.abs(found @ found.conj().swapaxes(1, 2) - np.eye(4)).max() < 1e-12
    sectors = np.array([0, 1, 1, 2])
    assert not found[:, sectors[:, None] != sectors].any()
    bound = 4 / np.sqrt(4000)  # 4 sigma: every part has variance at most 1/2
    assert np.abs(found.mean(axis=0)).max() < bound
    # Haar U(2): |u_11|^2 is uniform, so its mean is 1/2 and its mean square 1/3
    weights = np.abs(found[:, 1, 1]) ** 2
    assert abs(weights.mean() - 1 / 2) < 4 * np.sqrt(1 / 12 / 4000)
    assert abs((weights**2).mean() - 1 / 3) < 4 * np.sqrt(4 / 45 / 4000)


@pytest.mark.parametrize("native", NATIVES)
def test_the_number_of_ones_commutes_with_the_circuit_to_rounding(native):
    u = unitary(draw("charge-conserving", line(5, native), 8, one_qubit="none"))
    charge = sum(at("Z", site, 5) for site in range(5))
    assert np.abs(u @ charge - charge @ u).max() < 1e-12


@pytest.mark.parametrize(
    ("device", "filled"),
    [
        (line(6), 3),
        (make_device("grid", 9, columns=3), 4),
        (make_device("edges", 15, edges=HEAVY_HEX), 8),
        (line(5, layout="ring"), 2),
    ],
    ids=["line", "grid", "edges", "ring"],
)
def test_the_alternating_start_has_one_charge_which_stays(device, filled):
    n = device.n_qubits
    begin = final_state(draw("charge-conserving", device, 0), "complex128", threads=1)
    assert np.abs(begin).max() == pytest.approx(1)
    index = int(np.abs(begin).argmax())
    bits = [index >> (n - 1 - qubit) & 1 for qubit in range(n)]
    assert sum(bits) == filled
    if n != 5:  # bipartite couplings: all neighbours differ
        assert all(bits[a] != bits[b] for a, b in device.couplers)
    late = np.abs(final_state(draw("charge-conserving", device, 6), "complex128", threads=1)) ** 2
    assert late[ones(n) != filled].sum() < 1e-13
    assert 1 / (late**2).sum() > 3


def test_the_product_control_turns_about_z_only():
    u = unitary(draw("charge-conserving", line(3), 4, family="product", one_qubit="none"))
    assert np.abs(u - np.diag(np.diag(u))).max() < 1e-12

"""What signatures must tell apart: families that do not scramble, or that scramble as fast as anything can."""

from __future__ import annotations

import numpy as np
import pytest
from family_circuits import draw
from sampled_brickwork import assert_mean

from rcbench.reference import haar
from rcbench.reference.brickwork import spreading as exact
from rcbench.signatures.distinguishability import overlap
from rcbench.signatures.entropy import purity
from rcbench.signatures.evolution import choi_states, operators, twins, unitaries
from rcbench.signatures.frame_potential import of_unitaries
from rcbench.signatures.otoc import infinite_temperature_map
from rcbench.signatures.paulis import pauli_weights
from rcbench.signatures.spreading import fit_front, size_distribution
from rcbench.signatures.tmi import operator_tmi

BIT = np.log(2)


def deepest(family: str, n: int, depth: int, instances: int, **more):
    return [draw(family, n, [depth], k, **more)[depth] for k in range(instances)]


def test_product_circuits_have_no_operator_tmi_and_a_frozen_otoc():
    circuits = deepest("product", 4, 6, 3, native="cz", gates="cz")
    for _, choi in choi_states(circuits, dtype="complex128"):
        assert operator_tmi(choi, [0, 1], [0, 1])[0] == pytest.approx(0, abs=1e-12)
    growth = 1 - infinite_temperature_map(circuits, 0, dtype="complex128")[:, 1:]
    np.testing.assert_allclose(growth, 0, atol=1e-12)


def test_matchgates_fail_the_size_and_the_frame_potential_test_and_reach_their_own_tmi():
    """Choi TMI at halves -1.370(6) bits at 4 qubits from random SO(8), sampled elsewhere; Haar -2.68. 40 circuits,
    4 sigma. Sizes: X of the first qubit stays one Majorana, 8 strings; Dias et al., arXiv:2102.09846."""
    circuits = deepest("matchgate", 4, 24, 40)
    found = np.array([operator_tmi(c, [0, 1], [0, 1])[0] / BIT for _, c in choi_states(circuits, dtype="complex128")])
    assert abs(found.mean() + 1.370) < 4 * np.hypot(found.std(ddof=1) / np.sqrt(len(found)), 0.006)
    sizes = np.zeros(5)
    for _, operator in operators(circuits, 0, "X", dtype="complex128"):
        weights = pauli_weights(operator)
        assert np.count_nonzero(weights > 1e-12) <= 8
        sizes += size_distribution(weights) / len(circuits)
    assert np.abs(sizes - haar.operator_size_distribution(4)).max() > 0.1
    members = np.array([u for _, u in unitaries(circuits, dtype="complex128")])
    potential = of_unitaries(members, 2)
    assert potential.excess > 0.5
    assert potential.value - potential.haar > 3 * potential.std_error


def test_the_front_of_a_dual_unitary_circuit_is_the_light_cone():
    """v_B = 1 site a layer: Claeys and Lamacraft, PRR 2, 033032 (2020), arXiv:2003.01133; within 4 jackknife errors
    and 0.1; and the edge itself, where F = -1/3 on average over the letters of W."""
    depths = range(1, 7)
    maps = [
        infinite_temperature_map(list(draw("dual-unitary", 8, depths, k, native="cz", coupling=0.0).values()), 0)
        for k in range(8)
    ]
    growth = 1 - np.array(maps).mean(axis=3)
    fit = fit_front(growth, depths, range(8))
    assert fit.velocity == pytest.approx(1, abs=0.1)
    assert abs(fit.velocity - 1) < 4 * fit.velocity_error
    assert fit.width < 0.2
    for place, depth in enumerate(depths):
        np.testing.assert_allclose(growth[:, place, depth], 4 / 3, atol=1e-5)
        np.testing.assert_allclose(growth[:, place, depth + 1 :], 0, atol=1e-5)


def test_clifford_gates_give_the_haar_average_of_the_otoc_and_another_scatter():
    """Mean as for Haar gates (von Keyserlingk et al., arXiv:1705.08910), values +1 or -1: 250 circuits, 4 sigma."""
    n, depth = 4, 3
    circuits = deepest("brickwork", n, depth, 250, gates="clifford", native="cz", one_qubit="none")
    found = infinite_temperature_map(circuits, 0, "Z", dtype="complex128")[:, :, 0]
    np.testing.assert_allclose(np.abs(found), 1, atol=1e-9)
    for q, value in enumerate(exact.otoc_profile(n, 0, depth)):
        if value == 1:
            np.testing.assert_allclose(found[:, q], 1, atol=1e-9)
        else:
            assert_mean(found[:, q], value)


@pytest.mark.parametrize(
    ("family", "more"),
    [
        ("brickwork", {"gates": "haar", "native": "cz", "one_qubit": "none"}),
        ("kicked-ising", {"native": "cz"}),
        ("dual-unitary", {"native": "cz", "coupling": 0.2}),
        ("matchgate", {}),
        ("product", {"gates": "cz", "native": "cz"}),
        ("dimers", {"gates": "cz", "native": "cz"}),
    ],
)
def test_no_family_loses_anything_in_the_ideal_engine(family, more):
    """Purity of the whole state is 1 and the overlap of twins 0 at every depth, 1e-12."""
    circuits = list(draw(family, 5, [2, 4, 8], 0, **more).values())
    for _, states in twins(circuits, dtype="complex128"):
        assert overlap(states) < 1e-24
        np.testing.assert_allclose(np.linalg.norm(states, axis=1), 1, atol=1e-12)
        np.testing.assert_allclose(purity(states, range(5)), 1, atol=1e-12)

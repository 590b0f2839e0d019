"""What the circuits of each family must show, in the circuits as they are compiled and sent to a device."""

from __future__ import annotations

import numpy as np
import pytest
from family_circuits import assert_means, at, correlator, draw, forward, otoc, unitaries

from rcbench.engine.state import final_state
from rcbench.reference import conserving, kicked_ising, matchgate
from rcbench.signatures.entropy import renyi2_entropy, vonneumann_entropy

BITS = np.log(2)


def state_of(circuit):
    return final_state(circuit, "complex128", threads=1)[None]


# self-dual kicked Ising: Bertini, Kos and Prosen, PRX 9, 021033 (2019), arXiv:1812.05090


@pytest.mark.parametrize("one_qubit", ["azimuth", "quarter-turns", "none"])
@pytest.mark.parametrize(("n", "cut"), [(10, 5), (10, 3), (9, 4)])
def test_self_dual_kicked_ising_gains_one_bit_a_kick_in_every_order(n, cut, one_qubit):
    """min(t, n_A) bits while t <= n - n_A; one kick later from the Z basis."""
    late = one_qubit == "none"
    kicks = range(n - cut + 1)
    circuits = draw("kicked-ising", n, [2 * t for t in kicks], 0, native="cz", one_qubit=one_qubit)
    for t in kicks:
        state = state_of(circuits[2 * t])
        expected = min(max(t - late, 0), cut) * BITS
        assert vonneumann_entropy(state, range(cut))[0] == pytest.approx(expected, abs=1e-9)
        assert renyi2_entropy(state, range(cut))[0] == pytest.approx(expected, abs=1e-9)
    table = kicked_ising.region_entropy(n, cut, n - cut, initial="z" if late else "transverse")
    assert table == pytest.approx([min(max(t - late, 0), cut) * BITS for t in kicks])


def test_a_block_of_a_ring_gains_two_bits_a_kick():
    circuits = draw("kicked-ising", 10, [0, 2, 4, 6], 1, layout="ring", native="cz")
    found = [vonneumann_entropy(state_of(circuit), range(4))[0] / BITS for circuit in circuits.values()]
    assert found == pytest.approx([0, 2, 4, 4], abs=1e-9)


def test_detuned_kicks_entangle_more_slowly():
    """J = pi/4 and b = 0.6, 10 sites in the x-y plane: about 1, 1.81, 2.48, 3.06 bits."""
    detuned = [draw("kicked-ising", 10, [2, 4, 6, 8], k, native="cz", kick_detuning=0.6 - np.pi / 4) for k in range(4)]
    found = np.array([[vonneumann_entropy(state_of(c), range(5))[0] / BITS for c in one.values()] for one in detuned])
    assert found.mean(axis=0) == pytest.approx([1, 1.806, 2.483, 3.064], abs=0.12)
    assert (found[:, 1:] < [1.95, 2.9, 3.8]).all()


# dual-unitary: Bertini, Kos and Prosen, PRL 123, 210601 (2019); Claeys and Lamacraft, PRR 2, 033032 (2020)


@pytest.mark.parametrize("native", ["cz", "iswap", "sqrt-iswap", "zz"])
@pytest.mark.parametrize("coupling", [0.0, 0.3])
def test_correlators_of_dual_unitary_circuits_vanish_off_the_light_ray(coupling, native):
    n, depth, site = 6, 3, 2  # site 2 is the left leg of its first gate: its ray goes right, to site 5
    u = unitaries(draw("dual-unitary", n, [depth], 0, native=native, coupling=coupling))[depth]
    on = []
    for letter in "XYZ":
        moved = forward(u, at(letter, site, n))
        off = [correlator(moved, at(other, x, n)) for other in "XYZ" for x in range(n - 1)]
        assert np.abs(off).max() < 1e-12
        on += [correlator(moved, at(other, n - 1, n)) for other in "XYZ"]
    assert np.abs(on).max() > 1e-3


def test_the_otoc_at_the_edge_of_a_dual_unitary_light_cone_does_not_decay():
    """-1/3 at every depth: the butterfly velocity is that of light; exactly 1 beyond."""
    n, depths = 6, (1, 2, 3, 4)
    edge, beyond = [], []
    for instance in range(60):
        circuits = draw("dual-unitary", n, depths, instance, native="iswap", coupling=0.2)
        moved = [forward(u, at("X", 0, n)) for u in unitaries(circuits).values()]
        edge.append([otoc(one, at("Z", depth, n)) for depth, one in zip(depths, moved, strict=True)])
        beyond += [otoc(one, at("Z", depth + 1, n)) for depth, one in zip(depths, moved, strict=True)]
    assert_means(edge, [-1 / 3] * 4)
    assert np.std(edge, axis=0).max() / np.sqrt(60) < 0.08
    assert beyond == pytest.approx([1] * len(beyond), abs=1e-12)


# charge-conserving: Khemani, Vishwanath and Huse, PRX 8, 031057 (2018); Rakovszky and others, 031058


def test_charge_diffuses_one_site_squared_a_layer():
    """Averaged (1/D) tr Z_x(t) Z_y is a random walk, exact at every depth; F39 quotes 1/4 at two layers."""
    n, site, depths = 6, 2, (1, 2, 3)
    diagonals = np.array([np.diag(at("Z", x, n)) for x in range(n)])  # tr(A Z_x) needs A's diagonal only
    found = []
    for instance in range(60):
        made = unitaries(draw("charge-conserving", n, depths, instance, one_qubit="none"))
        found.append([diagonals @ np.real(np.diag(forward(u, at("Z", site, n)))) / 2**n for u in made.values()])
    walk = conserving.charge_correlator(n, site, 3)
    assert_means(found, walk[1:], sigmas=4.5)  # 18 values
    assert walk[2, 1:5] == pytest.approx([0.25] * 4)
    means = np.array(found).mean(axis=0)
    assert means.sum(axis=1) == pytest.approx(np.ones(3), abs=1e-12)  # the charge itself is kept
    # about the middle of its first bond: one site^2 more a layer, until it meets the ends of the line
    assert means @ (np.arange(n) - 2.5) ** 2 == pytest.approx([0.25, 1.25, 2.25], abs=0.35)


def test_the_late_otoc_of_charges_stays_above_that_of_a_scrambler():
    """Haar-random in each sector: 11/35 for 4 qubits."""
    found = []
    for instance in range(120):
        u = unitaries(draw("charge-conserving", 4, [24], instance, one_qubit="none"))[24]
        found.append(otoc(forward(u, at("Z", 0, 4)), at("Z", 3, 4)))
    assert_means(found, 11 / 35)
    assert conserving.late_otoc_of_charges(4) == pytest.approx(11 / 35)


# matchgates: Dias, Haque, Ribeiro and McClarty, arXiv:2102.09846


def test_late_otocs_of_matchgate_circuits_are_those_of_random_rotations():
    """n = 4: 1 - 1/n = 3/4 for X and X at the ends, 1 - 8 (n - 1)/(n (2n - 1)) = 1/7 for Z and Z."""
    found = []
    for instance in range(160):
        u = unitaries(draw("matchgate", 4, [24], instance))[24]
        found.append([otoc(forward(u, at(letter, 0, 4)), at(letter, 3, 4)) for letter in "XZ"])
    assert_means(found, [3 / 4, 1 / 7])
    assert matchgate.late_otoc(4, ("X", 0), ("X", 3)) == pytest.approx(3 / 4)


def test_matchgate_operators_spread_by_diffusion_and_not_ballistically():
    """X_0 is one Majorana operator: 1 - F with Z follows a random walk of the charge kind."""
    n, depths = 6, (2, 4)
    found = []
    for instance in range(50):
        moved = [forward(u, at("X", 0, n)) for u in unitaries(draw("matchgate", n, depths, instance)).values()]
        found.append([[otoc(one, at("Z", x, n)) for x in range(n)] for one in moved])
    assert_means(found, matchgate.edge_otoc_map(n, 4)[[2, 4]], sigmas=4.5)

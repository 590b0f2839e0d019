"""Families that must differ from a Haar brickwork: exact laws against circuits simulated in numpy."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sampled_brickwork import (
    PAULI,
    apply,
    assert_mean,
    dressed,
    entropies,
    haar,
    otocs,
    pauli_at,
    sampled_unitaries,
    schmidt,
    zeros,
)
from scipy.stats import special_ortho_group, unitary_group

from rcbench.errors import InputError
from rcbench.reference import conserving, dual_unitary, kicked_ising, matchgate
from rcbench.reference.brickwork import spreading, strings

BITS = np.log(2)


# self-dual kicked Ising: Bertini, Kos and Prosen, PRX 9, 021033 (2019), arXiv:1812.05090


def kicked_states(
    n: int, steps: int, *, ring: bool, initial: str, kick: float = np.pi / 4, seed: int = 1
) -> list[np.ndarray]:
    """States after 0 to `steps` kicks with random fields, as (1, 2, .., 2) arrays."""
    rng = np.random.default_rng(seed)
    z = 1 - 2 * ((np.arange(2**n)[:, None] >> np.arange(n - 1, -1, -1)) & 1)
    bonds = [(i, i + 1) for i in range(n - 1)] + ([(n - 1, 0)] if ring else [])
    energy = np.pi / 4 * sum(z[:, a] * z[:, b] for a, b in bonds) + z @ rng.uniform(0, 2, n)
    state = zeros(n, 1)
    if initial == "transverse":
        for site, angle in enumerate(rng.uniform(0, 2 * np.pi, n)):
            gate = np.array([[1, 1], [np.exp(1j * angle), -np.exp(1j * angle)]]) / np.sqrt(2)
            state = apply(state, gate[None], (site,))
    turn = np.cos(kick) * np.eye(2) - 1j * np.sin(kick) * PAULI[1]
    states = [state]
    for _ in range(steps):
        state = (state.reshape(1, -1) * np.exp(-1j * energy)).reshape(state.shape)
        for site in range(n):
            state = apply(state, turn[None], (site,))
        states.append(state)
    return states


@pytest.mark.parametrize(("ring", "size"), [(False, 4), (False, 3), (True, 4), (True, 2)])
@pytest.mark.parametrize("initial", ["transverse", "z"])
def test_kicked_ising_entanglement_grows_by_a_bit_a_kick_and_end(ring, size, initial):
    """Exact to 1e-9 inside the window, flat spectrum, any fields; less than the maximum after it."""
    n, steps = 8, 7
    law = kicked_ising.region_entropy(n, size, steps, ring=ring, initial=initial)
    states = kicked_states(n, steps, ring=ring, initial=initial)
    found = [entropies(state, range(size))[0] for state in states]
    inside = ~np.isnan(law)
    assert inside.sum() >= 3
    assert_allclose(np.array(found)[inside], law[inside], atol=1e-9)
    for state, value in zip(states, law, strict=True):
        if not np.isnan(value):
            assert_allclose(schmidt(state, range(size)).max(), np.exp(-value), rtol=1e-9)
    if size == 4:
        assert np.all(np.array(found)[~inside] < 4 * BITS - 0.05)


def test_kicked_ising_laws_in_bits():
    """The recorded sequences: open chain of 10, and a ring of 12 with blocks of 4 and 6."""
    cases = [
        ((10, 5, 5), {}, [0, 1, 2, 3, 4, 5]),
        ((10, 3, 7), {}, [0, 1, 2, 3, 3, 3, 3, 3]),
        ((10, 5, 6), {"initial": "z"}, [0, 0, 1, 2, 3, 4, 5]),
        ((12, 4, 4), {"ring": True}, [0, 2, 4, 4, 4]),
        ((12, 6, 3), {"ring": True}, [0, 2, 4, 6]),
    ]
    for sizes, how, values in cases:
        assert_allclose(kicked_ising.region_entropy(*sizes, **how) / BITS, values, atol=1e-12)
    assert np.isnan(kicked_ising.region_entropy(10, 5, 6)[-1])
    assert_allclose(kicked_ising.entanglement_rate(ends=2), 2 * BITS)


def test_a_kick_away_from_the_dual_point_entangles_less():
    """Kick 0.6 in place of pi/4: below the law from the second step on."""
    found = [entropies(s, range(4))[0] for s in kicked_states(8, 4, ring=False, initial="transverse", kick=0.6)]
    law = kicked_ising.region_entropy(8, 4, 4)
    assert np.all(np.array(found)[2:] < law[2:] - 0.05)


# dual-unitary gates: Bertini, Kos and Prosen, PRL 123, 210601 (2019); Claeys and Lamacraft, PRR 2, 033032 (2020)


@pytest.mark.parametrize("j", [0, 0.2, 0.5, np.pi / 4])
def test_dual_unitary_gates_are_unitary_in_space(j):
    gates = dressed(dual_unitary.interaction(j))(50, np.random.default_rng(1))
    assert dual_unitary.departure(gates).max() < 1e-14
    assert_allclose(strings.occupation_rule(dual_unitary.interaction(j)), dual_unitary.occupation_rule(j), atol=1e-14)
    assert dual_unitary.departure(haar(4)(50, np.random.default_rng(1))).mean() > 0.5


def test_the_dual_unitary_rule_by_number():
    """J = 0.2: to the right with 0.4344, to both with 0.5656; SWAP at pi/4; J = 0 the class of iSWAP."""
    assert_allclose(dual_unitary.occupation_rule(0.2)[1], [0, 0, 0.4344, 0.5656], atol=5e-5)
    assert_allclose(dual_unitary.occupation_rule(np.pi / 4), np.eye(4)[[0, 2, 1, 3]], atol=1e-15)
    swap = np.eye(4)[[0, 2, 1, 3]]
    assert_allclose(abs(np.trace(dual_unitary.interaction(np.pi / 4) @ swap)), 4, atol=1e-12)


def test_dual_unitary_correlators_vanish_off_the_light_ray():
    """(1/D) tr(U X_2 U^dag P_x) for every Pauli off the ray, one circuit of 6 qubits, 3 layers: 1e-12."""
    n, site = 6, 2
    u = sampled_unitaries(n, 3, 1, 3, dressed(dual_unitary.interaction(0.3)))[0]
    evolved = u @ pauli_at(1, site, n) @ u.conj().T
    sizes = [max(abs(np.trace(evolved @ pauli_at(p, x, n))) / 2**n for p in (1, 2, 3)) for x in range(n)]
    assert sizes[site + 3] > 1e-3
    assert max(value for x, value in enumerate(sizes) if x != site + 3) < 1e-12


@pytest.mark.parametrize("j", [0.0, 0.35])
def test_dual_unitary_front_moves_with_the_light(j):
    """E F = -1/3 at the edge at every depth; 5 qubits, 300 circuits, 4 sigma, all sites."""
    found = dual_unitary.otoc_map(8, 0, 6, j=j)
    for depth in range(1, 7):
        assert_allclose(found[depth, depth], dual_unitary.EDGE_OTOC, atol=1e-12)
        assert_allclose(found[depth, depth + 1 :], 1, atol=1e-12)
    assert spreading.butterfly_velocity() < dual_unitary.BUTTERFLY_VELOCITY
    u = sampled_unitaries(5, 3, 300, 4, dressed(dual_unitary.interaction(j)))
    for x, value in enumerate(dual_unitary.otoc_map(5, 0, 3, j=j)[-1]):
        samples = otocs(u, pauli_at(1, x, 5), pauli_at(3, 0, 5))
        if x == 4:
            assert_allclose(samples, 1, atol=1e-12)
        else:
            assert_mean(samples, value)


def test_a_network_of_swaps_lowers_the_otoc_without_scrambling():
    """J = pi/4: the operator moves, never grows, and the OTOC at the arrival site still averages -1/3."""
    found = dual_unitary.otoc_map(6, 0, 4, j=np.pi / 4)
    expected = np.ones(6)
    expected[4] = -1 / 3
    assert_allclose(found[-1], expected, atol=1e-12)


# charge conservation: Khemani, Vishwanath and Huse, PRX 8, 031057 (2018), arXiv:1710.09835


def conserving_gates(count: int, rng: np.random.Generator) -> np.ndarray:
    gates = np.zeros((count, 4, 4), dtype=complex)
    gates[:, 0, 0], gates[:, 3, 3] = np.exp(2j * np.pi * rng.uniform(size=(2, count)))
    gates[:, 1:3, 1:3] = unitary_group.rvs(2, size=count, random_state=rng)
    return gates


def test_charge_walks_at_random():
    """Averaged (1/D) tr(Z_x(t) Z_y): 300 sampled circuits of 6 qubits, 3 layers, 4 sigma; forward from site 3."""
    u = sampled_unitaries(6, 3, 300, 5, conserving_gates)
    values = conserving.charge_correlator(6, 3, 3)[-1]
    assert_allclose(values, [0.125, 0.125, 0.25, 0.25, 0.125, 0.125], atol=1e-15)
    evolved = u @ pauli_at(3, 3, 6) @ u.conj().swapaxes(1, 2)
    for x, value in enumerate(values):
        assert_mean(np.einsum("mij,ji->m", evolved, pauli_at(3, x, 6)).real / 64, value)


def test_charge_spreads_by_one_site_squared_a_layer():
    """Sum kept, variance L, peak 0.03979 at 100 layers against 1/sqrt(2 pi L) = 0.03989, late value 1/n."""
    table = conserving.charge_correlator(400, 200, 100)
    sites = np.arange(400)
    assert_allclose(table.sum(axis=1), 1, rtol=1e-12)
    variance = table @ sites**2 - (table @ sites) ** 2
    assert_allclose(np.diff(variance[1:]), conserving.CHARGE_VARIANCE, rtol=1e-9)
    assert_allclose(table[-1].max(), 0.03979, atol=6e-6)
    assert_allclose(conserving.charge_return(100), 0.03989, atol=6e-6)
    assert_allclose(conserving.charge_correlator(7, 0, 2000)[-1], 1 / 7, rtol=1e-9)
    assert_allclose(conserving.charge_correlator(8, 3, 2)[2, 1:5], 0.25, rtol=1e-12)


@pytest.mark.parametrize(("n", "value"), [(4, 11 / 35), (6, 0.255169), (8, 0.206506), (14, 0.12828), (100, 0.0197020)])
def test_late_otoc_of_charges(n, value):
    """Haar-random in every sector; tends to 2/n and not to -1/(4^n - 1)."""
    assert_allclose(conserving.late_otoc_of_charges(n), value, rtol=2e-5)


def test_late_otoc_of_charges_of_sampled_unitaries():
    """400 block-Haar unitaries of 4 qubits, and 200 brickworks of 40 layers: 11/35 with 4 sigma."""
    rng = np.random.default_rng(6)
    charge = np.bitwise_count(np.arange(16))
    u = np.zeros((400, 16, 16), dtype=complex)
    for m in range(5):
        states = np.flatnonzero(charge == m)
        size = len(states)
        assert size == conserving.sector_dimension(4, m)
        block = haar(size)(400, rng) if size > 1 else np.ones((400, 1, 1))  # a phase drops out
        u[np.ix_(range(400), states, states)] = block
    for sample in (u, sampled_unitaries(4, 40, 200, 7, conserving_gates)):
        assert_mean(otocs(sample, pauli_at(3, 0, 4), pauli_at(3, 3, 4)), conserving.late_otoc_of_charges(4))


# free fermions: Dias, Haque, Ribeiro and McClarty, arXiv:2102.09846


def matchgates(count: int, rng: np.random.Generator) -> np.ndarray:
    """Haar SO(4): independent SU(2) matrices on the even and on the odd pair of states."""
    blocks = unitary_group.rvs(2, size=2 * count, random_state=rng)
    blocks = (blocks / np.sqrt(np.linalg.det(blocks))[:, None, None]).reshape(2, count, 2, 2)
    gates = np.zeros((count, 4, 4), dtype=complex)
    gates[np.ix_(range(count), (0, 3), (0, 3))] = blocks[0]
    gates[np.ix_(range(count), (1, 2), (1, 2))] = blocks[1]
    return gates


@pytest.mark.parametrize(
    ("n", "letter", "value"), [(4, "X", 0.75), (10, "X", 0.9), (4, "Z", 1 / 7), (10, "Z", 0.621053)]
)  # fmt: skip
def test_late_otoc_of_free_fermions(n, letter, value):
    """X at both ends 1 - 1/n, Z at both ends 1 - 8 (n - 1)/(n (2n - 1)): both tend to 1."""
    assert_allclose(matchgate.late_otoc(n, (letter, 0), (letter, n - 1)), value, atol=6e-7)


@pytest.mark.parametrize(
    ("w", "v"), [(("Z", 0), ("Z", 2)), (("X", 0), ("Y", 2)), (("X", 1), ("Z", 1)), (("Y", 1), ("X", 1))]
)
def test_late_otoc_of_sampled_rotations_of_majoranas(w, v):
    """2000 matrices of SO(6) from scipy, minors of every set of Majoranas, 4 sigma."""
    sets = {
        "X": lambda j: (*range(2 * j), 2 * j),
        "Y": lambda j: (*range(2 * j), 2 * j + 1),
        "Z": lambda j: (2 * j, 2 * j + 1),
    }
    first, second = sets[w[0]](w[1]), sets[v[0]](v[1])
    assert len(first) == matchgate.majorana_count(*w)
    o = special_ortho_group.rvs(6, size=2000, random_state=np.random.default_rng(8))
    samples = np.zeros(2000)
    for chosen in combinations(range(6), len(first)):
        minor = np.linalg.det(o[np.ix_(range(2000), first, chosen)])
        samples += (-1) ** (len(first) * len(second) - len({*chosen} & {*second})) * minor**2
    assert_mean(samples, matchgate.late_otoc(3, w, v))


def test_otocs_of_sampled_matchgate_brickworks():
    """4 qubits: 24 layers against the late values (200 circuits), 3 layers against the walk of X_0 (400), 4 sigma."""
    u = sampled_unitaries(4, 24, 200, 9, matchgates)
    for letter, name in ((1, "X"), (3, "Z")):
        samples = otocs(u, pauli_at(letter, 0, 4), pauli_at(letter, 3, 4))
        assert_mean(samples, matchgate.late_otoc(4, (name, 0), (name, 3)))
    u = sampled_unitaries(4, 3, 400, 10, matchgates)
    values = matchgate.edge_otoc_map(4, 3)[-1]
    assert_allclose(values, [0.25, 0.25, 0.75, 0.75], atol=1e-15)
    for x, value in enumerate(values):
        assert_mean(otocs(u, pauli_at(3, x, 4), pauli_at(1, 0, 4)), value)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (
            lambda: kicked_ising.region_entropy(8, 5, 3),
            "n_region: found 5; allowed: a whole number from 1 to 4, at most",
        ),
        (lambda: kicked_ising.region_entropy(8, 2, 3, initial="x"), "initial: found 'x'; allowed: transverse, z"),
        (lambda: dual_unitary.departure(np.eye(3)), "gates: found (3, 3); allowed: matrices of 4 x 4"),
        (lambda: dual_unitary.otoc_map(6, 0, -1, j=0.1), "depth: found -1; allowed: a whole number, 0 or more"),
        (lambda: conserving.charge_correlator(6, 6, 3), "site: found 6; allowed: a whole number from 0 to 5"),
        (lambda: conserving.sector_dimension(4, 5), "charge: found 5; allowed: a whole number from 0 to 4"),
        (lambda: matchgate.late_otoc(4, ("Q", 0), ("Z", 1)), "pauli: found 'Q'; allowed: X, Y, Z"),
        (lambda: matchgate.late_otoc(4, ("X", 0), ("Z", 4)), "v site: found 4; allowed: a whole number from 0 to 3"),
    ],
)
def test_impossible_sizes_are_refused_in_words(call, message):
    with pytest.raises(InputError) as error:
        call()
    assert message in str(error.value)

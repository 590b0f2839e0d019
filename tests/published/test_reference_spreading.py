"""Operator spreading in brickworks: exact numbers, chain against intervals, and sampled circuits."""

from __future__ import annotations

import numpy as np
import pytest
import stim
from numpy.testing import assert_allclose
from sampled_brickwork import (
    assert_mean,
    draw_gates,
    dressed,
    haar,
    otocs,
    pauli_at,
    run,
    run_back,
    sampled_unitaries,
    wall,
    zeros,
)

from rcbench.circuits.schedule import layers
from rcbench.device import Device, NativeGate
from rcbench.errors import InputError
from rcbench.randomness import Draw
from rcbench.reference import haar as haar_values
from rcbench.reference.brickwork import spreading, strings
from rcbench.reference.brickwork.layers import layer_pairs

A, B, C, D, E = -3 / 125, 119 / 375, 83 / 1875, 1289 / 15625, 851 / 1875
EXACT = {  # (n, site, depth): OTOC at each site, U V U^dag, from exact rational arithmetic
    (4, 0, 1): (-1 / 15, -1 / 15, 1, 1),
    (4, 1, 3): (A, A, B, B),
    (6, 2, 2): (1, 11 / 75, 11 / 75, 11 / 75, 11 / 75, 1),
    (6, 2, 3): (B, B, C, C, B, B),
    (6, 0, 3): (A, A, B, B, 1, 1),
    (8, 3, 4): (B, D, D, D, D, E, E, 1),
}


@pytest.mark.parametrize("layout", ["line", "ring"])
def test_layers_are_those_of_the_schedule(layout):
    edges = [(q, q + 1) for q in range(7)] + ([(0, 7)] if layout == "ring" else [])
    device = Device(
        name="invented", n_qubits=8, layout=layout, couplers=tuple(sorted(edges)), two_qubit=(NativeGate(name="cz"),)
    )
    for layer, pairs in enumerate(layers(device, range(8), 4, Draw(1, "layers")), start=1):
        ours = layer_pairs(8, layer, ring=layout == "ring")
        assert sorted(pairs) == sorted(tuple(sorted(pair)) for pair in ours)
        assert list(ours) == wall(8, layer, ring=layout == "ring")


@pytest.mark.parametrize(("case", "values"), EXACT.items())
def test_averaged_otoc_is_the_exact_rational(case, values):
    """Rule of Nahum, Vijay and Haah, PRX 8, 021014 (2018), and von Keyserlingk et al., PRX 8, 021013 (2018)."""
    assert_allclose(spreading.otoc_profile(*case), values, atol=1e-12)
    assert_allclose(strings.otoc(strings.string_distribution(*case)), values, atol=1e-12)


@pytest.mark.parametrize("order", ["forward", "backward"])
@pytest.mark.parametrize(("n", "site", "depth"), [(2, 0, 3), (5, 4, 1), (7, 2, 6), (8, 3, 9), (10, 9, 7)])
def test_intervals_and_strings_agree(n, site, depth, order):
    """Two independent recursions, 1e-12: OTOC, right and left end."""
    chain = strings.string_distribution(n, site, depth, order=order)
    assert_allclose(spreading.otoc_profile(n, site, depth, order=order), strings.otoc(chain), atol=1e-12)
    patterns = range(1, 1 << n)
    lowest = np.array([(p & -p).bit_length() - 1 for p in patterns])
    highest = np.array([p.bit_length() - 1 for p in patterns])
    for side, bit in (("right", lowest), ("left", highest)):
        ends = np.bincount(n - 1 - bit, weights=chain[1:], minlength=n)
        assert_allclose(spreading.end_density(n, site, depth, order=order, side=side), ends, atol=1e-12)


@pytest.mark.parametrize("depth", [1, 4, 5])
def test_operator_and_probe_may_change_roles(depth):
    """Forward from i probed at x is backward from x probed at i."""
    n = 6
    forward = np.array([spreading.otoc_profile(n, i, depth) for i in range(n)])
    backward = np.array([spreading.otoc_profile(n, x, depth, order="backward") for x in range(n)])
    assert_allclose(forward, backward.T, atol=1e-12)


@pytest.mark.parametrize("order", ["forward", "backward"])
def test_the_map_holds_the_profile_of_every_depth(order):
    found = spreading.otoc_map(7, 3, 5, order=order)
    assert found.shape == (6, 7)
    for depth in range(6):
        assert_allclose(found[depth], spreading.otoc_profile(7, 3, depth, order=order), atol=1e-14)


@pytest.mark.parametrize(("n", "site", "depth"), [(4, 0, 3), (5, 2, 4)])
def test_averaged_otoc_of_sampled_haar_brickworks(n, site, depth):
    """400 circuits, 4 sigma, W = X and V = Z."""
    u = sampled_unitaries(n, depth, 400, 100 + n)
    for x, value in enumerate(spreading.otoc_profile(n, site, depth)):
        samples = otocs(u, pauli_at(1, x, n), pauli_at(3, site, n))
        if value == 1:
            assert_allclose(samples, 1, atol=1e-12)
        else:
            assert_mean(samples, value)


CZ = np.diag([1, 1, 1, -1])
SQRT_ISWAP = np.array([[1, 0, 0, 0], [0, 0.5**0.5, 1j * 0.5**0.5, 0], [0, 1j * 0.5**0.5, 0.5**0.5, 0], [0, 0, 0, 1]])


@pytest.mark.parametrize("gate", [CZ, SQRT_ISWAP])
def test_averaged_otoc_of_a_native_gate_between_random_one_qubit_gates(gate):
    """400 sampled circuits of 4 qubits and 3 layers, 4 sigma."""
    rule = strings.occupation_rule(gate)
    assert_allclose(rule.sum(axis=1), 1, atol=1e-12)
    values = strings.otoc(strings.string_distribution(4, 1, 3, rule=rule))
    assert np.abs(values - spreading.otoc_profile(4, 1, 3)).max() > 0.05  # not the Haar values
    u = sampled_unitaries(4, 3, 400, 7, dressed(gate))
    for x, value in enumerate(values):
        assert_mean(otocs(u, pauli_at(1, x, 4), pauli_at(3, 1, 4)), value)


def test_the_rule_of_cz_and_of_the_mean_over_haar_gates():
    """CZ keeps Z and grows X, Y: 01 stays with 1/3 and grows with 2/3. Haar: any of 15 to any of 15."""
    assert_allclose(strings.occupation_rule(CZ)[1], [0, 1 / 3, 0, 2 / 3], atol=1e-12)
    assert_allclose(strings.occupation_rule(np.eye(4)), np.eye(4), atol=1e-12)
    mean = np.mean([strings.occupation_rule(u) for u in haar(4)(800, np.random.default_rng(2))], axis=0)
    assert_allclose(mean, strings.HAAR_RULE, atol=0.02)


def test_clifford_brickworks_have_the_same_mean_otoc_and_single_values_of_plus_or_minus_one():
    """500 circuits of uniform two-qubit Cliffords from stim, 8 qubits, 5 layers, 4 sigma."""
    group = list(stim.Tableau.iter_all(2))
    rng = np.random.default_rng(3)
    n, site, depth, circuits = 8, 3, 5, 500
    signs = np.empty((circuits, n))
    for row in signs:
        whole = stim.Tableau(n)
        for layer in range(1, depth + 1):
            for pair in wall(n, layer):
                whole.append(group[rng.integers(len(group))], pair)
        image = whole.z_output(site)  # U Z U^dag
        row[:] = [1 if image.commutes(stim.PauliString("_" * x + "X" + "_" * (n - x - 1))) else -1 for x in range(n)]
    for x, value in enumerate(spreading.otoc_profile(n, site, depth)):
        assert_mean(signs[:, x], value)


def test_butterfly_velocity_and_front_variance_of_the_exact_ends():
    """v_B = 3/5 site and variance 0.64 site^2 a layer; from layers 60 and 120 of 400 sites, to 1e-6."""
    sites = np.arange(400)
    moments = []
    for depth in (60, 120):
        p = spreading.end_density(400, 200, depth)
        moments.append((p @ sites, p @ sites**2 - (p @ sites) ** 2))
    mean, variance = (np.array(moments[1]) - moments[0]) / 60
    assert_allclose([mean, variance], [0.6, 0.64], rtol=1e-6)
    assert_allclose([spreading.butterfly_velocity(), spreading.front_variance()], [0.6, 0.64], rtol=1e-14)
    assert_allclose(spreading.front_width(100), 8, rtol=1e-14)


def test_profile_of_a_thousand_sites_is_that_of_a_short_line_inside_the_light_cone():
    """40 layers from the middle of 1000 sites and of 100."""
    long, short = spreading.otoc_profile(1000, 500, 40), spreading.otoc_profile(100, 50, 40)
    assert_allclose(long[455:545], short[5:95], atol=1e-12)


def test_velocity_fitted_to_the_exact_front_of_200_sites():
    """Where 1 - F crosses one half, against depth: 3/5 within 1 %."""
    found = spreading.otoc_map(200, 0, 160)
    fronts = [np.interp(0.5, found[depth], np.arange(200)) for depth in range(60, 161, 2)]
    assert_allclose(np.polyfit(np.arange(60, 161, 2), fronts, 1)[0], spreading.butterfly_velocity(), rtol=0.01)


def test_front_profile_is_an_error_function_of_the_distance():
    """n = 400, 120 layers: exact 0.937, 0.808, 0.579, 0.310, 0.112 at -12 .. 12 sites; the law to 0.09."""
    exact = 1 - spreading.otoc_profile(400, 200, 120)
    away = np.array([-12, -6, 0, 6, 12])
    law = spreading.front_profile(away + 72, 120)
    assert_allclose(law, [0.915, 0.753, 0.5, 0.247, 0.086], atol=6e-4)
    assert_allclose(exact[272 + away], [0.937, 0.808, 0.579, 0.310, 0.112], atol=6e-4)
    assert_allclose(exact[272 + away], law, atol=0.09)


@pytest.mark.parametrize("q", [2, 3])
def test_light_cone_edge_falls_by_one_factor_a_layer(q):
    """1 - F = q^2/(q^2 - 1) (q^2/(q^2 + 1))^L at site L; 16/15 at one layer of qubits; 0.9^L for q = 3. 1e-12."""
    found = 1 - spreading.otoc_map(20, 0, 8, q=q)
    for depth in range(1, 9):
        assert_allclose(found[depth, depth], spreading.light_cone_edge(depth, q), rtol=1e-12)
        assert_allclose(found[depth, depth + 1 :], 0, atol=1e-12)
    assert spreading.light_cone_edge(1, 2) == pytest.approx(16 / 15, rel=1e-14)
    assert spreading.light_cone_edge(3, 3) == pytest.approx(9 / 8 * 0.9**3, rel=1e-14)


def test_mean_size_from_an_edge():
    """1.6, 2.08, 2.56, 3.0208, 3.4816, 3.9363 for 1 to 6 layers; slope 0.45 a layer and front; at last Haar's."""
    sizes = []
    for depth in range(1, 13):
        chain = strings.string_distribution(14, 0, depth)
        p = strings.size_distribution(chain)
        assert_allclose(p.sum(), 1, rtol=1e-12)
        assert p[depth + 2 :].sum() == 0  # inside the light cone
        sizes.append(p @ np.arange(15))
        assert_allclose(strings.occupation(chain).sum(), sizes[-1], rtol=1e-12)
    assert_allclose(sizes[:6], [1.6, 2.08, 2.56, 3.0208, 3.4816, 3.9363], atol=5e-5)
    assert_allclose(sizes[11] - sizes[10], 0.4506, atol=1e-3)
    late = strings.size_distribution(strings.string_distribution(5, 2, 200))
    assert_allclose(late, haar_values.operator_size_distribution(5), atol=1e-10)


def test_echo_with_one_perturbation():
    """U^dag X U |0..0>, X at site 2, 4 layers, 6 qubits, 500 circuits, 4 sigma: <Z_i> is the OTOC, the return is not.

    Returns 0.1040 (site 2, 2 layers), 0.0505 (2, 4), 0.0232 (3, 8); tends to 1/65.
    """
    unseen = strings.echo_return(6, 8)
    assert_allclose([unseen[2, 2], unseen[4, 2], unseen[8, 3]], [0.1040, 0.0505, 0.0232], atol=6e-5)
    gates = draw_gates(6, 4, 500, np.random.default_rng(5), haar(4))
    x = np.tile(np.array([[0, 1], [1, 0]]), (500, 1, 1))
    forward = run(zeros(6, 500), gates)
    final = run_back(run(forward, [((2,), x)]), gates)
    p = np.abs(final.reshape(500, 64)) ** 2
    assert_mean(p[:, 0], unseen[4, 2])
    for site, value in enumerate(spreading.otoc_profile(6, 2, 4, order="backward")):
        assert_mean(p @ (1 - 2 * ((np.arange(64) >> (5 - site)) & 1)), value)
    assert_allclose(
        spreading.otoc_profile(6, 2, 4, order="backward"), [0.044, 0.044, 0.082, 0.082, 0.454, 0.454], atol=6e-4
    )
    assert_allclose(strings.echo_return(6, 200)[-1], 1 / 65, rtol=1e-6)


def test_echo_return_is_the_mean_over_strings():
    """Sum of p(s) 3^-|s| over the backward chain, every site."""
    unseen = strings.echo_return(5, 4)
    for depth in range(5):
        for site in range(5):
            p = strings.size_distribution(strings.string_distribution(5, site, depth, order="backward"))
            assert_allclose(unseen[depth, site], p @ 3.0 ** -np.arange(6), rtol=1e-12)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: spreading.otoc_profile(6, 6, 2), "site: found 6; allowed: a whole number from 0 to 5"),
        (lambda: spreading.otoc_profile(2001, 0, 2), "n_qubits: found 2001; allowed: a whole number from 2 to 2000"),
        (lambda: spreading.otoc_profile(6, 0, -1), "depth: found -1; allowed: a whole number, 0 or more"),
        (lambda: spreading.otoc_profile(6, 0, 2, order="back"), "order: found 'back'; allowed: forward, backward"),
        (lambda: spreading.otoc_profile(6, 0, 2, q=1), "q: found 1; allowed: a whole number, 2 or more"),
        (lambda: spreading.end_density(6, 0, 2, side="up"), "side: found 'up'; allowed: right, left"),
        (lambda: strings.string_distribution(23, 0, 2), "a whole number from 2 to 22; `spreading` serves longer lines"),
        (lambda: strings.occupation_rule(np.ones((4, 4))), "allowed: a unitary matrix of 4 x 4"),
        (lambda: strings.otoc(np.ones(3)), "distribution: found (3,); allowed: 2^n probabilities of patterns"),
        (lambda: layer_pairs(5, 1, ring=True), "n_qubits: found 5; allowed: an even number, 4 or more"),
    ],
)
def test_impossible_sizes_are_refused_in_words(call, message):
    with pytest.raises(InputError) as error:
        call()
    assert message in str(error.value)

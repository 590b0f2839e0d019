"""Collisions, cross-entropy, frame potential and noise of the Haar brickwork: exact numbers, sampled circuits."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sampled_brickwork import (
    PAULI,
    apply,
    assert_mean,
    draw_gates,
    haar,
    sampled_states,
    sampled_unitaries,
    wall,
    zeros,
)

from rcbench.errors import InputError
from rcbench.reference import porter_thomas
from rcbench.reference.brickwork import frame_potential, noise, output, purity

COLLISIONS = {  # n: (depths, D Z), exact
    4: ((1, 2, 3, 4, 5, 6), (2.56, 2.304, 2.0992, 2.01728, 1.951744, 1.92553)),
    6: ((1, 2, 3, 4, 5, 6), (4.096, 3.31776, 2.813133, 2.556756, 2.360714, 2.246653)),
    8: ((1, 2, 3, 4, 6, 8, 12), (6.5536, 4.777574, 3.768215, 3.242092, 2.633136, 2.335184, 2.093670)),
}


@pytest.mark.parametrize("n", COLLISIONS)
def test_collision_probability_is_the_exact_number(n):
    """Dalzell, Hunter-Jones and Brandao, PRX Quantum 3, 010333 (2022)."""
    depths, values = COLLISIONS[n]
    found = output.scaled_collisions(n, max(depths))
    assert_allclose(found[list(depths)], values, atol=6e-6)
    assert_allclose(found[0], (4 / 3) ** n, rtol=1e-12)
    assert_allclose(found[1], (8 / 5) ** (n // 2), rtol=1e-12)
    assert_allclose(output.collision_probability(n, 1)[1] * 2**n, found[1], rtol=1e-12)
    assert_allclose(output.linear_xeb(n, 600)[-1], porter_thomas.linear_xeb(2**n), rtol=1e-11)


def test_collision_probability_of_the_ring():
    assert_allclose(output.scaled_collisions(6, 4, ring=True)[[2, 4]], [2.99008, 2.204434], atol=6e-7)


def all_patterns(n: int, depth: int) -> float:
    """D Z with one weight a pattern, 2^n of them, as the rule is written down."""
    weights = np.full((2,) * n, 6.0**-n)
    for layer in range(1, depth + 1):
        for i in range((layer + 1) % 2, n - 1, 2):
            view = np.moveaxis(weights, (i, i + 1), (0, 1)).copy()
            mixed = 0.4 * (view[0, 1] + view[1, 0])
            view[0, 0] += mixed
            view[1, 1] += mixed
            view[0, 1] = view[1, 0] = 0
            weights = np.moveaxis(view, (0, 1), (i, i + 1))
    return float(4.0**n * weights.sum())


@pytest.mark.parametrize("n", [5, 8, 11])
def test_compressed_weights_equal_all_patterns(n):
    found = output.scaled_collisions(n, 7)
    assert_allclose(found[[1, 2, 7]], [all_patterns(n, depth) for depth in (1, 2, 7)], rtol=1e-12)


@pytest.mark.parametrize(("depth", "ring"), [(2, False), (4, False), (8, False), (2, True)])
def test_collision_probability_of_sampled_brickworks(depth, ring):
    """8 qubits, 300 circuits, 4 sigma."""
    p = np.abs(sampled_states(8, depth, 300, 40 + depth, ring=ring).reshape(300, -1)) ** 2
    assert_mean(256 * (p**2).sum(axis=1), output.scaled_collisions(8, depth, ring=ring)[-1])


@pytest.mark.slow
@pytest.mark.parametrize("depth", [3, 6, 12])
def test_cross_entropy_of_ten_thousand_sampled_brickworks(depth):
    p = np.abs(sampled_states(8, depth, 10_000, depth).reshape(10_000, -1)) ** 2
    assert_mean(256 * (p**2).sum(axis=1) - 1, output.linear_xeb(8, depth)[-1])


def test_collision_probability_of_sampled_qutrits():
    p = np.abs(sampled_states(3, 3, 400, 6, q=3).reshape(400, -1)) ** 2
    assert_mean(27 * (p**2).sum(axis=1), output.scaled_collisions(3, 3, q=3)[-1])


@pytest.mark.parametrize(("n", "factor"), [(5, 0.64721), (7, 0.72078), (9, 0.75175)])
def test_collision_probability_approaches_haar_by_one_factor_a_layer(n, factor):
    """0.8 cos(pi/n), layers 60 to 62, to 1e-4."""
    left = output.scaled_collisions(n, 62) - 2 * 2**n / (2**n + 1)
    assert_allclose(purity.relaxation_factor(n), factor, atol=6e-6)
    assert_allclose(np.sqrt(left[62] / left[60]), factor, rtol=1e-4)


@pytest.mark.parametrize(("n", "depth"), [(8, 2.76), (12, 5.36), (16, 7.22), (20, 8.64), (24, 9.75), (28, 10.66)])
def test_depth_of_anticoncentration(n, depth):
    """Where Z is twice its Haar value; to the two digits recorded."""
    assert_allclose(output.anticoncentration_depth(n), depth, atol=6e-3)


def test_collision_probability_of_32_sites():
    found = output.scaled_collisions(32, 20) * (1 + 2.0**-32) / 2
    assert_allclose(found[[4, 8, 12, 16, 20]], [28.00, 4.195, 1.840, 1.2875, 1.1083], rtol=2e-4)


FRAMES = {
    5: ((2, 3, 4), (3.0112, 2.359711, 2.14749)),
    6: ((1, 2, 3, 4, 5, 6), (8, 3.4336, 2.523796, 2.230282, 2.107549, 2.051176)),
    8: ((1, 2, 3, 4, 5, 6), (16, 4.464768, 2.887894, 2.404231, 2.201112, 2.104346)),
}


@pytest.mark.parametrize("n", FRAMES)
def test_second_frame_potential_is_the_exact_number(n):
    """Hunter-Jones, arXiv:1905.12053; the bound of that paper lies above."""
    for depth, value in zip(*FRAMES[n], strict=True):
        found = frame_potential.frame_potential_k2(n, depth)
        assert_allclose(found, value, atol=6e-6)
        assert found <= frame_potential.approach_bound(n, depth) * (1 + 1e-12)
    assert_allclose(frame_potential.approach_bound(6, 3), 3.974, atol=5e-4)


@pytest.mark.parametrize("depth", [1, 2, 5, 9])
def test_second_frame_potential_has_closed_forms_at_three_and_four_sites(depth):
    assert_allclose(frame_potential.frame_potential_k2(2, depth), 2, rtol=1e-12)
    assert_allclose(frame_potential.frame_potential_k2(3, depth), 2 + 2 * (4 / 25) ** (depth - 1), rtol=1e-12)
    assert_allclose(frame_potential.frame_potential_k2(4, depth), 2 + 2 * (8 / 25) ** (depth - 1), rtol=1e-12)


def label_layer(n: int, pairs: list[tuple[int, int]], q: int) -> np.ndarray:
    """(2^n, 2^n) what the gates of a layer do to the labels, as the rule is written down."""
    gate = np.zeros((2, 2, 2, 2))  # after, after, before, before
    gate[0, 0, 0, 0] = gate[1, 1, 1, 1] = 1
    for label in (0, 1):
        gate[label, label, 0, 1] = gate[label, label, 1, 0] = q / (q * q + 1)
    out = np.eye(2**n).reshape((2,) * n + (2**n,))
    for pair in pairs:
        out = np.moveaxis(np.tensordot(gate, out, ((2, 3), pair)), (0, 1), pair)
    return out.reshape(2**n, 2**n)


@pytest.mark.parametrize(("n", "ring", "q"), [(4, True, 2), (6, True, 2), (5, False, 3), (7, False, 2)])
def test_second_frame_potential_is_the_trace_of_dense_layers(n, ring, q):
    """Odd lines, rings and other dimensions, against 2^n x 2^n matrices."""
    layers = [label_layer(n, wall(n, layer, ring=ring), q) for layer in range(1, 5)]
    for depth in (1, 2, 4):
        product = np.linalg.multi_dot([np.eye(2**n), *layers[:depth], *layers[1 : depth - 1][::-1]])
        assert_allclose(frame_potential.frame_potential_k2(n, depth, q=q, ring=ring), np.trace(product), rtol=1e-12)


@pytest.mark.parametrize(("n", "factor"), [(5, 0.41889), (6, 0.48), (8, 0.54627)])
def test_second_frame_potential_approaches_two_by_the_square_of_the_purity_factor(n, factor):
    left = [frame_potential.frame_potential_k2(n, depth) - 2 for depth in (20, 21)]
    assert_allclose(purity.relaxation_factor(n) ** 2, factor, atol=6e-6)
    assert_allclose(left[1] / left[0], factor, rtol=1e-3)


@pytest.mark.parametrize(("n", "depth"), [(3, 2), (4, 2), (4, 3)])
def test_second_frame_potential_of_sampled_pairs(n, depth):
    """8000 pairs of circuits, 4 sigma; heavy tails, so a check against gross error only."""
    pairs = 8000
    u, v = sampled_unitaries(n, depth, pairs, 1), sampled_unitaries(n, depth, pairs, 2)
    traces = np.abs(np.einsum("mij,mij->m", u.conj(), v)) ** 4
    assert_mean(traces, frame_potential.frame_potential_k2(n, depth))


NOISY = {  # (n, depth, p): cross-entropy, fidelity, purity
    (4, 2, 0.05): (1.141163, 0.828281, 0.691260),
    (4, 4, 0.05): (0.733367, 0.677623, 0.471754),
    (4, 6, 0.1): (0.308507, 0.317269, 0.139711),
}


@pytest.mark.parametrize(("case", "values"), NOISY.items())
def test_noisy_averages_are_the_exact_numbers(case, values):
    """Method of Dalzell et al., arXiv:2111.14907, and Gao et al., arXiv:2112.01657."""
    assert_allclose(noisy(*case), values, atol=6e-7)


def test_noisy_averages_of_six_sites():
    assert_allclose(noisy(6, 6, 0.03), [0.7830, 0.5439, 0.3050], atol=6e-5)


def noisy(n: int, depth: int, p: float) -> list[float]:
    xeb, fidelity = output.linear_xeb(n, depth, noise=p)[-1], noise.fidelity(n, depth, p)[-1]
    return [xeb, fidelity, purity.pattern_purity(n, range(n), depth, noise=p)[-1]]


def depolarise(rho: np.ndarray, site: int, n: int, p: float) -> np.ndarray:
    """rho (instances, rows, columns as 2n axes): (1 - p) rho + p times 1/2 on the site, by its four Paulis."""
    out = (1 - 3 * p / 4) * rho
    for letter in (1, 2, 3):
        gate = np.tile(PAULI[letter], (len(rho), 1, 1))
        out = out + p / 4 * apply(apply(rho, gate, (site,)), gate.conj(), (n + site,))
    return out


def density(states: np.ndarray) -> np.ndarray:
    flat = states.reshape(len(states), -1)
    return np.einsum("mi,mj->mij", flat, flat.conj()).reshape((len(states),) + (2,) * (2 * (states.ndim - 1)))


def noisy_run(rho: np.ndarray, gates: list, n: int, p: float) -> np.ndarray:
    for pair, u in gates:
        rho = apply(apply(rho, u, pair), u.conj(), [n + site for site in pair])
        for site in pair:
            rho = depolarise(rho, site, n, p)
    return rho


def test_noisy_averages_of_sampled_density_matrices():
    """4 qubits, 6 layers, p = 0.1, 300 circuits, 4 sigma."""
    n, depth, circuits = 4, 6, 300
    gates = draw_gates(n, depth, circuits, np.random.default_rng(6), haar(4))
    start = zeros(n, circuits)
    psi = start
    for pair, u in gates:
        psi = apply(psi, u, pair)
    psi = psi.reshape(circuits, 16)
    ideal = np.abs(psi) ** 2
    xeb, fidelity, whole = noisy(n, depth, 0.1)
    rho = noisy_run(density(start), gates, n, 0.1).reshape(circuits, 16, 16)
    p = np.einsum("mii->mi", rho).real
    assert_mean(16 * (ideal * p).sum(axis=1) - 1, xeb)
    assert_mean(np.einsum("mi,mij,mj->m", psi.conj(), rho, psi).real, fidelity)
    assert_mean((np.abs(rho) ** 2).sum(axis=(1, 2)), whole)


def test_without_noise_nothing_is_lost_and_with_all_of_it_nothing_is_left():
    assert_allclose(noise.fidelity(7, 9, 0.0), 1, rtol=1e-12)
    assert_allclose(purity.pattern_purity(7, range(7), 9, noise=0.0), 1, rtol=1e-12)
    assert_allclose(output.linear_xeb(7, 9, noise=0.0), output.linear_xeb(7, 9), rtol=1e-12)
    assert_allclose(noise.fidelity(6, 2, 1.0)[1:], 1 / 64, rtol=1e-12)
    assert_allclose(output.linear_xeb(6, 2, noise=1.0)[1:], 0, atol=1e-12)


EFFECTIVE = {
    (8, 8): (0.715, 0.934),
    (8, 16): (0.892, 0.965),
    (10, 20): (0.914, 0.972),
    (12, 24): (0.932, 0.977),
    (14, 28): (0.945, 0.981),
}


@pytest.mark.parametrize(("case", "shares"), EFFECTIVE.items())
def test_share_of_errors_that_count(case, shares):
    """Cross-entropy at p = 0.001, fidelity to first order, over independent errors; to the digits recorded."""
    found = [noise.effective_share(*case, 0.00075), noise.effective_share(*case, 1e-6, quantity="fidelity")]
    assert_allclose(found, shares, atol=6e-4)


def test_late_and_early_errors_count_less():
    """8 sites, 8 layers: 0.685 .753 .766 .780 .763 .744 .657 .583 by layer."""
    found = [noise.effective_share(8, 8, 0.00075, layer=layer) for layer in range(1, 9)]
    assert_allclose(found, [0.685, 0.753, 0.766, 0.780, 0.763, 0.744, 0.657, 0.583], atol=6e-4)


def test_normalised_cross_entropy_exceeds_fidelity_in_shallow_circuits():
    """8 qubits, 8 layers, p = 0.01: 0.744 against 0.677, and 0.656 if every error took all."""
    p = 0.01
    ratio = output.linear_xeb(8, 8, noise=p)[-1] / output.linear_xeb(8, 8)[-1]
    assert_allclose([ratio, noise.fidelity(8, 8, p)[-1]], [0.744, 0.677], atol=1e-3)
    assert_allclose((1 - 0.75 * p) ** noise.location_count(8, 8), 0.656, atol=5e-4)


@pytest.mark.parametrize(
    ("n", "depth", "count", "counted"), [(4, 4, 24, 19.880), (6, 4, 40, 33.710), (6, 8, 80, 72.054)]
)
def test_places_of_error_that_count_in_an_echo(n, depth, count, counted):
    found = noise.echo_locations(n, depth)
    assert found[0] == count
    assert_allclose(found[1], counted, atol=6e-4)


def test_noisy_echo_of_sampled_density_matrices():
    """4 qubits, 4 layers, error 0.001, 100 circuits: 0.98032 to 5e-4; at 0.02 the exponential still holds to 0.01."""
    gates = draw_gates(4, 4, 100, np.random.default_rng(9), haar(4))
    back = [(pair, u.conj().swapaxes(1, 2)) for pair, u in reversed(gates)]
    for error, tolerance in ((0.001, 5e-4), (0.02, 0.01)):
        rho = noisy_run(density(zeros(4, 100)), gates + back, 4, 4 / 3 * error)
        returned = rho.reshape(100, -1)[:, 0].real.mean()
        assert_allclose(returned, noise.noisy_echo(4, 4, error), atol=tolerance)
    assert_allclose(noise.noisy_echo(4, 4, 0.001), 0.98032, atol=2e-5)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: output.scaled_collisions(34, 2), "n_qubits: found 34; allowed: a whole number from 2 to 32"),
        (lambda: output.anticoncentration_depth(8, over_haar=1), "over_haar: found 1; allowed: a number above 1"),
        (lambda: output.anticoncentration_depth(8, over_haar=1.01, most=5), "over_haar: found 1.01; allowed: above"),
        (lambda: frame_potential.frame_potential_k2(6, 0), "depth: found 0; allowed: a whole number, 1 or more"),
        (lambda: frame_potential.frame_potential_k2(22, 2), "n_qubits: found 22; allowed: a whole number from 2 to 20"),
        (lambda: noise.effective_share(6, 4, 0.8), "error: found 0.8; allowed: a probability above 0 and below 3/4"),
        (lambda: noise.effective_share(6, 4, 0.1, layer=5), "layer: found 5; allowed: a whole number from 1 to 4"),
        (lambda: noise.effective_share(6, 4, 0.1, quantity="xeb"), "quantity: found 'xeb'; allowed: linear_xeb"),
        (lambda: noise.noisy_echo(6, 4, -0.1), "error: found -0.1; allowed: a number from 0 to 0.75"),
    ],
)
def test_impossible_sizes_are_refused_in_words(call, message):
    with pytest.raises(InputError) as error:
        call()
    assert message in str(error.value)

"""Haar references against published numbers and against states and unitaries sampled with scipy."""

from __future__ import annotations

from fractions import Fraction
from itertools import product

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sampled_brickwork import PAULI, assert_mean, choi, entropies, haar, otocs, pauli_at, purities
from scipy.stats import unitary_group

from rcbench.errors import InputError
from rcbench.reference import fidelity, spectrum
from rcbench.reference import haar as reference

BITS = np.log(2)


def haar_states(n: int, instances: int, seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    states = rng.normal(size=(instances, 2**n)) + 1j * rng.normal(size=(instances, 2**n))
    return (states / np.linalg.norm(states, axis=1, keepdims=True)).reshape((instances,) + (2,) * n)


STATES = {4: haar_states(4, 4000, 1), 6: haar_states(6, 4000, 2), 8: haar_states(8, 500, 3)}


@pytest.mark.parametrize(
    ("n_region", "n", "value"), [(1, 4, 10 / 17), (3, 6, 16 / 65), (4, 8, 32 / 257), (2, 6, 4 / 13)]
)
def test_mean_purity_is_that_of_lubkin(n_region, n, value):
    """Lubkin, J. Math. Phys. 19, 1028 (1978): (d_A + d_B)/(d_A d_B + 1); 0.58824, 0.24615, 0.12451. 4 sigma."""
    assert_allclose(reference.purity(n_region, n), value, rtol=1e-14)
    assert_mean(purities(STATES[n], range(n_region)), value)


@pytest.mark.parametrize(("n_region", "n", "value"), [(2, 6, 4.095e-4), (3, 6, 4.249e-4), (4, 8, 2.947e-5)])
def test_purity_varies_between_states_as_scott_and_caves_found(n_region, n, value):
    """Scott and Caves, J. Phys. A 36, 9553 (2003). Sampled variance of 4000 states within 10 % (4 sigma)."""
    assert_allclose(reference.purity_variance(n_region, n), value, rtol=2e-4)
    if n == 6:
        assert_allclose(purities(STATES[n], range(n_region)).var(), value, rtol=0.1)


@pytest.mark.parametrize(
    ("n_region", "n", "bits"), [(1, 4, 0.8662), (2, 6, 1.8314), (3, 6, 2.2918), (4, 8, 3.2819)]
)  # fmt: skip
def test_mean_entropy_is_that_of_page(n_region, n, bits):
    """Page, Phys. Rev. Lett. 71, 1291 (1993). 4 sigma."""
    value = reference.vonneumann_entropy(n_region, n)
    assert_allclose(value / BITS, bits, atol=6e-5)
    assert_allclose(reference.vonneumann_entropy(n - n_region, n), value, rtol=1e-14)
    assert_mean(entropies(STATES[n], range(n_region)), value)


def test_page_entropy_of_two_qubits_is_one_third_of_a_nat_and_large_halves_lack_one_half():
    """Sum of 1/k for k = 3, 4 less 1/4; leading form ln d_A - d_A/(2 d_B)."""
    assert_allclose(reference.vonneumann_entropy(1, 2), 1 / 3, rtol=1e-12)
    assert_allclose(reference.vonneumann_entropy(500, 1000), 500 * BITS - 0.5, rtol=1e-12)
    assert reference.vonneumann_entropy(0, 7) == pytest.approx(0, abs=1e-14)


@pytest.mark.parametrize(
    ("n_region", "n", "annealed", "second"), [(1, 4, 0.7655, 0.7735), (3, 6, 2.0224, 2.0274), (4, 8, 3.0056, 3.0070)]
)  # fmt: skip
def test_mean_renyi2_entropy_of_states_is_the_second_order_value(n_region, n, annealed, second):
    """Expansion about Lubkin's mean with Scott and Caves' variance, in bits; sampled within 0.004 bits."""
    assert_allclose(reference.renyi2_entropy(n_region, n, annealed=True) / BITS, annealed, atol=6e-5)
    assert_allclose(reference.renyi2_entropy(n_region, n) / BITS, second, atol=6e-5)
    sampled = -np.log2(purities(STATES[n], range(n_region))).mean()
    assert_allclose(sampled, second, atol=4e-3)
    assert sampled > annealed  # Jensen


@pytest.mark.parametrize(
    ("n", "bits", "annealed"), [(4, -0.5276, -0.2002), (8, -2.0148, -1.3442), (12, -3.8810, -3.0891)]
)
def test_tripartite_information_of_four_quarters(n, bits, annealed):
    """4 S(n/4) - 3 S(n/2) with Page's mean; Renyi-2 with Lubkin's."""
    quarter = n // 4
    assert_allclose(reference.tmi_vonneumann(quarter, quarter, quarter, n) / BITS, bits, atol=6e-5)
    assert_allclose(reference.tmi_renyi2(quarter, quarter, quarter, n, annealed=True) / BITS, annealed, atol=6e-5)


@pytest.mark.parametrize("sizes", [(2, 2, 2), (1, 2, 3)])
def test_tripartite_information_of_sampled_states(sizes):
    """4 sigma, 500 Haar states of 8 qubits; the three regions need not be equal nor fill the system."""
    ends = np.cumsum((0, *sizes))
    a, b, c = (list(range(ends[i], ends[i + 1])) for i in range(3))
    signs = [(a, 1), (b, 1), (c, 1), (a + b, -1), (b + c, -1), (a + c, -1), (a + b + c, 1)]
    states = STATES[8]
    assert_mean(sum(sign * entropies(states, part) for part, sign in signs), reference.tmi_vonneumann(*sizes, 8))
    renyi = sum(sign * -np.log(purities(states, part)) for part, sign in signs)
    assert abs(renyi.mean() - reference.tmi_renyi2(*sizes, 8)) < 4 * renyi.std() / np.sqrt(len(states)) + 1e-3


def test_large_haar_states_have_the_known_offsets():
    """-(n/2) ln 2 + 3/2 nats and + 3 ln 2 (Renyi-2); a pure state cut in three has none."""
    assert_allclose(reference.tmi_vonneumann(10, 10, 10, 40) + 20 * BITS, 1.5, atol=1e-4)
    assert_allclose(reference.tmi_renyi2(10, 10, 10, 40) + 20 * BITS, 3 * BITS, atol=1e-4)
    assert_allclose(reference.tmi_vonneumann(2, 3, 4, 9), 0, atol=1e-12)


UNITARIES = {n: haar(2**n)(count, np.random.default_rng(10 + n)) for n, count in ((2, 2000), (3, 2000), (4, 400))}


@pytest.mark.parametrize(
    ("n", "a", "c", "value"), [(2, 1, 1, 2 / 5), (4, 2, 2, 2 / 17), (4, 1, 3, 37 / 340), (6, 3, 3, 2 / 65)]
)  # fmt: skip
def test_choi_purity_of_haar_unitaries(n, a, c, value):
    """Hosur, Qi, Roberts and Yoshida, JHEP 02 (2016) 004: 2/5, 2/17, 0.10882, 0.03077. 4 sigma."""
    assert_allclose(reference.operator_purity(a, c, n), value, rtol=1e-12)
    if n in UNITARIES:
        region = [*range(c), *range(n, n + a)]
        assert_mean(purities(choi(UNITARIES[n]), region), value)


@pytest.mark.parametrize(
    ("n", "size", "bits", "bound"), [(4, 2, -2.1749, -4), (4, 1, -1.1499, -2), (6, 3, -4.0447, -6), (6, 1, -1.1899, -2)]
)  # fmt: skip
def test_operator_tripartite_information_of_haar_unitaries(n, size, bits, bound):
    """Annealed Renyi-2 in bits; Hosur et al., arXiv:1511.04021. The bound is of that paper too."""
    assert_allclose(reference.operator_tmi_renyi2(size, size, n) / BITS, bits, atol=6e-5)
    assert_allclose(reference.operator_tmi_bound(size, size, n) / BITS, bound, atol=1e-12)


def test_operator_tripartite_information_of_sampled_unitaries():
    """n - S_AC - S_AD at 4 qubits: Renyi-2 -2.180 and von Neumann -2.681 bits at halves, to 0.02 bits."""
    state, inputs = choi(UNITARIES[4]), [4, 5]
    parts = [[*inputs, 0, 1], [*inputs, 2, 3]]
    renyi = 4 + sum(np.log2(purities(state, part)) for part in parts)
    neumann = 4 - sum(entropies(state, part) for part in parts) / BITS
    assert_allclose(renyi.mean(), -2.180, atol=0.02)
    assert_allclose(renyi.mean() * BITS, reference.operator_tmi_renyi2(2, 2, 4), atol=0.02)
    assert_allclose(neumann.mean(), -2.6814, atol=0.02)
    assert neumann.min() > reference.operator_tmi_bound(2, 2, 4) / BITS


def test_operator_tripartite_information_has_the_known_limits():
    assert_allclose(reference.operator_tmi_renyi2(20, 20, 40), -38 * BITS, atol=1e-6)
    assert_allclose(reference.operator_tmi_renyi2(1, 1, 40), np.log(7 / 16), atol=1e-6)
    assert_allclose(reference.operator_tmi_halves(6) / BITS, -4.5812, atol=0.03)  # sampled at 6 qubits


@pytest.mark.parametrize(("n", "a", "d"), [(3, 1, 1), (3, 2, 1), (4, 1, 2)])
def test_average_otoc_is_the_choi_purity_for_every_unitary(n, a, d):
    """Average over all Paulis on input A and output D, identities included; Yoshida and Kitaev, arXiv:1710.03363."""
    u = UNITARIES[n][:1]
    paulis = {size: list(product(range(4), repeat=size)) for size in (a, d)}

    def operator(letters, first):
        out = np.eye(1)
        for site in range(n):
            out = np.kron(out, PAULI[letters[site - first]] if first <= site < first + len(letters) else np.eye(2))
        return out

    values = [otocs(u, operator(w, n - d), operator(v, 0))[0] for v in paulis[a] for w in paulis[d]]
    c = n - d
    purity = purities(choi(u), [*range(c), *range(n, n + a)])[0]
    assert_allclose(np.mean(values), reference.average_otoc(purity, a, c, n), atol=1e-12)


def test_tripartite_information_follows_from_two_average_otocs():
    """I3 = 2 a ln 2 + ln Delta(A, C) + ln Delta(A, D), exactly; Hosur et al., arXiv:1511.04021."""
    state = choi(UNITARIES[4][:1])
    p_ac, p_ad = purities(state, [4, 0, 1, 2])[0], purities(state, [4, 3])[0]
    # C holds three outputs and D one; the average over D is the purity of A with C, and the other way round
    deltas = [reference.average_otoc(p_ac, 1, 3, 4), reference.average_otoc(p_ad, 1, 1, 4)]
    assert_allclose(2 * BITS + np.log(deltas).sum(), 4 * BITS + np.log(p_ac) + np.log(p_ad), atol=1e-12)


@pytest.mark.parametrize("n", [2, 3])
def test_otoc_of_haar_unitaries(n):
    """-1/(d^2 - 1); Roberts and Yoshida, JHEP 04 (2017) 121. 4 sigma, 2000 unitaries; spread sqrt(2)/d."""
    values = otocs(UNITARIES[n], pauli_at(1, 0, n), pauli_at(3, n - 1, n))
    assert_mean(values, reference.otoc(n))
    assert reference.otoc(n) == -1 / (4**n - 1)
    assert_allclose(values.std() / reference.otoc_spread(n), 1.1 if n == 2 else 1.0, atol=0.1)


def test_otoc_of_any_two_operators_with_haar_unitaries():
    """The general formula, for operators with traces and for ones that are not Hermitian. 4 sigma."""
    rng = np.random.default_rng(5)
    w, v = (rng.normal(size=(2, 4, 4)) + 1j * rng.normal(size=(2, 4, 4))) / 2
    u = haar(4)(20000, rng)
    evolved = u.conj().swapaxes(1, 2) @ w @ u @ v
    samples = np.einsum("mij,mji->m", evolved, evolved) / 4
    value = reference.otoc_of(w, v)
    assert_mean(samples.real, value.real)
    assert_mean(samples.imag, value.imag)
    assert_allclose(reference.otoc_of(pauli_at(1, 0, 2), pauli_at(3, 1, 2)), reference.otoc(2), atol=1e-14)
    assert_allclose(reference.otoc_of(np.eye(4), v), np.trace(v @ v) / 4, atol=1e-12)


def test_one_error_leaves_one_part_in_d_plus_one_of_a_scrambled_state():
    """|<psi|P|psi>|^2 averages 1/(D + 1) = 1/65; <Z>^2 and <ZZ>^2 alike. 4 sigma."""
    p = np.abs(STATES[6].reshape(-1, 2, 2, 16)) ** 2
    signs = np.array([1, -1])
    assert_mean(np.einsum("mabx,a->m", p, signs) ** 2, fidelity.after_pauli(64))
    assert_mean(np.einsum("mabx,a,b->m", p, signs, signs) ** 2, fidelity.after_pauli(64))


def test_average_fidelity_follows_from_entanglement_fidelity():
    """Horodecki, Phys. Rev. A 60, 1888 (1999), at d = 8 with a random error. 4 sigma, 4000 input states."""
    rng = np.random.default_rng(8)
    h = rng.normal(size=(8, 8)) + 1j * rng.normal(size=(8, 8))
    values, vectors = np.linalg.eigh(h + h.conj().T)
    error = vectors @ np.diag(np.exp(0.05j * values)) @ vectors.conj().T
    entanglement = abs(np.trace(error)) ** 2 / 64
    states = haar_states(3, 4000, 9).reshape(-1, 8)
    sampled = np.abs(np.einsum("mi,ij,mj->m", states.conj(), error, states)) ** 2
    assert_mean(sampled, fidelity.average(entanglement, 8))
    assert_allclose(fidelity.entanglement(fidelity.average(entanglement, 8), 8), entanglement, atol=1e-14)


def test_white_noise_gives_the_elementary_values():
    """rho = s |psi><psi| + (1 - s) 1/D at D = 64, s = 0.37, built in full."""
    psi, s = STATES[6][0].ravel(), 0.37
    rho = s * np.outer(psi, psi.conj()) + (1 - s) * np.eye(64) / 64
    assert_allclose((psi.conj() @ rho @ psi).real, fidelity.white_noise_fidelity(s, 64), atol=1e-12)
    assert_allclose(np.trace(rho @ rho).real, fidelity.white_noise_purity(s, 64), atol=1e-12)
    p = np.abs(psi) ** 2
    ideal, noisy = 64 * p @ p - 1, 64 * p @ np.diag(rho).real - 1
    assert_allclose(noisy / ideal, fidelity.white_noise_xeb(s, 64) / fidelity.white_noise_xeb(1, 64), atol=1e-12)


def test_spectra_of_circular_ensembles():
    """Haake et al., J. Phys. A 29, 3641 (1996), 4 sigma; Atas et al., PRL 110, 084101 (2013), within 0.012."""
    phases = np.angle(np.linalg.eigvals(unitary_group.rvs(16, size=1000, random_state=np.random.default_rng(1))))
    times = np.array([1, 2, 4, 8, 16, 24])
    for t, value in zip(times, spectrum.form_factor(times, 16), strict=True):
        assert_mean(np.abs(np.exp(1j * t * phases).sum(axis=1)) ** 2, value)
    u = unitary_group.rvs(64, size=80, random_state=np.random.default_rng(2))
    unitary = np.angle(np.linalg.eigvals(u))
    orthogonal = np.angle(np.linalg.eigvals(u.swapaxes(1, 2) @ u))
    poisson = np.random.default_rng(3).uniform(0, 2 * np.pi, (200, 64))
    for name, sample in (("unitary", unitary), ("orthogonal", orthogonal), ("poisson", poisson)):
        assert_allclose(spectrum.gap_ratio(sample), spectrum.GAP_RATIO[name], atol=0.012)
    assert_allclose(spectrum.GAP_RATIO["poisson"], 0.3863, atol=5e-5)


def test_scrambled_operators_have_size_three_quarters():
    """3.01176 at 4 sites and 6.00009 at 8; binomial(n, 3/4) without size 0."""
    assert_allclose([reference.operator_size(4), reference.operator_size(8)], [3.01176, 6.00009], atol=6e-6)
    assert reference.operator_size(4) == float(Fraction(256, 85))
    for n in (1, 4, 9):
        p = reference.operator_size_distribution(n)
        assert_allclose([p.sum(), p @ np.arange(n + 1)], [1, reference.operator_size(n)], rtol=1e-12)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: reference.purity(5, 4), "n_region: found 5; allowed: a whole number from 0 to 4"),
        (lambda: reference.purity(1, 1001), "n_qubits: found 1001; allowed: a whole number from 1 to 1000"),
        (lambda: reference.purity(1.5, 4), "n_region: found 1.5; allowed: a whole number from 0 to 4"),
        (lambda: reference.tmi_renyi2(2, 2, 2, 5), "n_a + n_b + n_c: found 6; allowed: at most n_qubits = 5"),
        (lambda: reference.operator_tmi_halves(5), "n_qubits: found 5; allowed: an even number, for equal halves"),
        (lambda: reference.otoc_of(np.eye(2), np.eye(4)), "two square matrices of the same size"),
        (lambda: fidelity.average(1.2, 4), "entanglement_fidelity: found 1.2; allowed: a number from 0 to 1"),
        (lambda: fidelity.entanglement(0.1, 4), "average_fidelity: found 0.1; allowed: a number from 0.2 to 1"),
        (lambda: spectrum.form_factor(np.array([0]), 4), "times: found [0]; allowed: whole numbers of periods"),
        (lambda: spectrum.gap_ratio(np.zeros(2)), "three phases or more"),
    ],
)
def test_impossible_sizes_are_refused_in_words(call, message):
    with pytest.raises(InputError) as error:
        call()
    assert message in str(error.value)

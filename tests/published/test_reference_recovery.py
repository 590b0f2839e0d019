"""Hayden-Preskill references against the decoder simulated in full."""

from __future__ import annotations

import numpy as np
import pytest
import stim
from numpy.testing import assert_allclose
from sampled_brickwork import assert_mean, choi, haar, otocs, pauli_at, purities

from rcbench.errors import InputError
from rcbench.reference import haar as haar_values
from rcbench.reference import recovery as reference


def decode(u: np.ndarray, a: int, d: int) -> tuple[float, float]:
    """(P, F) of the decoder, from its amplitudes: message on the first a qubits, the last d outputs projected.

    Reference R and message A, rest B and its copy B', copy A' and its reference R', all in Bell pairs; U on AB, U* on
    A'B'.
    """
    n = u.shape[0].bit_length() - 1
    da, db, dd, dc = 2**a, 2 ** (n - a), 2**d, 2 ** (n - d)
    m = u.reshape(dc, dd, da, db)  # out C, out D; in A, in B
    both = np.einsum("cdrb,CDsb->rscCdD", m, m.conj()) / (da * np.sqrt(db))
    projected = np.einsum("rscCdd->rscC", both) / np.sqrt(dd)
    success = np.sum(np.abs(projected) ** 2)
    paired = np.einsum("rrcC->cC", projected) / np.sqrt(da)
    return float(success), float(np.sum(np.abs(paired) ** 2) / success)


@pytest.mark.parametrize(("n", "a", "d"), [(3, 1, 1), (4, 1, 2), (4, 2, 1)])
def test_projection_probability_is_the_average_otoc_and_fixes_the_fidelity(n, a, d):
    """P = Delta(A, D) and P F = 1/d_A^2 for every unitary; Yoshida and Kitaev, arXiv:1710.03363."""
    for u in haar(2**n)(3, np.random.default_rng(n)):
        p, f = decode(u, a, d)
        purity = purities(choi(u[None]), [*range(n - d), *range(n, n + a)])[0]
        assert_allclose(p, haar_values.average_otoc(purity, a, n - d, n), atol=1e-12)
        assert_allclose(f, reference.recovery_fidelity(p, a), atol=1e-12)
    p, f = decode(np.eye(2**n), n - 1, n - 1) if a == d else decode(np.eye(2**n), a, 1)
    assert_allclose(p * f, 4.0 ** -(n - 1 if a == d else a), atol=1e-12)


def test_the_identity_recovers_nothing():
    p, f = decode(np.eye(8), 1, 1)
    assert_allclose([p, f], [1, 1 / 4], atol=1e-12)
    assert reference.recovery_fidelity(1, 1) == 1 / 4
    assert reference.teleported_fidelity(1 / 4, 1) == 1 / 2


@pytest.mark.parametrize(
    ("n", "a", "d", "value"), [(3, 1, 1, 3 / 7), (4, 1, 1, 0.435294), (4, 1, 2, 0.294118), (5, 2, 2, 0.12023)]
)  # fmt: skip
def test_mean_projection_probability_of_haar_unitaries(n, a, d, value):
    """Exact mean, from Hosur et al., arXiv:1511.04021. 4 sigma, 100 unitaries."""
    assert_allclose(reference.projection_probability(a, d, n), value, atol=6e-6)
    samples = np.array([decode(u, a, d)[0] for u in haar(2**n)(100, np.random.default_rng(20 + n + d))])
    assert_mean(samples, reference.projection_probability(a, d, n))
    assert_allclose(
        reference.projection_probability(a, d, n),
        haar_values.average_otoc(haar_values.operator_purity(a, n - d, n), a, n - d, n),
        rtol=1e-12,
    )


def spreading_clifford() -> np.ndarray:
    """A three-qubit Clifford that carries each of the nine one-qubit Paulis to a product on all three, by search."""
    moves = [f"{gate} {q}" for q in range(3) for gate in "HS"] + ["CZ 0 1", "CZ 1 2", "CZ 0 2"]
    rng = np.random.default_rng(0)
    while True:
        tableau = stim.Circuit("\n".join(moves[choice] for choice in rng.integers(0, 9, 24))).to_tableau()
        if all(
            output(q).weight == 3 for q in range(3) for output in (tableau.x_output, tableau.y_output, tableau.z_output)
        ):
            return tableau.to_unitary_matrix(endian="big").astype(complex)


def test_best_recovery_and_the_swap_that_looks_like_it():
    """Landsman et al., Nature 567, 61 (2019): P = 1/4, F = 1, OTOCs average -1/3; a SWAP of A into D gives the same."""
    u = spreading_clifford()
    assert_allclose(decode(u, 1, 1), (1 / 4, 1), atol=1e-6)  # stim gives single precision
    values = [otocs(u[None], pauli_at(w, 2, 3), pauli_at(v, 0, 3))[0] for w in (1, 2, 3) for v in (1, 2, 3)]
    assert_allclose(np.mean(values), -1 / 3, atol=1e-6)
    swap = np.eye(8).reshape((2,) * 6).transpose(2, 1, 0, 3, 4, 5).reshape(8, 8)
    assert_allclose(decode(swap, 1, 1), (1 / 4, 1), atol=1e-12)
    assert_allclose(reference.recovery_fidelity(1 / 4, 1), 1, atol=1e-15)


@pytest.mark.parametrize(("survival", "noise"), [(1, 1), (0.7, 0.775), (0.3, 0.475), (0, 0.25)])
def test_decoherence_lowers_the_noise_parameter(survival, noise):
    """Yoshida and Yao, PRX 9, 011006 (2019): white noise on all outputs, density matrix of 3 qubits, one read."""
    u = haar(8)(1, np.random.default_rng(31))[0].reshape(4, 2, 2, 4)
    state = np.einsum("cdrb,CDsb->rscCdD", u, u.conj()).reshape(4, 16, 4) / 4  # (R R', C C', D D')
    rho = np.einsum("rcd,sCD->rcdsCD", state, state.conj())
    references = np.einsum("rcdscd->rs", rho)
    mixed = np.einsum("rs,cC,dD->rcdsCD", references, np.eye(16) / 16, np.eye(4) / 4)
    pair = np.array([1, 0, 0, 1]) / np.sqrt(2)
    left = np.einsum("rcdscD,d,D->rs", survival * rho + (1 - survival) * mixed, pair, pair)
    p, both = np.trace(left).real, (pair @ left @ pair).real
    assert_allclose(reference.noise_parameter(survival, 1), noise, atol=1e-12)
    assert_allclose(4 * both, noise, atol=1e-12)
    ideal = decode(u.reshape(8, 8), 1, 1)[0]
    assert_allclose(p, reference.noisy_projection(ideal, survival, 1), atol=1e-12)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: reference.recovery_fidelity(0.2, 1), "projection: found 0.2; allowed: a number from 0.25 to 1"),
        (lambda: reference.projection_probability(4, 1, 3), "n_message: found 4; allowed: a whole number from 1 to 3"),
        (lambda: reference.noise_parameter(-0.1, 1), "survival: found -0.1; allowed: a number from 0 to 1"),
    ],
)
def test_impossible_values_are_refused_in_words(call, message):
    with pytest.raises(InputError) as error:
        call()
    assert message in str(error.value)

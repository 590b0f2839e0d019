"""Exact diagonalisation against qiskit's Pauli operators and scipy's exponentials."""

from __future__ import annotations

import numpy as np
import pytest
from qiskit.quantum_info import SparsePauliOp
from scipy.linalg import expm

from rcbench.errors import InputError
from rcbench.reference.hamiltonian import diagonalise, hamiltonian

N = 5
COUPLERS = [(0, 1), (1, 2), (2, 3), (3, 4), (0, 4)]
RNG = np.random.default_rng(4)
FACTS = {"xx": 0.7, "yy": -0.4, "zz": 1.1, "x": RNG.normal(size=N), "z": RNG.normal(size=N)}


def by_qiskit() -> np.ndarray:
    terms = [(2 * letter, [a, b], FACTS[2 * letter.lower()]) for a, b in COUPLERS for letter in "XYZ"]
    terms += [(letter, [j], FACTS[letter.lower()][j]) for j in range(N) for letter in "XZ"]
    # qiskit's qubit 0 is the least significant bit
    flipped = [(letters, [N - 1 - j for j in sites], value) for letters, sites, value in terms]
    return SparsePauliOp.from_sparse_list(flipped, num_qubits=N).to_matrix()


def test_the_matrix_is_that_of_qiskits_pauli_operators():
    assert np.abs(hamiltonian(N, COUPLERS, **FACTS) - by_qiskit()).max() < 1e-12


def test_evolution_is_the_exponential():
    matrix = hamiltonian(N, COUPLERS, **FACTS)
    state = RNG.normal(size=2**N) + 1j * RNG.normal(size=2**N)
    spectrum = diagonalise(matrix)
    found = spectrum.evolved(state, [0.0, 0.3, 2.0])
    for time, one in zip([0.0, 0.3, 2.0], found, strict=True):
        assert np.abs(one - expm(-1j * time * matrix) @ state).max() < 1e-10
    state /= np.linalg.norm(state)
    assert spectrum.energy(state) == pytest.approx(np.real(np.vdot(state, matrix @ state)))


@pytest.mark.parametrize(
    ("made", "message"),
    [
        (lambda: hamiltonian(13, []), "n_qubits: found 13; allowed: a whole number from 1 to 12"),
        (
            lambda: hamiltonian(3, [(0, 3)]),
            "couplers: found (0, 3); allowed: pairs of different qubits, 0 to 2",
        ),
        (lambda: hamiltonian(3, [], x=np.zeros(2)), "x: found (2,); allowed: one number, or 3 of them"),
        (lambda: diagonalise(np.eye(3)[:2]), "matrix: found (2, 3); allowed: a real symmetric matrix"),
    ],
)
def test_what_cannot_be_is_refused(made, message):
    with pytest.raises(InputError) as error:
        made()
    assert str(error.value) == message

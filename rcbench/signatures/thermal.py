"""Thermal values that a Hamiltonian's local expectation values approach, and pairs of inputs of equal energy.

Terms of H are as in `early_time`. Two orthogonal inputs of the same mean energy must end with the same local values,
those of the thermal state of that energy, while the overlap of the whole states stays zero.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.errors import InputError
from rcbench.signatures.early_time import Terms, dense_hamiltonian, read_terms
from rcbench.signatures.evolution import check_pauli
from rcbench.signatures.paulis import applied

MOST_PAIR_QUBITS = 20


@dataclass(frozen=True, slots=True, kw_only=True)
class ThermalState:
    """exp(-beta H) / Z of a given mean energy. beta: inverse temperature, negative above the middle of the spectrum."""

    beta: float
    energy: float
    energies: FloatArray
    basis: np.ndarray

    def expectation(self, pauli: str, site: int) -> float:
        """tr(P rho) of a Pauli at one site."""
        n = len(self.energies).bit_length() - 1
        check_pauli(site, pauli, n)
        turned = applied(np.ascontiguousarray(self.basis.T), site, pauli)
        values = np.sum(self.basis.T.conj() * turned, axis=1).real
        return float(_weights(self.energies, self.beta) @ values)


def _weights(energies: FloatArray, beta: float) -> FloatArray:
    exponent = -beta * energies
    weights = np.exp(exponent - exponent.max())
    return np.asarray(weights / weights.sum())


def thermal_state(terms: Terms, n_qubits: int, energy: float) -> ThermalState:
    """The thermal state whose mean energy is the one given, from the full spectrum, to 12 qubits.

    Raises:
        InputError: bad terms, more than 12 qubits, or an energy outside the spectrum.

    Source: eigenstate thermalization, Srednicki, Phys. Rev. E 50, 888 (1994) (from memory).
    """
    from scipy.optimize import brentq

    energies, basis = np.linalg.eigh(dense_hamiltonian(terms, n_qubits))
    low, high = float(energies[0]), float(energies[-1])
    if not low < energy < high:
        raise InputError("energy", energy, f"between the ends of the spectrum, {low:.6g} and {high:.6g}")
    most = 200 / max(high - low, 1e-12) * len(energies)

    def excess(beta: float) -> float:
        return float(_weights(energies, beta) @ energies) - energy

    reach = 1 / (high - low)
    while excess(reach) > 0 or excess(-reach) < 0:
        reach *= 2
        if reach > most:
            raise InputError("energy", energy, f"further from the ends of the spectrum, {low:.6g} and {high:.6g}")
    return ThermalState(
        beta=float(brentq(excess, -reach, reach, xtol=1e-12)), energy=energy, energies=energies, basis=basis
    )


def basis_energies(terms: Terms, n_qubits: int) -> FloatArray:
    """(D,) mean energy of every computational basis state: only products of Z count.

    Raises:
        InputError: bad terms, or more than 20 qubits.
    """
    if n_qubits > MOST_PAIR_QUBITS:
        raise InputError("n_qubits", n_qubits, f"at most {MOST_PAIR_QUBITS}")
    index = np.arange(2**n_qubits)
    out = np.zeros(2**n_qubits)
    for (x, z), strength in read_terms(terms, n_qubits).items():
        if x == 0:
            mask = sum(1 << (n_qubits - 1 - j) for j in range(n_qubits) if z >> j & 1)
            out += strength * (1 - 2.0 * (np.bitwise_count(index & mask) % 2))
    return out


def equal_energy_pair(terms: Terms, n_qubits: int, target: float = 0.0) -> tuple[str, str, float]:
    """Two basis states of the same mean energy, the closest to a target, as different as such a pair can be.

    Args:
        terms: H. n_qubits: to 20. target: energy wanted; 0 is the middle of the spectrum of traceless terms.
    Returns:
        Both bit strings, qubit 0 first, and their energy. Ties go to the pair that differs on most qubits, then to
        the smallest strings.
    Raises:
        InputError: bad terms, too many qubits, or no two basis states of the same energy.
    """
    energies = np.round(basis_energies(terms, n_qubits), 9)
    levels, counts = np.unique(energies, return_counts=True)
    shared = levels[counts > 1]
    if not len(shared):
        raise InputError("terms", f"{len(terms)} terms", "a Hamiltonian with two basis states of the same mean energy")
    level = float(shared[np.argmin(np.abs(shared - target))])
    states = np.flatnonzero(energies == level)
    distances = np.bitwise_count(states[0] ^ states[1:])
    second = int(states[1 + int(np.argmax(distances))])
    return format(int(states[0]), f"0{n_qubits}b"), format(second, f"0{n_qubits}b"), level

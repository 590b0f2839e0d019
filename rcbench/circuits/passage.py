"""How Paulis pass native two-qubit gates: T P T^-1 is a Pauli again, a product of one-qubit gates, or neither."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, IntArray
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import KINDS, N_QUBITS, UNITARY, gate_matrix

LETTERS = "IXYZ"
PAULIS: ComplexArray = np.stack([np.eye(2, dtype=np.complex128), *(gate_matrix(name) for name in "xyz")])
FLIPS = np.array([0, 1, 1, 0])  # whether each Pauli turns a bit over
_PAULI_ROWS = PAULIS.conj().reshape(4, 4).T
_LOCAL = 1e-9  # second Schmidt coefficient below which an operator counts as a product


@dataclass(frozen=True, slots=True, eq=False)
class Passage:
    """How Paulis pass one two-qubit gate T.

    Args:
        allowed: (k, 2) pairs of Paulis, as indices into LETTERS, for which T P T^-1 is a product.
        known: (4, 4) true for those pairs.
        after: (4, 4, 2, 2, 2) the two factors of T P T^-1; zero where it is no product.
        paulis: (4, 4, 2) which Paulis these factors are, -1 where they are none.
    """

    allowed: IntArray
    known: BoolArray
    after: ComplexArray
    paulis: IntArray

    @property
    def commuting(self) -> tuple[str, ...]:
        """The two-qubit Paulis that commute with every pair allowed: generators of errors that no frame turns over."""
        differ = [[int(a != b and a * b > 0) for b in range(4)] for a in range(4)]
        pairs = [(a, b) for a in range(4) for b in range(4) if (a, b) != (0, 0)]
        kept = [p for p in pairs if all((differ[p[0]][a] + differ[p[1]][b]) % 2 == 0 for a, b in self.allowed)]
        return tuple(LETTERS[a] + LETTERS[b] for a, b in kept)


@lru_cache(maxsize=4096)
def passage(name: str, parameters: tuple[float, ...] = ()) -> Passage:
    """How Paulis pass a native two-qubit gate."""
    gate = gate_matrix(name, *parameters)
    known = np.zeros((4, 4), dtype=np.bool_)
    after = np.zeros((4, 4, 2, 2, 2), dtype=np.complex128)
    for a in range(4):
        for b in range(4):
            factors = product_factors(gate @ np.kron(PAULIS[a], PAULIS[b]) @ gate.conj().T)
            if factors is not None:
                known[a, b], after[a, b] = True, np.stack(factors)
    return Passage(np.argwhere(known), known, after, pauli_index(after))


def product_factors(operator: ComplexArray) -> tuple[ComplexArray, ComplexArray] | None:
    """Unitaries a and b with (4, 4) operator = a x b up to phase, Paulis exact; None where there are none."""
    split = operator.reshape(2, 2, 2, 2).transpose(0, 2, 1, 3).reshape(4, 4)
    left, size, right = np.linalg.svd(split)
    if size[1] > _LOCAL * size[0]:
        return None
    return _clean(left[:, 0].reshape(2, 2)), _clean(right[0].reshape(2, 2))


def _clean(matrix: ComplexArray) -> ComplexArray:
    """A matrix of Frobenius norm 1 as a unitary; exactly a Pauli where it is one up to phase."""
    unitary = matrix * np.sqrt(2)
    overlap = np.abs(np.einsum("pij,ij->p", PAULIS.conj(), unitary)) / 2
    best = int(overlap.argmax())
    return np.asarray(PAULIS[best] if overlap[best] > 1 - _LOCAL else unitary)


def pauli_index(matrices: ComplexArray) -> IntArray:
    """(...) which Pauli each (..., 2, 2) unitary is up to phase, as an index into LETTERS; -1 where it is none."""
    overlap = np.abs(matrices.reshape(*matrices.shape[:-2], 4) @ _PAULI_ROWS) / 2
    return np.where(overlap.max(axis=-1) > 1 - _LOCAL, overlap.argmax(axis=-1), -1)


def unseen(circuit: Circuit) -> tuple[str, ...]:
    """Generators of two-qubit errors of this circuit's gates that no Pauli frame turns over; empty for cz and iswap."""
    rows = np.flatnonzero(UNITARY[circuit.kind] & (N_QUBITS[circuit.kind] == 2))
    gates = {(KINDS[circuit.kind[row]].name, circuit.row_parameters(int(row))) for row in rows}
    return tuple(sorted({pauli for name, parameters in gates for pauli in passage(name, parameters).commuting}))

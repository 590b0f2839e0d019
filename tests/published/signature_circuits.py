"""Circuits for the tests of signatures: nested brickworks of given gates, and the same Cliffords for stim."""

from __future__ import annotations

import numpy as np
import stim
from sampled_brickwork import wall
from scipy.stats import unitary_group

from rcbench.circuits.circuit import Circuit, CircuitBuilder


def add_matrix(builder: CircuitBuilder, matrix: np.ndarray, sites) -> None:
    entries = np.ascontiguousarray(matrix, dtype=complex).view(float).ravel()
    builder.add("matrix1" if len(sites) == 1 else "matrix2", list(sites), entries)


def brickworks(n: int, depths, seed: int) -> list[Circuit]:
    """Haar brickworks of one instance at several depths, nested; gates from scipy."""
    rng = np.random.default_rng(seed)
    gates = {
        (layer, pair): unitary_group.rvs(4, random_state=rng)
        for layer in range(1, max(depths) + 1)
        for pair in wall(n, layer)
    }
    return [from_gates(n, [(gates[layer, pair], layer, pair) for layer, pair in gates if layer <= d]) for d in depths]


def from_gates(n: int, gates) -> Circuit:
    """A circuit of (matrix, layer, sites), rising in layer."""
    builder = CircuitBuilder(n)
    before = 0
    for matrix, layer, sites in gates:
        if layer != before:
            builder.next_layer()
        before = layer
        add_matrix(builder, matrix, sites)
    return builder.build()


def products(n: int, seed: int, *, swaps: bool = False) -> Circuit:
    """Haar one-qubit gates, with a layer of swaps between them if asked."""
    rng = np.random.default_rng(seed)
    swap = np.eye(4)[[0, 2, 1, 3]]
    ones = [(unitary_group.rvs(2, random_state=rng), 1, (q,)) for q in range(n)]
    twos = [(swap, 2, (q, q + 1)) for q in range(0, n - 1, 2)] + [(swap, 3, (q, q + 1)) for q in range(1, n - 1, 2)]
    last = [(unitary_group.rvs(2, random_state=rng), 4, (q,)) for q in range(n)]
    return from_gates(n, ones + (twos if swaps else []) + last)


def clifford(n: int, depth: int, seed: int) -> tuple[Circuit, stim.Tableau]:
    """One brickwork of uniform two-qubit Cliffords (stim's own draw), as a circuit and as a tableau.

    stim seeds its draws from the system, so the Cliffords are made from a seeded list of gates: five layers of
    one-qubit gates and CZ mix any two qubits well enough for what is tested, signs and ranks of one instance.
    """
    rng = np.random.default_rng(seed)
    builder, text = CircuitBuilder(n), stim.Circuit()
    for layer in range(1, depth + 1):
        for pair in wall(n, layer):
            for _ in range(3):
                for site in pair:
                    for name in rng.choice(["h", "s", "x"], size=3):
                        builder.add(str(name), [site])
                        builder.next_layer()
                        text.append(str(name).upper(), [site])
                builder.add("cz", list(pair))
                builder.next_layer()
                text.append("CZ", list(pair))
    present = {t.value for instruction in text for t in instruction.targets_copy()}
    text.append("I", sorted(set(range(n)) - present))
    return builder.build(), text.to_tableau()


def gf2_rank(rows: np.ndarray) -> int:
    rows, rank = rows.astype(np.uint8) % 2, 0
    for column in range(rows.shape[1]):
        pivots = np.flatnonzero(rows[rank:, column])
        if not len(pivots):
            continue
        pivot = rank + pivots[0]
        rows[[rank, pivot]] = rows[[pivot, rank]]
        others = np.flatnonzero(rows[:, column])
        rows[others[others != rank]] ^= rows[rank]
        rank += 1
        if rank == len(rows):
            break
    return rank


def stabilizer_entropy(tableau: stim.Tableau, region) -> int:
    """Entropy in bits of a region of the tableau's state from |0..0>: rank of its generators there, less its size."""
    x = np.array([[tableau.z_output(k)[q] in (1, 2) for q in region] for k in range(len(tableau))])
    z = np.array([[tableau.z_output(k)[q] in (2, 3) for q in region] for k in range(len(tableau))])
    return gf2_rank(np.concatenate([x, z], axis=1)) - len(region)


def pauli_string(letters: dict[int, str], n: int) -> stim.PauliString:
    return stim.PauliString("".join(letters.get(q, "_") for q in range(n)))

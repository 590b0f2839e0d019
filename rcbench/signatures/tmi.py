"""Tripartite mutual information of states and of unitaries, in nats.

I3(A:B:C) = S_A + S_B + S_C - S_AB - S_BC - S_AC + S_ABC. Below zero, what A shares with B and C together is more than
what it shares with each: it sits in no part alone. For a unitary, A is a region of the inputs of its Choi state, C and
D are the two parts of its outputs. The order of the entropies is 1 for von Neumann and 2 for Renyi-2.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.errors import InputError
from rcbench.signatures.entropy import disjoint, renyi_entropy

Region = tuple[int, ...]


def equal_parts(n_qubits: int, count: int) -> tuple[Region, ...]:
    """Neighbouring regions of n_qubits, as equal as they can be, the larger ones first.

    Raises:
        InputError: fewer qubits than regions.
    """
    if not 1 <= count <= n_qubits:
        raise InputError("regions", f"{count} of {n_qubits} qubits", f"at least {count} qubits for {count} regions")
    size, larger = divmod(n_qubits, count)
    edges = [place * size + min(place, larger) for place in range(count + 1)]
    return tuple(tuple(range(first, last)) for first, last in pairwise(edges))


def quarters(n_qubits: int) -> tuple[Region, ...]:
    """Four neighbouring regions, as equal as they can be."""
    return equal_parts(n_qubits, 4)


def halves(n_qubits: int) -> tuple[Region, ...]:
    """Two neighbouring regions, as equal as they can be."""
    return equal_parts(n_qubits, 2)


def cuts(n_qubits: int) -> tuple[Region, ...]:
    """The regions 0 to x - 1 of every cut x of the qubits' own order."""
    return tuple(tuple(range(cut)) for cut in range(1, n_qubits))


NAMED = {"quarters": quarters, "halves": halves, "cuts": cuts}


def state_tmi(
    states: ComplexArray, a: Sequence[int], b: Sequence[int], c: Sequence[int], *, order: float = 1
) -> FloatArray:
    """I3(A:B:C) of pure states.

    Args:
        states: (batch, 2**n) or (2**n,) normalised amplitudes, qubit 0 the most significant bit.
        a, b, c: regions with no common qubit; the rest of the qubits is traced out.
        order: of the entropies, 1 or 2 as a rule.
    Returns:
        (batch,) nats. Zero for product states and for pairs of Bell states within regions; quarters of Haar states
        average `reference.haar.tmi_vonneumann`.
    Raises:
        InputError: regions that are empty or overlap.

    Source: Hosur, Qi, Roberts and Yoshida, JHEP 02 (2016) 004, arXiv:1511.04021.
    """
    n = np.atleast_2d(states).shape[1].bit_length() - 1
    one, two, three = disjoint(a, b, c, n_qubits=n)
    total = np.zeros(len(np.atleast_2d(states)))
    for sign, region in (
        (1, one), (1, two), (1, three),
        (-1, one + two), (-1, two + three), (-1, one + three),
        (1, one + two + three),
    ):  # fmt: skip
        total += sign * renyi_entropy(states, region, order)
    return total


def operator_tmi(choi: ComplexArray, a: Sequence[int], c: Sequence[int], *, order: float = 1) -> FloatArray:
    """I3(A:C:D) of unitaries: A a region of the inputs, C a region of the outputs, D the other outputs.

    All marginals are maximally mixed, so it is n ln 2 - S_AC - S_AD for every order.

    Args:
        choi: (batch, 4**n) or (4**n,) Choi states as `evolution.choi_states` gives them, outputs first.
        a, c: qubits 0 to n - 1 of the inputs and of the outputs; neither empty nor all of them.
        order: of the entropies, 1 or 2 as a rule.
    Returns:
        (batch,) nats from -2 ln 2 times the smallest of the four sizes to 0; 0 for products of one-qubit gates and
        for any order of swaps.
    Raises:
        InputError: regions that are empty, hold all qubits, or a qubit outside.

    Source: Hosur, Qi, Roberts and Yoshida, JHEP 02 (2016) 004, arXiv:1511.04021.
    """
    choi = np.atleast_2d(choi)
    total = choi.shape[1].bit_length() - 1
    if total % 2:
        raise InputError("choi", choi.shape, "states of n output and n input qubits")
    n = total // 2
    inputs, outputs = disjoint(a, n_qubits=n)[0], disjoint(c, n_qubits=n)[0]
    for name, region in (("inputs", inputs), ("outputs", outputs)):
        if len(region) == n:
            raise InputError(name, tuple(region), f"fewer than all {n} qubits, so that both parts hold one")
    rest = [qubit for qubit in range(n) if qubit not in outputs]
    held = [n + qubit for qubit in inputs]
    entropies = renyi_entropy(choi, held + outputs, order) + renyi_entropy(choi, held + rest, order)
    return np.asarray(n * np.log(2) - entropies)


def choi_of(unitaries: ComplexArray) -> ComplexArray:
    """Choi states (batch, D * D) of unitaries (batch, D, D) or (D, D), outputs first.

    Raises:
        InputError: matrices that are not square, or whose side is no power of 2.
    """
    side = unitaries.shape[-1]
    if unitaries.ndim < 2 or unitaries.shape[-2] != side or side & (side - 1):
        raise InputError("unitaries", unitaries.shape, "square matrices of side 2**n")
    states: ComplexArray = unitaries.reshape(-1, side * side) / np.sqrt(side).astype(unitaries.real.dtype)
    return states

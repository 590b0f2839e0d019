"""Out-of-time-order correlators F = <W(t) V W(t) V> with W(t) = U^dag W U, W and V Paulis on one qubit each.

    infinite_temperature_map   the mean over all states, exact, every site and letter of W at once; to 12 qubits
    typical_otoc               the same from a few random states, with its standard error; any size that fits
    state_otoc                 on one state: the quantity that a butterfly echo measures

F is 1 while W(t) and V commute, and tends to -1 / (D^2 - 1) in a Haar-random unitary. The OTOC of W(t) with V is
that of W with U V U^dag, so V is what spreads forward from its site as layers are added.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.circuits.circuit import Circuit
from rcbench.errors import InputError
from rcbench.randomness import Draw
from rcbench.signatures.evolution import Evolution, check_pauli, operators
from rcbench.signatures.paulis import applied, letter_index, pauli_weights, site_letters

FRONT_THRESHOLD = 1e-4  # 1 - F that counts as reached: far above rounding in single precision, far below any front


def otocs_of_weights(weights: FloatArray) -> FloatArray:
    """OTOC of an operator with every Pauli on every qubit, from its Pauli weights.

    Args:
        weights: (4,) * n as `paulis.pauli_weights` gives them.
    Returns:
        (n, 3) for W = X, Y, Z at each qubit: the share of strings that commute with W minus that of the others.
    """
    shares = site_letters(weights)
    commuting = shares[:, :1] + shares[:, 1:]
    return np.asarray(2 * commuting - 1)


def infinite_temperature_map(
    circuits: Sequence[Circuit],
    site: int,
    pauli: str = "Z",
    *,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
) -> FloatArray:
    """Space-time map of the OTOC at infinite temperature, (1/D) tr(W(t) V W(t) V), from the evolved operator.

    Args:
        circuits: the depths of one instance, or any other list of one size, at most 12 qubits.
        site, pauli: V, the operator that spreads.
        dtype, memory_limit, threads: as `engine.tree.walk`.
    Returns:
        (circuits, n, 3): W = X, Y, Z at each qubit. Exact to rounding: 1 outside the light cone.
    Raises:
        InputError: sizes that differ or are too large, a bad site or letter, or too little memory.

    Source: Roberts and Yoshida, JHEP 04 (2017) 121, arXiv:1610.04903; Nahum, Vijay and Haah, PRX 8, 021014 (2018).
    """
    out = np.empty((len(circuits), circuits[0].n_qubits if circuits else 0, 3))
    evolved = operators(circuits, site, pauli, dtype=dtype, memory_limit=memory_limit, threads=threads)
    for place, operator in evolved:
        out[place] = otocs_of_weights(pauli_weights(operator))
    return out


def zeros(n_qubits: int, dtype: str = "complex64") -> ComplexArray:
    """The state |0...0>."""
    state: ComplexArray = np.zeros(2**n_qubits, dtype=dtype)
    state[0] = 1
    return state


def random_state(n_qubits: int, draw: Draw, dtype: str = "complex64") -> ComplexArray:
    """A Haar-random state."""
    parts = draw.normal(2 * 2**n_qubits).reshape(2, -1)
    state = parts[0] + 1j * parts[1]
    out: ComplexArray = (state / np.linalg.norm(state)).astype(dtype)
    return out


def _echo(evolution: Evolution, state: ComplexArray, site: int, pauli: str) -> ComplexArray:
    """W(t)|state>."""
    return evolution.backward(applied(evolution.forward(state), site, pauli))


def _correlators(
    evolution: Evolution, state: ComplexArray, w: tuple[str, int], probes: Sequence[tuple[str, int]]
) -> Iterator[float]:
    """Re <state| W(t) V W(t) V |state> for every V."""
    left = _echo(evolution, state, w[1], w[0])
    for letter, site in probes:
        turned = applied(state, site, letter)
        overlap = np.vdot(state, turned)
        if abs(abs(overlap) - 1) < 1e-5 and abs(overlap.imag) < 1e-5:
            right = left * np.sign(overlap.real).astype(left.real.dtype)  # an eigenstate of V needs no second echo
        else:
            right = _echo(evolution, turned, w[1], w[0])
        yield float(np.vdot(left, applied(right, site, letter)).real)


def state_otoc(
    circuit: Circuit,
    butterflies: Sequence[tuple[str, int]],
    probes: Sequence[tuple[str, int]],
    state: ComplexArray | None = None,
    *,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
) -> FloatArray:
    """OTOC on one state, Re <psi| W(t) V W(t) V |psi>.

    On |0...0> with V = Z it is what a butterfly echo measures: <Z> at the probe after U, W, U^dag. One echo a
    butterfly where the state is an eigenstate of every V, one more for each V where it is not.

    Args:
        circuit: U. butterflies: (letter, qubit) of each W. probes: (letter, qubit) of each V.
        state: (D,) normalised amplitudes, |0...0> where None.
        dtype, memory_limit, threads: as `evolution.Evolution`.
    Returns:
        (butterflies, probes) from -1 to 1.
    Raises:
        InputError: a bad site or letter, a state of another size, or too little memory.

    Source: Mi et al., Science 374, 1479 (2021), arXiv:2101.08870.
    """
    n = circuit.n_qubits
    for letter, site in (*butterflies, *probes):
        check_pauli(site, letter, n)
    evolution = Evolution(circuit, dtype=dtype, memory_limit=memory_limit, threads=threads)
    start = zeros(n, dtype) if state is None else np.asarray(state, dtype=dtype)
    out = [list(_correlators(evolution, start, w, probes)) for w in butterflies]
    return np.array(out, dtype=np.float64).reshape(len(butterflies), len(probes))


def typical_otoc(
    circuit: Circuit,
    butterflies: Sequence[tuple[str, int]],
    probes: Sequence[tuple[str, int]],
    *,
    states: int = 4,
    seed: int = 0,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
) -> tuple[FloatArray, FloatArray]:
    """OTOC at infinite temperature from Haar-random states, where the operator is too large.

    Args:
        circuit, butterflies, probes: as `state_otoc`.
        states: random states, 2 or more; each costs an echo for each butterfly and each pair.
        seed: of the random states. dtype, memory_limit, threads: as `evolution.Evolution`.
    Returns:
        The mean (butterflies, probes), and its standard error: one state scatters by at most 1 / sqrt(D + 1), which
        is taken where the spread seen between so few states is smaller.
    Raises:
        InputError: fewer than two states, a bad site or letter, or too little memory.

    Source: typicality, Goldstein, Lebowitz, Tumulka and Zanghi, Phys. Rev. Lett. 96, 050403 (2006) (from memory).
    """
    if states < 2:
        raise InputError("states", states, "2 or more, so that their spread gives the error")
    n = circuit.n_qubits
    for letter, site in (*butterflies, *probes):
        check_pauli(site, letter, n)
    evolution = Evolution(circuit, dtype=dtype, memory_limit=memory_limit, threads=threads)
    found = np.empty((states, len(butterflies), len(probes)))
    for place in range(states):
        state = random_state(n, Draw(seed, "typical state", place), dtype)
        for row, w in enumerate(butterflies):
            found[place, row] = list(_correlators(evolution, state, w, probes))
    mean = found.mean(axis=0)
    # A Hermitian unit-norm-bounded observable scatters by sqrt((1 - F^2) / (D + 1)) at most, zero where F is 1
    bound = np.sqrt(np.clip(1 - mean**2, 0, None) / (2**n + 1))
    error = np.maximum(found.std(axis=0, ddof=1), bound) / np.sqrt(states)
    return mean, error


def light_cone_front(growth: FloatArray, site: int, threshold: float = FRONT_THRESHOLD) -> FloatArray:
    """How far an operator has reached in one instance, to the left and to the right of its site.

    Args:
        growth: (depths, n) 1 - F. site: where the operator began. threshold: 1 - F that counts as reached.
    Returns:
        (depths, 2) sites, 0 where it has not left its own.
    Raises:
        InputError: a site outside, or a threshold that is not above 0.
    """
    n = growth.shape[-1]
    if not 0 <= site < n:
        raise InputError("site", site, f"a qubit from 0 to {n - 1}")
    if not threshold > 0:
        raise InputError("threshold", threshold, "a number above 0")
    reached = growth > threshold
    distance = np.arange(n) - site
    left = np.where(reached, np.clip(-distance, 0, None), 0).max(axis=-1)
    right = np.where(reached, np.clip(distance, 0, None), 0).max(axis=-1)
    return np.stack([left, right], axis=-1).astype(np.float64)


def pick_letter(table: FloatArray, pauli: str) -> FloatArray:
    """One letter of a table whose last axis is X, Y, Z."""
    return np.asarray(table[..., letter_index(pauli) - 1])

"""Circuits simulated on their whole register, to distributions over their measured bits."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.circuits.circuit import Circuit
from rcbench.engine import memory, tree
from rcbench.engine.distribution import BLOCK, Distribution
from rcbench.engine.mixture import bytes_needed, probability_type, run_patterns
from rcbench.engine.noise import SOURCES, NoiseModel
from rcbench.engine.readout import flip, measured
from rcbench.engine.threads import Pool
from rcbench.engine.trajectories import NoisyProgram, Patterns, draw_patterns, noisy_program
from rcbench.engine.work import Work
from rcbench.randomness import Draw


def probabilities(state: ComplexArray) -> FloatArray:
    """(2**n,) squared magnitudes; nothing else of that size is made."""
    out = np.empty(len(state), dtype=probability_type(len(state).bit_length() - 1))
    for start, block in probability_blocks(state):
        out[start : start + len(block)] = block
    return out


def probability_blocks(state: ComplexArray) -> Iterator[tuple[int, FloatArray]]:
    """Squared magnitudes a block at a time, with where each block begins."""
    real = probability_type(len(state).bit_length() - 1)
    for start in range(0, len(state), BLOCK):
        block = state[start : start + BLOCK]
        yield start, np.square(block.real, dtype=real) + np.square(block.imag, dtype=real)


def measured_probabilities(state: ComplexArray, qubits: Sequence[int]) -> FloatArray:
    """(2**k,) distribution over the measured qubits, the first one most significant; few qubits take little memory."""
    n = len(state).bit_length() - 1
    outer = max(0, n - (BLOCK.bit_length() - 1))  # leading qubits, which a block holds fixed
    if len(qubits) == n or not outer:
        return measured(probabilities(state), qubits)
    kept = sorted(qubits)
    fixed, inner = [q for q in kept if q < outer], [q - outer for q in kept if q >= outer]
    sums = np.zeros((2 ** len(fixed), 2 ** len(inner)))
    for start, block in probability_blocks(state):
        row = 0
        for qubit in fixed:
            row = 2 * row + (start >> (n - 1 - qubit) & 1)
        sums[row] += measured(block, inner) if inner else block.sum(dtype=np.float64)
    return measured(sums.reshape(-1), [kept.index(qubit) for qubit in qubits])


def content_key(circuit: Circuit) -> str:
    """A text that is the same for circuits with the same rows."""
    digest = hashlib.sha256(str(circuit.n_qubits).encode())
    for array in (circuit.layer, circuit.kind, circuit.qubits, circuit.first):
        digest.update(np.ascontiguousarray(array, dtype="<i8").tobytes())
    digest.update(np.ascontiguousarray(circuit.parameters, dtype="<f8").tobytes())
    return digest.hexdigest()


@dataclass(frozen=True, slots=True)
class How:
    """How to simulate: as the arguments of `predict.distributions`."""

    trajectories: int = 200
    seed: int = 0
    dtype: str = "complex64"
    memory_limit: int | None = None
    threads: int | None = None


def whole_distributions(
    circuits: Sequence[Circuit], noise: NoiseModel | None, how: How, work: Work
) -> Iterator[tuple[int, Distribution, Distribution | None]]:
    """The distribution of every circuit, states of all its qubits evolved; as `predict.distributions`."""
    for circuit in circuits:
        n, noisy_too = circuit.n_qubits, noise is not None
        needed = needed_bytes(n, len(circuit.measured_qubits), noisy_too, how.dtype)
        what = f"{'trajectories' if noisy_too else 'a state and its distribution'} of {n} qubits"
        memory.require(needed, how.memory_limit, what)
        work.holds(needed)
    states = tree.walk(circuits, dtype=how.dtype, memory_limit=how.memory_limit, threads=how.threads, work=work)
    with Pool(how.threads) as pool:
        for index, state in states:
            circuit = circuits[index]
            qubits = circuit.measured_qubits
            if noise is None:
                yield index, Distribution(len(qubits), measured_probabilities(state, qubits)), None
            else:
                whole = probabilities(state)
                ideal = Distribution(len(qubits), measured(whole, qubits))
                with work.timed():
                    noisy = noisy_distribution(circuit, whole, noise, how.trajectories, how.seed, how.dtype, pool, work)
                yield index, ideal, noisy


def needed_bytes(n_qubits: int, n_bits: int, noisy: bool, dtype: str) -> int:
    """Bytes that the distribution of one circuit over n_bits takes to make on its whole register."""
    if noisy:
        return bytes_needed(n_qubits, dtype, batch_count(n_qubits), len(SOURCES))
    return memory.bytes_needed(n_qubits, dtype) + int(2**n_bits * np.dtype(probability_type(n_bits)).itemsize)


def batch_count(n_qubits: int) -> int:
    """Independent batches of trajectories: 16, or 8 where their distributions are large."""
    return 16 if n_qubits <= 16 else 8


def noisy_distribution(
    circuit: Circuit,
    error_free: FloatArray,
    noise: NoiseModel,
    trajectories: int,
    seed: int,
    dtype: str,
    pool: Pool,
    work: Work,
) -> Distribution:
    """The distribution under a noise model; error_free: (2**n,) probabilities of the circuit without an error."""
    noisy = noisy_program(circuit, noise, dtype)
    qubits, weight = circuit.measured_qubits, noisy.error_free
    confusion = noise.confusion(qubits)
    exact = mixture = measured(error_free, qubits)
    batches, tilts = None, {}
    if len(noisy.places):
        draw = Draw(seed, "trajectories", content_key(circuit))
        patterns = draw_patterns(noisy, trajectories, batch_count(circuit.n_qubits), draw)
        sums = run_patterns(noisy, patterns, dtype, pool, work)
        batches = measured(sums.by_batch, qubits)
        batches *= patterns.batches / len(patterns)
        mixture = weight * exact + (1 - weight) * batches.mean(axis=0)
        scored = measured(sums.scored, qubits)
        scored /= len(patterns)
        tilts = _tilts(noisy, patterns, noise, exact, mixture, scored)
        tilts = {source: flip(tilt, confusion, in_place=True) for source, tilt in tilts.items()}
        batches = flip(batches, confusion, in_place=True)
    if noise.uncertainty.get("readout_0to1") or noise.uncertainty.get("readout_1to0"):
        tilts["readout"] = flip(mixture, noise.confusion(qubits, sigmas=1))
        tilts["readout"] -= flip(mixture, confusion)
    return Distribution(len(qubits), flip(exact, confusion), weight if batches is not None else 1.0, batches, tilts)


def _tilts(
    noisy: NoisyProgram,
    patterns: Patterns,
    noise: NoiseModel,
    exact: FloatArray,
    mixture: FloatArray,
    scored: FloatArray,
) -> dict[str, FloatArray]:
    """Change of the distribution before readout for one standard uncertainty of each source; scored: their means."""
    weight, tilts = noisy.error_free, {}
    for place, source in enumerate(SOURCES):
        scale = noise.uncertainty.get(source, 0.0)
        if scale and np.any(noisy.places.source == place):
            free = weight * noisy.error_free_scores[place]
            # the exact mean score is 0: what sampling leaves of it is taken out
            left = free + (1 - weight) * float(patterns.scores[:, place].mean())
            tilts[source] = scale * (free * exact + (1 - weight) * scored[place] - left * mixture)
    return tilts

"""Circuits simulated on their whole register, to distributions over their measured bits."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.circuits.circuit import Circuit
from rcbench.engine import memory, tree
from rcbench.engine.distribution import Distribution
from rcbench.engine.mixture import bytes_needed, probability_type, run_patterns
from rcbench.engine.noise import SOURCES, NoiseModel
from rcbench.engine.readout import flip, measured
from rcbench.engine.threads import Pool
from rcbench.engine.trajectories import NoisyProgram, Patterns, draw_patterns, noisy_program
from rcbench.engine.work import Work
from rcbench.randomness import Draw


def probabilities(state: ComplexArray) -> FloatArray:
    """(2**n,) squared magnitudes."""
    real = probability_type(len(state).bit_length() - 1)
    return np.square(state.real, dtype=real) + np.square(state.imag, dtype=real)


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
        require(circuit.n_qubits, noise is not None, how)
    states = tree.walk(circuits, dtype=how.dtype, memory_limit=how.memory_limit, threads=how.threads, work=work)
    with Pool(how.threads) as pool:
        for index, state in states:
            circuit = circuits[index]
            whole = probabilities(state)
            ideal = Distribution(len(circuit.measured_qubits), measured(whole, circuit.measured_qubits))
            noisy = None
            if noise is not None:
                with work.timed():
                    noisy = noisy_distribution(circuit, whole, noise, how.trajectories, how.seed, how.dtype, pool, work)
            yield index, ideal, noisy


def needed_bytes(n_qubits: int, noisy: bool, dtype: str) -> int:
    """Bytes that the distribution of one circuit on its whole register takes to make."""
    if noisy:
        return bytes_needed(n_qubits, dtype, batch_count(n_qubits), len(SOURCES))
    return memory.bytes_needed(n_qubits, dtype)


def require(n_qubits: int, noisy: bool, how: How) -> None:
    """Refuse a register that does not fit the memory."""
    what = f"{'trajectories' if noisy else 'a state'} of {n_qubits} qubits"
    memory.require(needed_bytes(n_qubits, noisy, how.dtype), how.memory_limit, what)


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
        batches = measured(sums.by_batch, qubits) * (patterns.batches / len(patterns))
        mixture = weight * exact + (1 - weight) * batches.mean(axis=0)
        scored = measured(sums.scored, qubits) / len(patterns)
        tilts = _tilts(noisy, patterns, noise, exact, mixture, scored)
        tilts = {source: flip(tilt, confusion) for source, tilt in tilts.items()}
        batches = flip(batches, confusion)
    if noise.uncertainty.get("readout_0to1") or noise.uncertainty.get("readout_1to0"):
        tilts["readout"] = flip(mixture, noise.confusion(qubits, sigmas=1)) - flip(mixture, confusion)
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

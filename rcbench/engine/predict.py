"""Circuits to distributions over their measured bits: ideal, and under the stated error model."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator, Sequence

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
from rcbench.engine.work import Work, or_current
from rcbench.errors import InputError
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


def distributions(
    circuits: Sequence[Circuit],
    noise: NoiseModel | None,
    *,
    trajectories: int = 200,
    seed: int = 0,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
    progress: Callable[[int, int], None] | None = None,
    work: Work | None = None,
) -> Iterator[tuple[int, Distribution, Distribution | None]]:
    """The distribution of every circuit over its measured bits.

    Args:
        circuits: any mixture; shared beginnings are evolved once.
        noise: the error model of the circuits' qubits, or None for ideal distributions only.
        trajectories: error patterns drawn for each circuit, rounded up to whole batches.
        seed: of the error patterns; they depend on it and on the circuit's rows alone.
        dtype, memory_limit, threads: as in `tree.walk`.
        progress: called with (circuits done, circuits in all) after each.
        work: what is done is added to it; to the one that collects where None.
    Yields:
        (index of the circuit, ideal, noisy), in no particular order; noisy is None without a noise model. Classical
        bit 0 is the most significant. Readout flips are in the noisy one only. Its tilts hold those of "one_qubit",
        "two_qubit", "idle" and "readout" that have an uncertainty and act on the circuit.
    Raises:
        InputError: nothing measured, a reset or a gate after the qubit's measurement, a noise model of another size,
            or too little memory.
    """
    if noise is not None and trajectories < 1:
        raise InputError("trajectories", trajectories, "a whole number, 1 or more")
    for circuit in circuits:
        if not circuit.measured_qubits:
            raise InputError("circuit", "no measurement", "at least one measured qubit")
        if noise is not None:
            if noise.n_qubits != circuit.n_qubits:
                raise InputError("noise", f"{noise.n_qubits} qubits", f"the circuit's {circuit.n_qubits} qubits")
            needed = bytes_needed(circuit.n_qubits, dtype, batch_count(circuit.n_qubits), len(SOURCES))
            memory.require(needed, memory_limit, f"trajectories of {circuit.n_qubits} qubits")
    work = or_current(work)
    states = tree.walk(circuits, dtype=dtype, memory_limit=memory_limit, threads=threads, work=work)
    with Pool(threads) as pool:
        for done, (index, state) in enumerate(states):
            circuit = circuits[index]
            whole = probabilities(state)
            ideal = Distribution(len(circuit.measured_qubits), measured(whole, circuit.measured_qubits))
            noisy = None
            if noise is not None:
                with work.timed():
                    noisy = noisy_distribution(circuit, whole, noise, trajectories, seed, dtype, pool, work)
            yield index, ideal, noisy
            if progress is not None:
                progress(done + 1, len(circuits))


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

"""What a prediction will cost, before it starts: operators counted on a sample of the circuits, speed measured here."""

from __future__ import annotations

import statistics
import time
from collections.abc import Sequence
from functools import cache

import numpy as np

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.engine import memory, mixture
from rcbench.engine.blocks import apply_plan
from rcbench.engine.kernels import DENSE
from rcbench.engine.local import cone_pieces, reduces
from rcbench.engine.noise import SOURCES, NoiseModel
from rcbench.engine.operators import COSTS
from rcbench.engine.register import How, batch_count
from rcbench.engine.state import compile_circuit, zero_state
from rcbench.engine.threads import Pool, thread_count
from rcbench.engine.trajectories import BLOCK_QUBITS, NoisyProgram, noisy_program
from rcbench.engine.tree import Node, build_tree
from rcbench.engine.work import Work

SAMPLE = 8  # circuits of each size that are looked at closely
CONE_SAMPLE = 6  # the same of those with light cones of their own
_TRIAL_QUBITS = 20  # speed does not change much above
_TRIALS = 5
_SUMMING = 4  # adding up the probabilities of a trajectory takes as long as so many operators
_FIXED_SECONDS = 1.5e-3  # of each circuit with trajectories, whatever its size


def expected(
    circuits: Sequence[Circuit],
    noise: NoiseModel | None,
    *,
    trajectories: int = 200,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
) -> Work:
    """What `predict.distributions` will take for these circuits, within about a factor of two.

    The speed of this machine is measured for a few hundredths of a second; arguments as in `predict.distributions`.
    """
    total, how = Work(), How(trajectories, 0, dtype, memory_limit, threads)
    reduced = [circuit for circuit in circuits if reduces(circuit, noise, how)]
    _add_cones(total, reduced, noise, how)
    left = set(map(id, reduced))
    whole = [circuit for circuit in circuits if id(circuit) not in left]
    for n_qubits in sorted({circuit.n_qubits for circuit in whole}):
        members = [circuit for circuit in whole if circuit.n_qubits == n_qubits]
        total.circuits += len(members)
        _add_size(total, members, noise, trajectories, dtype, thread_count(threads))
    return total


def _add_cones(total: Work, circuits: list[Circuit], noise: NoiseModel | None, how: How) -> None:
    """What circuits take of which only light cones are simulated: a sample of them, times how many there are."""
    sample = circuits[:: max(1, len(circuits) // CONE_SAMPLE)][:CONE_SAMPLE]
    part = Work()
    for circuit in sample:
        start = time.perf_counter()
        pieces = cone_pieces(circuit, noise, how)
        part.seconds += time.perf_counter() - start
        for piece, model in pieces:
            part.circuits += 1
            _add_size(part, [piece.circuit], model, how.trajectories, how.dtype, thread_count(how.threads))
    share = len(circuits) / max(1, len(sample))
    total.circuits += round(part.circuits * share)
    total.trajectories += round(part.trajectories * share)
    total.amplitudes += part.amplitudes * share
    total.seconds += part.seconds * share
    total.holds(part.peak_bytes)


def _add_size(
    total: Work, circuits: list[Circuit], noise: NoiseModel | None, trajectories: int, dtype: str, threads: int
) -> None:
    n = circuits[0].n_qubits
    root = build_tree(circuits)
    gates = _gates_in(root)
    sample = circuits[:: max(1, len(circuits) // SAMPLE)][:SAMPLE]
    sample_gates = max(1, sum(int(np.count_nonzero(circuit.gate_rows)) for circuit in sample))
    speed = _speed(n, dtype, threads)
    start = time.perf_counter()
    plans = [compile_circuit(circuit, dtype) for circuit in sample]
    compiling = time.perf_counter() - start
    operators = sum(len(plan.operators) for plan in plans)
    cost = sum(float(COSTS[plan.operators.kind].sum()) for plan in plans) / COSTS[DENSE]
    total.amplitudes += 2.0**n * operators * gates / sample_gates
    total.seconds += (2.0**n * cost / speed + compiling) * gates / sample_gates
    total.holds(memory.bytes_needed(n, dtype, states=root.states))
    if noise is None:
        return
    batches = batch_count(n)
    run = batches * -(-trajectories // batches)
    start = time.perf_counter()
    noisy = [noisy_program(circuit, noise, dtype) for circuit in sample]
    preparing = (time.perf_counter() - start) / len(sample)
    steps = sum(_steps_of_a_trajectory(program) for program in noisy) / len(sample)
    amplitudes = 2.0**n * steps * run * len(circuits)
    cheaper = cost / max(1, operators)
    total.trajectories += run * len(circuits)
    total.amplitudes += amplitudes
    parallel = min(threads, batches) if n <= BLOCK_QUBITS else 1
    summing = 2.0**n * _SUMMING * run * len(circuits)
    total.seconds += (amplitudes * cheaper + summing) / speed / parallel + (preparing + _FIXED_SECONDS) * len(circuits)
    saved = max(mixture.saved_states(program.sweeps, dtype) for program in noisy) * memory.bytes_needed(n, dtype)
    total.holds(mixture.bytes_needed(n, dtype, batches, len(SOURCES)) + saved)


def _gates_in(root: Node) -> int:
    """Gates that a walk applies."""
    gates, waiting = 0, [root]
    while waiting:
        node = waiting.pop()
        gates += node.stop - node.start
        waiting += node.branches.values()
    return gates


def _steps_of_a_trajectory(noisy: NoisyProgram) -> float:
    """Mean number of operators from the first error on, given that there is one."""
    if not len(noisy.places):
        return 0.0
    first = np.exp(-noisy.hazard[:-1]) * noisy.places.probability
    return float(len(noisy.program) - first @ noisy.op / first.sum())


@cache
def _speed(n_qubits: int, dtype: str, threads: int) -> float:
    """Amplitudes times dense operators a second, of one state: a small one on one thread, a large one on all."""
    n = min(n_qubits, _TRIAL_QUBITS)
    builder = CircuitBuilder(n)
    for layer in range(6):
        for qubit in range(n):
            builder.add("u", [qubit], [1 + qubit + layer, 2, 3])
        builder.next_layer()
        for qubit in range(layer % 2, n - 1, 2):
            builder.add("iswap", [qubit, qubit + 1])
        builder.next_layer()
    trial, state, speeds = compile_circuit(builder.build(), dtype), zero_state(n, dtype), []
    with Pool(threads) as pool:
        for _ in range(_TRIALS):
            start = time.perf_counter()
            apply_plan(state, trial, pool)
            speeds.append(2.0**n * len(trial.operators) / (time.perf_counter() - start))
    return statistics.median(speeds)

"""Trajectories run and added up: patterns of errors to sums of final probabilities."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.engine import memory
from rcbench.engine.blocks import Plan, aligned, apply_plan, scratch
from rcbench.engine.compiled import kernel
from rcbench.engine.kernels import DENSE, ONE, apply_operator
from rcbench.engine.lanes import LANES, lanes, load, store
from rcbench.engine.operators import Operators, write_matrices
from rcbench.engine.threads import Pool
from rcbench.engine.trajectories import BLOCK_QUBITS, Changes, NoisyProgram, Patterns, changed_operators
from rcbench.engine.work import Work

_RESULTS = 6  # distributions beside the sums: error-free, mixed, as read
SAVED_BYTES = 2**27  # error-free states kept to start trajectories from


@dataclass(frozen=True, slots=True, eq=False)
class Sums:
    """Final probabilities added up.

    Args:
        by_batch: (batches, 2**n) over the trajectories of each batch.
        scored: (sources, 2**n) over all trajectories, weighted with the scores of their patterns.
    """

    by_batch: FloatArray
    scored: FloatArray


def probability_type(n_qubits: int) -> type[np.floating]:
    """Double precision up to 20 qubits; beyond, distributions take more memory than their last digits are worth."""
    return np.float64 if n_qubits <= 20 else np.float32


def bytes_needed(n_qubits: int, dtype: str, batches: int, sources: int) -> int:
    """Bytes that the sums and the states of a run take beside the circuit's own state, saved states left out."""
    numbers = np.dtype(probability_type(n_qubits)).itemsize
    arrays = batches + sources * (2 + (batches if n_qubits <= BLOCK_QUBITS else 0)) + _RESULTS
    return int(2**n_qubits * numbers * arrays) + memory.bytes_needed(n_qubits, dtype, states=3)


def run_patterns(noisy: NoisyProgram, patterns: Patterns, dtype: str, pool: Pool, work: Work) -> Sums:
    """Run all trajectories of a circuit; the result is the same for any number of threads."""
    changes, sweeps = changed_operators(noisy, patterns), noisy.sweeps
    n, run = sweeps.operators.n_qubits, _run_in_blocks if sweeps.operators.n_qubits <= BLOCK_QUBITS else _run_in_sweeps
    sums = run(patterns, changes, sweeps, dtype, pool)
    first = changes.op[changes.start[:-1]]
    work.amplitudes += 2.0**n * float((len(noisy.program) - first).sum() + len(noisy.program))
    work.trajectories += len(patterns)
    work.holds(
        bytes_needed(n, dtype, patterns.batches, len(sums.scored))
        + saved_states(sweeps, dtype) * memory.bytes_needed(n, dtype)
    )
    return sums


def saved_states(sweeps: Plan, dtype: str) -> int:
    """Error-free states that are kept to start trajectories from."""
    n = sweeps.operators.n_qubits
    candidates = len(sweeps.operators) if n <= BLOCK_QUBITS else len(sweeps.active)
    return int(max(1, min(candidates, SAVED_BYTES // memory.bytes_needed(n, dtype))))


def _run_in_blocks(patterns: Patterns, changes: Changes, sweeps: Plan, dtype: str, pool: Pool) -> Sums:
    operators = sweeps.operators
    real = operators.numbers.dtype
    bits = max(operators.n_qubits, LANES[real.name].bit_length() - 1)
    size, batches, sources = 2**bits, patterns.batches, patterns.scores.shape[1]
    numbers = write_matrices(changes.matrices, sweeps.operators.kind[changes.op] == ONE).astype(real)
    every = -(-len(operators) // saved_states(sweeps, dtype))
    saved = aligned((2 << bits) * (-(-len(operators) // every)), real).reshape(-1, 2 << bits)
    saved[0] = 0
    saved[0, 0] = 1
    sums, scored = np.zeros((batches, size)), np.zeros((batches, sources, size))
    each = len(patterns) // batches
    table = (changes.op, numbers, operators.kind, operators.high, operators.low, operators.numbers, patterns.scores)
    # the error-free run fills `saved`; it has no changes, and its sums go nowhere
    nothing = np.zeros(2, dtype=np.int64)
    _run_block(
        saved,
        every,
        True,
        0,
        1,
        nothing,
        *table,
        np.zeros(size),
        np.zeros((sources, size)),
        aligned((2 << bits) + scratch(real), real),
        bits,
    )

    def task(batch: int) -> None:
        block = aligned((2 << bits) + scratch(real), real)
        first = batch * each
        _run_block(
            saved, every, False, first, first + each, changes.start, *table, sums[batch], scored[batch], block, bits
        )

    pool.run(task, range(batches))
    used = 2**operators.n_qubits
    return Sums(sums[:, :used], scored.sum(axis=0)[:, :used])


@kernel
def _run_block(saved, every, record, first, last, start, changed, changed_numbers, kind, high, low, numbers, scores, total, scored, block, bits):  # type: ignore[no-untyped-def]  # noqa: E501  # fmt: skip
    w = lanes(block)
    step = 2 * w
    for trajectory in range(first, last):
        error, stop = start[trajectory], start[trajectory + 1]
        begin = changed[error] // every if error < stop else 0
        for i in range(0, 2 << bits, step):
            store(block, i, load(saved[begin], i))
        for op in range(begin * every, len(kind)):
            if record and op % every == 0:
                for i in range(0, 2 << bits, step):
                    store(saved[op // every], i, load(block, i))
            which, c = kind[op], numbers[op]
            if error < stop and changed[error] == op:
                which, c = ONE if which == ONE else DENSE, changed_numbers[error]
                error += 1
            apply_operator(block, bits, which, high[op], low[op], c)
        for chunk in range((1 << bits) // w):
            for lane in range(w):
                re, im = np.float64(block[chunk * step + lane]), np.float64(block[chunk * step + w + lane])
                probability = re * re + im * im
                total[chunk * w + lane] += probability
                for source in range(len(scored)):
                    scored[source, chunk * w + lane] += scores[trajectory, source] * probability


def _run_in_sweeps(patterns: Patterns, changes: Changes, sweeps: Plan, dtype: str, pool: Pool) -> Sums:
    n, batches = sweeps.operators.n_qubits, patterns.batches
    saved, first_sweep = _error_free_states(sweeps, dtype, pool)
    numbers = write_matrices(changes.matrices, sweeps.operators.kind[changes.op] == ONE).astype(
        sweeps.operators.numbers.dtype
    )
    real = probability_type(n)
    sums, scored = np.zeros((batches, 2**n), real), np.zeros((patterns.scores.shape[1], 2**n), real)
    state: ComplexArray = aligned(2**n, np.dtype(dtype))
    sweep_of_op = np.searchsorted(sweeps.start, np.arange(len(sweeps.operators)), side="right") - 1
    for trajectory in range(len(patterns)):
        part = slice(changes.start[trajectory], changes.start[trajectory + 1])
        begin = int(np.searchsorted(first_sweep, sweep_of_op[changes.op[part][0]], side="right")) - 1
        state[:] = saved[begin]
        changed = _with_changes(sweeps.operators, changes.op[part], numbers[part])
        apply_plan(state, replace(sweeps, operators=changed), pool, int(first_sweep[begin]))
        _add_probabilities(
            state.view(numbers.dtype),
            patterns.scores[trajectory].astype(real),
            sums[trajectory * batches // len(patterns)],
            scored,
        )
    return Sums(sums, scored)


def _error_free_states(sweeps: Plan, dtype: str, pool: Pool) -> tuple[list[ComplexArray], IntArray]:
    """States of the error-free run and the sweep that each one stands before."""
    n, count = sweeps.operators.n_qubits, len(sweeps.active)
    first_sweep = np.unique(np.linspace(0, count, saved_states(sweeps, dtype), endpoint=False).astype(np.int64))
    state: ComplexArray = aligned(2**n, np.dtype(dtype))
    state[:] = 0
    state[0] = 1
    saved = [state]
    for begin, end in zip(first_sweep[:-1].tolist(), first_sweep[1:].tolist(), strict=True):
        following: ComplexArray = aligned(2**n, np.dtype(dtype))
        following[:] = saved[-1]
        apply_plan(following, replace(sweeps, active=sweeps.active[:end]), pool, begin)
        saved.append(following)
    return saved, first_sweep


def _with_changes(operators: Operators, op: IntArray, numbers: FloatArray) -> Operators:
    kind, all_numbers = operators.kind.copy(), operators.numbers.copy()
    kind[op] = np.where(kind[op] == ONE, ONE, DENSE)
    all_numbers[op] = numbers
    return Operators(operators.n_qubits, kind, operators.high, operators.low, all_numbers)


@kernel
def _add_probabilities(state, scores, total, scored):  # type: ignore[no-untyped-def]
    for index in range(len(total)):
        re, im = state[2 * index], state[2 * index + 1]
        probability = re * re + im * im
        total[index] += probability
        for source in range(len(scores)):
            scored[source, index] += scores[source] * probability

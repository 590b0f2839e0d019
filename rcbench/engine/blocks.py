"""A program on one large state: sweeps over blocks that fit the cache, several operators to a block.

A sweep has a set of active positions (bits of the state index). A block holds all amplitudes that differ in active bits
only, and every operator on active positions can be applied to it before it goes back to memory. The lowest bits are
always active, so that memory is read in runs.
"""

from __future__ import annotations

import threading
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.engine.compiled import kernel, part
from rcbench.engine.kernels import apply_operator
from rcbench.engine.lanes import LANES, lanes, load, load_pairs, store, store_pairs
from rcbench.engine.operators import COSTS, Operators
from rcbench.engine.threads import Pool

BLOCK_BYTES = 2**18  # a part of the second-level cache of one core
RUN_BYTES = 2**8  # four cache lines: enough for the prefetcher
TASKS = 64  # blocks of a sweep are handed to threads in at most so many portions


def aligned(size: int, dtype: np.dtype[np.generic]) -> np.ndarray:
    """An array that begins on a register boundary; values are arbitrary."""
    raw = np.empty(size * dtype.itemsize + 64, dtype=np.uint8)
    start = -raw.ctypes.data % 64
    return raw[start : start + size * dtype.itemsize].view(dtype)


_local = threading.local()


def own_block(bits: int, dtype: np.dtype[np.floating]) -> FloatArray:
    """A block of this thread alone, used again at each call."""
    kept: dict[tuple[int, str], FloatArray] = _local.__dict__.setdefault("blocks", {})
    key = (bits, dtype.name)
    if key not in kept:
        kept[key] = aligned(2 << bits, dtype)
    return kept[key]


@dataclass(frozen=True, slots=True, eq=False)
class Plan:
    """Sweeps of a program.

    Args:
        operators: in the order of the sweeps, high and low as positions inside a block.
        order: (m,) place of each operator in the program.
        start: (sweeps + 1,) where the operators of each sweep begin. active: (sweeps,) bit masks.
        stretch: (stretches + 1,) the sweep that each stretch of the program begins with.
    """

    operators: Operators
    order: IntArray
    start: IntArray
    active: IntArray
    stretch: IntArray


def plan(operators: Operators, stretches: IntArray, block_bits: int | None = None) -> Plan:
    """Cut a program into sweeps; operators of one stretch that act on different qubits may change places.

    stretches: where each stretch of the program begins, and the end. block_bits: what fits the cache.
    """
    n = operators.n_qubits
    item = operators.numbers.itemsize
    block_bits = block_bits or (BLOCK_BYTES // (2 * item)).bit_length() - 1
    run_bits = (RUN_BYTES // (2 * item)).bit_length() - 1
    if n <= block_bits:
        count = len(stretches) - 1
        return Plan(operators, np.arange(len(operators)), stretches, np.full(count, 2**n - 1), np.arange(count + 1))
    masks = (np.int64(1) << operators.high) | (np.int64(1) << operators.low)
    parts = [
        _sweeps(masks[first:last], COSTS[operators.kind[first:last]], n, block_bits, run_bits)
        for first, last in pairwise(stretches.tolist())
    ]
    order = np.concatenate([part[0] + first for part, first in zip(parts, stretches, strict=False)])
    start = np.concatenate(
        [*(part[1][:-1] + first for part, first in zip(parts, stretches, strict=False)), stretches[-1:]]
    )
    active = np.concatenate([part[2] for part in parts])
    high, low = _inside(operators.high[order], operators.low[order], start, active)
    inside = Operators(n, operators.kind[order], high, low, operators.numbers[order])
    return Plan(inside, order, start, active, np.cumsum([0, *(len(part[2]) for part in parts)]))


def apply_plan(state: ComplexArray, sweeps: Plan, pool: Pool, begin: int = 0, end: int | None = None) -> None:
    """Apply a planned program, or its sweeps from begin up to end, to a state in place.

    A state of fewer amplitudes than a register is padded.
    """
    operators = sweeps.operators
    real = operators.numbers.dtype
    n, view, target = operators.n_qubits, state.view(real), state.view(real)
    if len(state) < LANES[real.name]:
        n, view = LANES[real.name].bit_length() - 1, np.zeros(2 * LANES[real.name], dtype=real)
        view[: len(target)] = target
    for sweep in range(begin, len(sweeps.active) if end is None else end):
        active = max(int(sweeps.active[sweep]), LANES[real.name] - 1)
        blocks = 2 ** (n - active.bit_count())
        portions = min(blocks, TASKS)

        def task(
            portion: int, sweep: int = sweep, active: int = active, blocks: int = blocks, portions: int = portions
        ) -> None:
            first, last = blocks * portion // portions, blocks * (portion + 1) // portions
            _sweep(
                view, n, active, first, last, sweeps.start[sweep], sweeps.start[sweep + 1],
                operators.kind, operators.high, operators.low, operators.numbers, own_block(active.bit_count(), real),
            )  # fmt: skip

        if portions == 1:
            task(0)
        else:
            pool.run(task, range(portions))
    if view is not target and len(view) > len(target):
        target[:] = view[: len(target)]


@part
def _spread(index, positions):  # type: ignore[no-untyped-def]
    """The bits of an index put at positions, lowest first."""
    out = 0
    for place in range(len(positions)):
        out |= (index >> place & 1) << positions[place]
    return out


@part
def _count_bits(mask):  # type: ignore[no-untyped-def]
    count = 0
    while mask:
        mask &= mask - 1
        count += 1
    return count


@kernel
def _sweep(state, n, active, first, last, start, stop, kind, high, low, numbers, block):  # type: ignore[no-untyped-def]
    run_bits = 0
    while active >> run_bits & 1:
        run_bits += 1
    bits = _count_bits(active)
    outer = np.empty(bits - run_bits, dtype=np.int64)
    spectators = np.empty(n - bits, dtype=np.int64)
    a, s = 0, 0
    for position in range(run_bits, n):
        if active >> position & 1:
            outer[a] = position
            a += 1
        else:
            spectators[s] = position
            s += 1
    runs, length, step = 1 << (bits - run_bits), 2 << run_bits, 2 * lanes(block)
    offsets = np.empty(runs, dtype=np.int64)
    for run in range(runs):
        offsets[run] = 2 * _spread(run, outer)
    for index in range(first, last):
        base = 2 * _spread(index, spectators)
        for run in range(runs):
            source, target = base + offsets[run], run * length
            for i in range(0, length, step):
                store(block, target + i, load_pairs(state, source + i))
        for op in range(start, stop):
            apply_operator(block, bits, kind[op], high[op], low[op], numbers[op])
        for run in range(runs):
            source, target = base + offsets[run], run * length
            for i in range(0, length, step):
                store_pairs(state, source + i, load(block, target + i))


@kernel
def _inside(high, low, start, active):  # type: ignore[no-untyped-def]
    """Positions counted among the active ones of their sweep."""
    new_high, new_low = high.copy(), low.copy()
    for sweep in range(len(active)):
        for op in range(start[sweep], start[sweep + 1]):
            new_high[op] = _count_bits(active[sweep] & ((1 << high[op]) - 1))
            new_low[op] = _count_bits(active[sweep] & ((1 << low[op]) - 1))
    return new_high, new_low


@part
def _gain(masks, costs, waiting, count, active):  # type: ignore[no-untyped-def]
    """Cost of the waiting operators that a sweep with these active positions takes in."""
    blocked, total = 0, 0.0
    for place in range(count):
        mask = masks[waiting[place]]
        if mask & blocked or mask & ~active:
            blocked |= mask
        else:
            total += costs[waiting[place]]
    return total


@part
def _grow(masks, waiting, count, active, block_bits):  # type: ignore[no-untyped-def]
    """Active positions grown along the operators that come next, from a seed."""
    grown = True
    while grown and _count_bits(active) < block_bits:
        grown = False
        blocked = 0
        for place in range(count):
            mask = masks[waiting[place]]
            if mask & blocked:
                blocked |= mask
            elif mask & ~active:
                if mask & active and _count_bits(active | mask) <= block_bits:
                    active |= mask
                    grown = True
                else:
                    blocked |= mask
    return active


@kernel
def _sweeps(masks, costs, n, block_bits, run_bits):  # type: ignore[no-untyped-def]
    """Sweep after sweep the active positions that take in the most: windows, and sets grown from operators in reach."""
    total = len(masks)
    waiting = np.arange(total)
    order = np.empty(total, dtype=np.int64)
    starts, actives = np.zeros(total + 1, dtype=np.int64), np.zeros(total, dtype=np.int64)
    lowest = (1 << run_bits) - 1
    count, taken, sweeps = total, 0, 0
    while count:
        best, best_gain = 0, -1.0
        for start in range(run_bits, n - (block_bits - run_bits) + 1):
            active = lowest | ((1 << (block_bits - run_bits)) - 1) << start
            gain = _gain(masks, costs, waiting, count, active)
            if gain > best_gain:
                best, best_gain = active, gain
        blocked = 0
        for place in range(count):
            mask = masks[waiting[place]]
            if not mask & blocked:
                active = _grow(masks, waiting, count, lowest | mask, block_bits)
                gain = _gain(masks, costs, waiting, count, active)
                if gain > best_gain:
                    best, best_gain = active, gain
            blocked |= mask
        # a grown set may be smaller than a block: fill it up from below
        for position in range(n):
            if _count_bits(best) < block_bits:
                best |= 1 << position
        blocked, left = 0, 0
        for place in range(count):
            op = waiting[place]
            if masks[op] & blocked or masks[op] & ~best:
                blocked |= masks[op]
                waiting[left] = op
                left += 1
            else:
                order[taken] = op
                taken += 1
        count = left
        actives[sweeps] = best
        sweeps += 1
        starts[sweeps] = taken
    return order, starts[: sweeps + 1], actives[:sweeps]

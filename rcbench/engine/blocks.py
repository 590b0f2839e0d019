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
        kept[key] = aligned((2 << bits) + scratch(dtype), dtype)
    return kept[key]


def scratch(dtype: np.dtype[np.floating]) -> int:
    """Floats that the kernels need beyond the end of a block."""
    return 8 * LANES[dtype.name]


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
    order, start, active, stretch = np.arange(len(masks)), [0], [], [0]
    room = (
        np.empty(len(masks), dtype=np.int64),
        np.empty(len(masks) + 1, dtype=np.int64),
        np.empty(len(masks), dtype=np.int64),
    )
    for first, last in pairwise(stretches.tolist()):
        part = order[first:last]
        count = _sweeps(masks[first:last], COSTS[operators.kind[first:last]], n, block_bits, run_bits, part, *room)
        part += first
        start += (first + room[1][1 : count + 1]).tolist()
        active += room[2][:count].tolist()
        stretch.append(len(active))
    inside = _inside(operators, order, np.array(start), np.array(active, dtype=np.int64))
    return Plan(inside, order, np.array(start), np.array(active, dtype=np.int64), np.array(stretch))


def _inside(operators: Operators, order: IntArray, start: IntArray, active: IntArray) -> Operators:
    """The operators in order, their positions counted among the active ones of their sweep."""
    is_active = active[:, None] >> np.arange(operators.n_qubits) & 1
    rank = np.cumsum(is_active, axis=1) - is_active
    sweep = np.repeat(np.arange(len(active)), np.diff(start))
    high, low = rank[sweep, operators.high[order]], rank[sweep, operators.low[order]]
    return Operators(operators.n_qubits, operators.kind[order], high, low, operators.numbers[order])


@dataclass(frozen=True, slots=True, eq=False)
class Layout:
    """Where the blocks of a sweep lie in a state.

    Args:
        bits: positions inside a block. run: floats that lie side by side.
        offsets: (runs,) floats from a block's first amplitude to each run. base: (blocks,) to each first amplitude.
    """

    bits: int
    run: int
    offsets: IntArray
    base: IntArray

    @classmethod
    def of(cls, n_qubits: int, active: int) -> Layout:
        """The layout of a sweep with these active positions."""
        run_bits = (~active & (active + 1)).bit_length() - 1
        positions = range(run_bits, n_qubits)
        outer = [position for position in positions if active >> position & 1]
        others = [position for position in positions if not active >> position & 1]
        return cls(active.bit_count(), 2 << run_bits, _spread(outer), _spread(others))


def _spread(positions: list[int]) -> IntArray:
    """(2**k,) twice the numbers whose bits are 0 but at k positions, in rising order."""
    out = np.zeros(1, dtype=np.int64)
    for position in positions:
        out = np.concatenate([out, out + (2 << position)])
    return out


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
        layout = Layout.of(n, active)
        blocks = len(layout.base)
        portions = min(blocks, TASKS)

        def task(portion: int, sweep: int = sweep, layout: Layout = layout, portions: int = portions) -> None:
            blocks = len(layout.base)
            base = layout.base[blocks * portion // portions : blocks * (portion + 1) // portions]
            _sweep(
                view, layout.bits, layout.run, layout.offsets, base, sweeps.start[sweep], sweeps.start[sweep + 1],
                operators.kind, operators.high, operators.low, operators.numbers, own_block(layout.bits, real),
            )  # fmt: skip

        if portions == 1:
            task(0)
        else:
            pool.run(task, range(portions))
    if view is not target and len(view) > len(target):
        target[:] = view[: len(target)]


@part
def _count_bits(mask):  # type: ignore[no-untyped-def]
    count = 0
    while mask:
        mask &= mask - 1
        count += 1
    return count


@kernel
def _sweep(state, bits, run, offsets, base, start, stop, kind, high, low, numbers, block):  # type: ignore[no-untyped-def]
    step = 2 * lanes(block)
    for index in range(len(base)):
        for place in range(len(offsets)):
            source, target = base[index] + offsets[place], place * run
            for i in range(0, run, step):
                store(block, target + i, load_pairs(state, source + i))
        for op in range(start, stop):
            apply_operator(block, bits, kind[op], high[op], low[op], numbers[op])
        for place in range(len(offsets)):
            source, target = base[index] + offsets[place], place * run
            for i in range(0, run, step):
                store_pairs(state, source + i, load(block, target + i))


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
def _sweeps(masks, costs, n, block_bits, run_bits, order, waiting, starts, actives):  # type: ignore[no-untyped-def]
    """Sweep after sweep the active positions that take in the most: windows, and sets grown from operators in reach.

    Fills `order`, `starts` and `actives`, needs `waiting` to work in, and returns the number of sweeps.
    """
    total = len(masks)
    for op in range(total):
        waiting[op] = op
    starts[0] = 0
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
    return sweeps

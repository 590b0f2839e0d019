"""The same shots twice: blocks of shots that come again in order, and tables of counts that two circuits share.

A block is the same outcomes in the same order in two places. How rare that is follows from how often its outcomes
come: it is told where -sum ln f(x) over the block exceeds the number of pairs of places it could have stood in by
ln(1 / ALPHA) nats, and holds DIFFERENT outcomes, so that a qubit that rests for a while is none.

Two tables of counts are the same by chance with probability prod e^(-2 c) I_0(2 c) at least, c the counts: each is a
Poisson number, and two of them are equal. It is told where that is below ALPHA over the pairs of runs.

Cost: one sort of all shots for each length of block that is looked for, at most four.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.shots.evidence.finding import ALPHA

DIFFERENT = 4  # different outcomes in a block
LONGEST = 4096
_FACTOR = np.uint64(0x9E3779B97F4A7C15)


class Block(NamedTuple):
    """Shots `first` + i of run `run` are shots `again_first` + i of run `again`, for i below `length`. nats:
    evidence.
    """

    run: int
    first: int
    again: int
    again_first: int
    length: int
    nats: float


def repeated_blocks(series: Sequence[IntArray]) -> list[Block]:
    """Blocks of shots that come twice, in one run or in two; each once, the longest first.

    Args:
        series: by run, (shots,) state index of each shot in order; all of the same number of bits.
    """
    total = sum(map(len, series))
    needed = 2 * math.log(max(total, 2)) + math.log(1 / ALPHA)
    lengths = [_length(one, needed) for one in series]
    found: list[Block] = []
    for length in sorted({length for length in lengths if length}):
        runs = [run for run, own in enumerate(lengths) if own and own <= length <= len(series[run])]
        found += _of_length(series, runs, length, needed)
    return _longest(found)


def _length(shots: IntArray, needed: float) -> int:
    """How long a block must be to be told, a power of two; 0 where none of this run can be."""
    if len(shots) < 4:
        return 0
    _, counts = np.unique(shots, return_counts=True)
    share = counts / len(shots)
    rarity = float(-(share @ np.log(share)))
    if rarity < 1e-3:
        return 0
    length = 1 << max(2, math.ceil(math.log2(2 * needed / rarity)))
    return length if length <= min(LONGEST, len(shots)) else 0


def _of_length(series: Sequence[IntArray], runs: Sequence[int], length: int, needed: float) -> list[Block]:
    marks = [_marks(series[run], length) for run in runs]
    run = np.repeat(np.array(runs, dtype=np.int64), [len(mark) for mark in marks])
    place = np.concatenate([np.arange(len(mark)) for mark in marks])
    mark = np.concatenate(marks)
    order = np.argsort(mark, kind="stable")
    same = np.flatnonzero(mark[order[1:]] == mark[order[:-1]])
    if not len(same):
        return []
    first, second = order[same], order[same + 1]
    shift = place[second] - place[first]
    apart = (run[first] != run[second]) | (shift >= length)
    first, second, shift = first[apart], second[apart], shift[apart]
    found = []
    # neighbours on one diagonal are one block
    rank = np.lexsort((place[first], shift, run[second], run[first]))
    at: tuple[int, int, int, int] | None = None
    for one, two, move in zip(first[rank].tolist(), second[rank].tolist(), shift[rank].tolist(), strict=True):
        here = (int(run[one]), int(run[two]), int(move), int(place[one]))
        if at is not None and here[:3] == at[:3] and here[3] <= at[3]:
            continue
        block = _extended(series, here[0], here[3], here[1], int(place[two]))
        at = (here[0], here[1], here[2], block[1] + block[4])
        nats = _rarity(series[block[0]], block[1], block[4])
        if nats > needed:
            found.append(Block(*block, nats))
    return found


def _marks(shots: IntArray, length: int) -> IntArray:
    """(len(shots) - length + 1,) a hash of every block of that length, a power of two."""
    mark = (shots.astype(np.uint64) + np.uint64(1)) * _FACTOR
    mark ^= mark >> np.uint64(29)
    step, factor = 1, _FACTOR | np.uint64(1)
    with np.errstate(over="ignore"):
        while step < length:
            mark = mark[:-step] * factor + mark[step:]
            factor = factor * factor
            step *= 2
    return mark


def _extended(series: Sequence[IntArray], a: int, first: int, b: int, again: int) -> tuple[int, int, int, int, int]:
    """The whole block that two places belong to."""
    x, y = series[a], series[b]
    ahead = min(len(x) - first, len(y) - again)
    differ = np.flatnonzero(x[first : first + ahead] != y[again : again + ahead])
    end = int(differ[0]) if len(differ) else ahead
    behind = min(first, again)
    differ = np.flatnonzero(x[first - behind : first] != y[again - behind : again])
    back = behind - 1 - int(differ[-1]) if len(differ) else behind
    length = end + back
    if a == b:  # a block does not overlap itself
        length = min(length, abs(again - first))
    return a, first - back, b, again - back, length


def _rarity(shots: IntArray, first: int, length: int) -> float:
    """-sum ln f over a block, f the share of each outcome in its run; 0 where it holds too few different ones."""
    values, where, counts = np.unique(shots, return_inverse=True, return_counts=True)
    block = where.reshape(-1)[first : first + length]
    if length < 1 or len(np.unique(block)) < min(DIFFERENT, len(values)):
        return 0.0
    return float(-np.log(counts[block] / len(shots)).sum())


def _longest(blocks: Sequence[Block]) -> list[Block]:
    kept: dict[tuple[int, int, int, int], Block] = {}
    for block in blocks:
        kept.setdefault((block.run, block.first, block.again, block.again_first), block)
    return sorted(kept.values(), key=lambda block: -block.length)


def same_tables(tables: Sequence[tuple[IntArray, IntArray]]) -> list[tuple[int, int, float]]:
    """Pairs of runs with the very same counts, and the nats against chance.

    Args:
        tables: by run, (k,) state indices, rising, and (k,) counts.
    """
    groups: dict[bytes, list[int]] = {}
    for run, (index, counts) in enumerate(tables):
        groups.setdefault(index.tobytes() + b"|" + counts.tobytes(), []).append(run)
    limit = tables_limit(len(tables))
    found = []
    for runs in groups.values():
        nats = chance_of_equal(tables[runs[0]][1]) if len(runs) > 1 else 0.0
        if nats > limit:
            found += [(runs[0], run, nats) for run in runs[1:]]
    return found


def tables_limit(runs: int) -> float:
    """Nats from which two equal tables are told."""
    return 2 * math.log(max(runs, 2)) + math.log(1 / ALPHA)


def chance_of_equal(counts: IntArray | FloatArray) -> float:
    """-ln of the chance that a second table has these counts too."""
    from scipy.special import i0e

    return float(-np.log(i0e(2.0 * np.asarray(counts, dtype=np.float64))).sum())

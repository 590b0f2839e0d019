"""Adding up equal outcomes of many circuits while batches of rows stream in."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from rcbench.arrays import BoolArray, IntArray
from rcbench.shots.decode import packed_bytes
from rcbench.shots.outcomes import Outcomes

NARROW = 40  # widest outcome that shares one 64-bit key with the number of its run: 2**24 runs
WORTH_IT = 0.5  # merging counts costs an argsort, merging single shots only a sort
ROWS_AT_ONCE = 1 << 18  # bounds the memory of the last pass


class Tally:
    """Outcomes by run. A run is a whole number from 0 (a circuit and repeat); outcomes come as words.

    Equal rows of a batch are added up at once, so that few different outcomes take little memory however many the
    shots; the batches are merged at the end, some runs at a time.
    """

    def __init__(self, max_bits: int) -> None:
        self._shift = np.uint64(max_bits) if max_bits <= NARROW else None
        self._n_words = max(1, -(-max_bits // 64))
        self._chunks: list[tuple[IntArray, IntArray | None]] = []

    def add(self, run: IntArray, words: IntArray, counts: IntArray | None) -> None:
        """Rows: run (rows,), words (rows, w) as `decode.pack_words` makes them, counts (rows,) or None for ones."""
        if len(run) == 0:
            return
        if self._shift is not None:
            keys = (run.astype(np.uint64) << self._shift | words[:, -1])[:, None]
        else:
            keys = np.zeros((len(run), 1 + self._n_words), dtype=np.uint64)
            keys[:, 0] = run
            keys[:, -words.shape[1] :] = words
        self._chunks.append(_add_up(keys, counts, least=WORTH_IT))

    def extend(self, other: Tally) -> None:
        """Take over the rows of another tally of the same width."""
        self._chunks += other._chunks

    def outcomes(self, n_bits: Sequence[int]) -> Iterator[tuple[int, Outcomes]]:
        """Every run that has rows, rising, with its outcomes; n_bits: classical bits by run."""
        total = sum(len(keys) for keys, _ in self._chunks)
        step = max(1, len(n_bits) * ROWS_AT_ONCE // max(total, 1))
        for first in range(0, len(n_bits), step):
            last = min(first + step, len(n_bits))
            keys, counts = self._between(first, last)
            if len(keys):
                yield from self._split(keys, counts, n_bits)

    def _lead(self, run: int) -> np.uint64:
        return np.uint64(run) if self._shift is None else np.uint64(run) << self._shift

    def _between(self, first: int, last: int) -> tuple[IntArray, IntArray]:
        """Keys and counts of the runs from first up to last, added up."""
        keys, counts, single = [], [], True
        for chunk, weight in self._chunks:
            a, b = np.searchsorted(chunk[:, 0], np.array([self._lead(first), self._lead(last)], dtype=np.uint64))
            if a == b:
                continue
            keys.append(chunk[a:b])
            counts.append(np.ones(b - a, dtype=np.int64) if weight is None else weight[a:b])
            single &= weight is None
        if not keys:
            return np.zeros((0, 1), dtype=np.uint64), np.zeros(0, dtype=np.int64)
        merged, weights = _add_up(np.concatenate(keys), None if single else np.concatenate(counts))
        return merged, np.ones(len(merged), dtype=np.int64) if weights is None else weights

    def _split(self, keys: IntArray, counts: IntArray, n_bits: Sequence[int]) -> Iterator[tuple[int, Outcomes]]:
        if self._shift is None:
            run, words = keys[:, 0], keys[:, 1:]
        else:
            run, words = keys[:, 0] >> self._shift, keys & ((np.uint64(1) << self._shift) - np.uint64(1))
        starts = np.flatnonzero(np.concatenate(([True], run[1:] != run[:-1])))
        ends = np.append(starts[1:], len(run))
        packed: dict[int, IntArray] = {}
        for start, end in zip(starts.tolist(), ends.tolist(), strict=True):
            number = int(run[start])
            n = n_bits[number]
            if n not in packed:
                packed[n] = packed_bytes(words, n)
            yield number, Outcomes(n, packed[n][start:end], counts[start:end])


def _add_up(keys: IntArray, counts: IntArray | None, *, least: float = 1.0) -> tuple[IntArray, IntArray | None]:
    """Keys, rising, and the total count of each; None where every key stands for one shot.

    Single shots are left as they are, equal keys side by side, where adding up would leave more than `least` of them.
    """
    keys, counts = _rising(keys, counts)
    new = _is_new(keys)
    if counts is None and np.count_nonzero(new) > least * len(keys):
        return keys, None
    starts = np.flatnonzero(new)
    if counts is not None:
        return keys[starts], np.add.reduceat(counts, starts)
    return keys[starts], np.diff(np.append(starts, len(keys)))


def _rising(keys: IntArray, counts: IntArray | None) -> tuple[IntArray, IntArray | None]:
    if keys.shape[1] == 1 and counts is None:
        return np.sort(keys[:, 0])[:, None], None  # a sort along the first axis would not use vector registers
    order = np.argsort(keys[:, 0]) if keys.shape[1] == 1 else np.lexsort(keys.T[::-1])
    return keys[order], None if counts is None else counts[order]


def _is_new(keys: IntArray) -> BoolArray:
    """Where a key differs from the one before it."""
    new = np.ones(len(keys), dtype=np.bool_)
    new[1:] = (keys[1:] != keys[:-1]).any(axis=1) if keys.shape[1] > 1 else keys[1:, 0] != keys[:-1, 0]
    return new

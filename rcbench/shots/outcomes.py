"""The measured outcomes of one circuit, as different bitstrings with counts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.errors import InputError
from rcbench.estimators.sample import Value

MAX_INDEX_BITS = 62  # a state index must fit a signed 64-bit integer


@dataclass(frozen=True, slots=True, eq=False)
class Outcomes:
    """Different outcomes and how often each was seen.

    Args:
        n_bits: classical bits of an outcome; bit 0 is the first character and the most significant.
        packed: (k, ceil(n_bits / 8)) uint8, each row one outcome as `numpy.packbits` writes it.
        counts: (k,) times each was seen, int64.
    """

    n_bits: int
    packed: IntArray
    counts: IntArray

    @classmethod
    def from_bits(cls, bits: IntArray, counts: IntArray | None = None) -> Outcomes:
        """From (shots, n_bits) zeros and ones; equal outcomes are added up."""
        bits = np.asarray(bits, dtype=np.uint8)
        packed, where = np.unique(np.packbits(bits, axis=1), axis=0, return_inverse=True)
        weights = np.ones(len(bits), dtype=np.int64) if counts is None else np.asarray(counts, dtype=np.int64)
        total = np.zeros(len(packed), dtype=np.int64)
        np.add.at(total, where.reshape(-1), weights)
        return cls(bits.shape[1], packed, total)

    @classmethod
    def from_index(cls, index: IntArray, n_bits: int, counts: IntArray | None = None) -> Outcomes:
        """From (shots,) state indices."""
        values, where = np.unique(np.asarray(index, dtype=np.int64), return_inverse=True)
        weights = np.ones(len(where), dtype=np.int64) if counts is None else np.asarray(counts, dtype=np.int64)
        total = np.zeros(len(values), dtype=np.int64)
        np.add.at(total, where.reshape(-1), weights)
        shifts = np.arange(n_bits - 1, -1, -1)
        bits = (values[:, None] >> shifts & 1).astype(np.uint8)
        return cls(n_bits, np.packbits(bits, axis=1), total)

    @property
    def shots(self) -> int:
        """Number of shots."""
        return int(self.counts.sum())

    def bits(self) -> IntArray:
        """(k, n_bits) zeros and ones of the different outcomes."""
        return np.unpackbits(self.packed.astype(np.uint8, copy=False), axis=1, count=self.n_bits)

    def index(self) -> IntArray:
        """(k,) state index of the different outcomes, int64; InputError above MAX_INDEX_BITS bits."""
        if self.n_bits > MAX_INDEX_BITS:
            raise InputError("n_bits", self.n_bits, f"at most {MAX_INDEX_BITS} bits for a state index")
        index = np.zeros(len(self.packed), dtype=np.int64)
        for column in range(
            self.packed.shape[1] - 1
        ):  # by bytes: a matrix of bits would take 8 * n_bits bytes an outcome
            index = index << 8 | self.packed[:, column]
        spare = -self.n_bits % 8  # bits that packbits filled up
        return index << (8 - spare) | self.packed[:, -1] >> spare

    def _mean(self, values: FloatArray) -> Value:
        shots = self.shots
        if shots == 0:
            raise InputError("shots", 0, "1 or more")
        mean = float(values @ self.counts) / shots
        if shots == 1:
            return Value(mean, float("inf"))
        spread = float(((values - mean) ** 2) @ self.counts) / (shots - 1)
        return Value(mean, (spread / shots) ** 0.5)

    def average(self, values: FloatArray) -> Value:
        """Mean of a function of the outcome; values: (2**n_bits,)."""
        return self._mean(np.asarray(values[self.index()], dtype=np.float64))

    def z_average(self, bit: int) -> Value:
        """Mean of +1 for 0 and -1 for 1 of one bit."""
        return self._mean(1.0 - 2.0 * self.bits()[:, bit])

    def hamming_average(self, target: IntArray, weights: FloatArray) -> Value:
        """Mean of weights[k] at Hamming distance k from the target."""
        distance = (self.bits() != np.asarray(target, dtype=np.uint8)).sum(axis=1)
        return self._mean(np.asarray(weights, dtype=np.float64)[distance])

    def collision(self) -> Value:
        """Coincident pairs of shots over all pairs, with the standard error of the U-statistic.

        Unbiased; the variance is 2 (s2 - s2^2) / (M (M - 1)) + 4 (M - 2)(s3 - s2^2) / (M (M - 1)) with s_k the unbiased
        estimate of sum p^k (Hoeffding's decomposition of a pair statistic).
        """
        shots = self.shots
        if shots < 2:
            raise InputError("shots", shots, "2 or more to count coincident pairs")
        c = self.counts.astype(np.float64)
        pairs = float(shots) * (shots - 1)
        s2 = float((c * (c - 1)).sum()) / pairs
        s3 = float((c * (c - 1) * (c - 2)).sum()) / (pairs * (shots - 2)) if shots > 2 else 0.0
        variance = (2 * (s2 - s2**2) + 4 * (shots - 2) * (s3 - s2**2)) / pairs
        return Value(s2, max(variance, 0.0) ** 0.5)

"""A predicted distribution over bitstrings: exact, or a mixture of an exact part and Monte Carlo batches."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.estimators.sample import Value

BLOCK = 2**16  # outcomes that are worked on at once


@dataclass(frozen=True, slots=True, eq=False)
class Distribution:
    """weight * exact + (1 - weight) * the mean of independent batches of trajectories.

    Args:
        n_bits: classical bits; bit 0 is the most significant of the index.
        exact: (2**n_bits,) the part known exactly (the trajectory without an error).
        weight: its probability; 1 for an exact distribution.
        batches: (n_batches, 2**n_bits) mean probabilities of independent groups of trajectories that had an error.
        tilts: by error source, (2**n_bits,) change of the distribution for one standard uncertainty of the stated rate.
    """

    n_bits: int
    exact: FloatArray
    weight: float = 1.0
    batches: FloatArray | None = None
    tilts: Mapping[str, FloatArray] = field(default_factory=dict)

    @property
    def shots(self) -> int:
        """0: nothing was sampled."""
        return 0

    @property
    def probabilities(self) -> FloatArray:
        """(2**n_bits,) the distribution itself."""
        if self.batches is None:
            return self.exact
        rest: FloatArray = self.batches.mean(axis=0)
        return self.weight * self.exact + (1 - self.weight) * rest

    def _value(self, exact: float, groups: FloatArray | None) -> Value:
        """The mean from that of the exact part and those of the batches (n_batches,)."""
        if groups is None:
            return Value(exact, 0.0)
        rest = 1 - self.weight
        error = float(groups.std(ddof=1)) / len(groups) ** 0.5 if len(groups) > 1 else float("inf")
        return Value(self.weight * exact + rest * float(groups.mean()), rest * error)

    def average(self, values: FloatArray) -> Value:
        """Mean of a function of the outcome."""
        apply = np.asarray(values, dtype=np.float64)
        return self._value(float(self.exact @ apply), None if self.batches is None else self.batches @ apply)

    def z_average(self, bit: int) -> Value:
        """Mean of +1 for 0 and -1 for 1 of one bit."""

        def mean(rows: FloatArray) -> FloatArray:
            halves = rows.reshape(len(rows), 2**bit, 2, -1).sum(axis=(1, 3), dtype=np.float64)
            return np.asarray(halves[:, 0] - halves[:, 1])

        return self._value(float(mean(self.exact[None])[0]), None if self.batches is None else mean(self.batches))

    def hamming_average(self, target: IntArray, weights: FloatArray) -> Value:
        """Mean of weights[k] at Hamming distance k from the target."""
        powers = np.int64(1) << np.arange(self.n_bits - 1, -1, -1, dtype=np.int64)
        place = int(np.asarray(target, dtype=np.int64) @ powers)
        by_distance, size = np.asarray(weights, dtype=np.float64), 2**self.n_bits
        exact, groups = 0.0, None if self.batches is None else np.zeros(len(self.batches))
        for start in range(0, size, BLOCK):  # in blocks, since the weight of every outcome is an array as large again
            block = slice(start, min(start + BLOCK, size))
            apply = by_distance[np.bitwise_count(np.arange(block.start, block.stop) ^ place)]
            exact += float(self.exact[block] @ apply)
            if groups is not None and self.batches is not None:
                groups += self.batches[:, block] @ apply
        return self._value(exact, groups)

    def collision(self) -> Value:
        """sum f^2, from pairs of different batches so that Monte Carlo noise does not add to it."""
        exact = float(self.exact @ self.exact)
        if self.batches is None:
            return Value(exact, 0.0)
        w, rest, count = self.weight, 1 - self.weight, len(self.batches)
        gram = self.batches @ self.batches.T
        cross = self.batches @ self.exact
        off = (gram.sum() - np.trace(gram)) / (count * (count - 1))
        value = w**2 * exact + 2 * w * rest * float(cross.mean()) + rest**2 * float(off)
        # delete-one-batch jackknife of the same pair statistic
        rows = (gram.sum(axis=1) - np.diag(gram)) / (count - 1)
        influence = 2 * w * rest * (cross - cross.mean()) + 2 * rest**2 * (rows - rows.mean())
        return Value(value, float(influence.std(ddof=1)) / count**0.5)

    def shifted(self, source: str) -> Distribution:
        """The distribution with one error source at one standard uncertainty above its stated rate."""
        if self.batches is None or self.weight > 1e-9:
            return Distribution(self.n_bits, self.exact + self.tilts[source] / self.weight, self.weight, self.batches)
        return Distribution(self.n_bits, self.exact, self.weight, self.batches + self.tilts[source] / (1 - self.weight))

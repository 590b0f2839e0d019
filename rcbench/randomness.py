"""Random draws: one bit generator a purpose, keyed by SHA-256, and mappings from raw bits that never change.

A draw is keyed by the campaign's seed and by what it is for, so that adding an experiment changes no other
circuit. Discrete choices are mapped from raw 64-bit words here, since the distributions of numerical
libraries change between versions while their raw generators do not.
"""

from __future__ import annotations

import hashlib

import numpy as np

from rcbench.arrays import FloatArray, IntArray


class Draw:
    """Raw random words for one purpose, and the few distributions the circuits need.

    Args:
        seed: the campaign's seed.
        key: what the draw is for: experiment, instance, purpose, and whatever its scope makes it depend on.
    """

    def __init__(self, seed: int, *key: str | int) -> None:
        text = "\x1f".join([str(seed), *(f"{type(part).__name__}:{part}" for part in key)])
        digest = hashlib.sha256(text.encode()).digest()
        self._bits = np.random.PCG64(int.from_bytes(digest, "big"))

    def words(self, size: int) -> np.ndarray:
        """(size,) raw unsigned 64-bit words."""
        return np.asarray(self._bits.random_raw(size), dtype=np.uint64).reshape(size)

    def integers(self, bound: int, size: int) -> IntArray:
        """(size,) whole numbers from 0 to bound - 1, bound at most 2**32; biased by less than 2**-31."""
        high = self.words(size) >> np.uint64(32)
        return ((high * np.uint64(bound)) >> np.uint64(32)).astype(np.int64)

    def uniform(self, size: int) -> FloatArray:
        """(size,) numbers from 0 to 1, 1 excluded, with 53 random bits each."""
        return (self.words(size) >> np.uint64(11)).astype(np.float64) * 2.0**-53

    def normal(self, size: int) -> FloatArray:
        """(size,) standard normal numbers, by Box and Muller's transform."""
        half = (size + 1) // 2
        radius = np.sqrt(-2 * np.log1p(-self.uniform(half)))
        angle = 2 * np.pi * self.uniform(half)
        return np.concatenate([radius * np.cos(angle), radius * np.sin(angle)])[:size]

    def permutation(self, size: int) -> IntArray:
        """(size,) a random order of 0 to size - 1, by Fisher and Yates' shuffle."""
        order = np.arange(size)
        words = self.words(max(size - 1, 0))
        for place in range(size - 1, 0, -1):
            other = int(words[place - 1] >> np.uint64(32)) * (place + 1) >> 32
            order[place], order[other] = order[other], order[place]
        return order

    def generator(self) -> np.random.Generator:
        """A numpy generator on the same words, for simulation noise that no file depends on."""
        return np.random.Generator(self._bits)

"""Predictions of wide registers: distributions of some bits each, where one of all bits would not fit the memory."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import reduce

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.engine.distribution import Distribution
from rcbench.errors import InputError
from rcbench.estimators.sample import Value


@dataclass(frozen=True, slots=True, eq=False)
class Parts:
    """Distributions that together hold every bit; they offer what does not need the joint distribution.

    Args:
        n_bits: classical bits. bits: of each part, in the order of its distribution. parts: the distributions.
        independent: the outcomes of different parts do not depend on each other.
    """

    n_bits: int
    bits: tuple[tuple[int, ...], ...]
    parts: tuple[Distribution, ...]
    independent: bool
    _place: dict[int, tuple[int, int]] = field(init=False)

    def __post_init__(self) -> None:
        place = {bit: (part, inner) for part, bits in enumerate(self.bits) for inner, bit in enumerate(bits)}
        object.__setattr__(self, "_place", place)

    @property
    def exact(self) -> None:
        """No probabilities of whole outcomes are held."""
        return

    @property
    def shots(self) -> int:
        """0: nothing was sampled."""
        return 0

    @property
    def tilts(self) -> dict[str, None]:
        """The error sources that `shifted` knows."""
        return dict.fromkeys(source for part in self.parts for source in part.tilts)

    def z_average(self, bit: int) -> Value:
        """Mean of +1 for 0 and -1 for 1 of one bit."""
        part, inner = self._place[bit]
        return self.parts[part].z_average(inner)

    def average(self, values: FloatArray) -> Value:
        """Refused: it needs the probability of every outcome."""
        raise self._wide("the mean of a function of all bits")

    def hamming_average(self, target: IntArray, weights: FloatArray) -> Value:
        """Mean of weights[k] at Hamming distance k from the target; of independent exact parts only."""
        counts = [
            np.array(
                [
                    part.hamming_average(target[list(bits)], np.arange(len(bits) + 1.0) == k).value
                    for k in range(len(bits) + 1)
                ]
            )
            for part, bits in zip(self._joint("the distance to the target"), self.bits, strict=True)
        ]
        shares: FloatArray = reduce(np.convolve, counts)
        return Value(float(shares @ np.asarray(weights, dtype=np.float64)), 0.0)

    def collision(self) -> Value:
        """sum f^2; of independent exact parts only."""
        return Value(float(np.prod([part.collision().value for part in self._joint("collisions")])), 0.0)

    def shifted(self, source: str) -> Parts:
        """The parts with one error source at one standard uncertainty above its stated rate."""
        moved = tuple(part.shifted(source) if source in part.tilts else part for part in self.parts)
        return Parts(self.n_bits, self.bits, moved, self.independent)

    def _joint(self, what: str) -> Sequence[Distribution]:
        if not self.independent or any(part.batches is not None for part in self.parts):
            raise self._wide(what)
        return self.parts

    def _wide(self, what: str) -> InputError:
        return InputError(
            "measured qubits",
            f"{self.n_bits}, for {what}",
            "fewer measured qubits, or averages of single qubits as in a butterfly echo: one distribution of so many "
            "bits does not fit",
        )


Prediction = Distribution | Parts

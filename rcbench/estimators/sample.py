"""What an estimator sees of one circuit: measured outcomes or a predicted distribution, behind one small face.

An estimator is written once against `Sample` and serves the measurement, the ideal prediction and the noise-model
prediction alike, so that a prediction is always of the very quantity that was measured.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import NamedTuple, Protocol

from rcbench.arrays import FloatArray, IntArray


class Value(NamedTuple):
    """A number and its standard error: shot noise of outcomes, Monte Carlo error of a prediction, 0 where exact."""

    value: float
    std_error: float


def at_least_one_shot(value: Value, shots: int, span: float) -> Value:
    """The value with a standard error no smaller than one more shot could move the mean of a function of that span.

    Shots that all agree have no spread of their own, which does not make their mean exact. Predictions stay as is.
    """
    if shots == 0:
        return value
    return Value(value.value, max(value.std_error, float(span) / (shots + 1)))


class Sample(Protocol):
    """Outcomes or a distribution over bitstrings of n_bits classical bits, bit 0 first and most significant."""

    @property
    def n_bits(self) -> int:
        """Number of classical bits."""

    @property
    def shots(self) -> int:
        """Number of shots; 0 for a predicted distribution."""

    def average(self, values: FloatArray) -> Value:
        """Mean of a function of the outcome; values: (2**n_bits,) by state index."""

    def z_average(self, bit: int) -> Value:
        """Mean of +1 for outcome 0 and -1 for outcome 1 of one bit."""

    def hamming_average(self, target: IntArray, weights: FloatArray) -> Value:
        """Mean of weights[k], k the Hamming distance to the target; target: (n_bits,), weights: (n_bits + 1,)."""

    def collision(self) -> Value:
        """Probability that two independent outcomes are equal, unbiased: pairs of different shots or trajectories."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Run:
    """One roster row with its sample. target: (n_bits,) of 0 and 1, or None; ideal: (2**n_bits,), or None."""

    circuit_id: str
    role: str
    setting: str
    n_qubits: int
    measured_qubits: tuple[int, ...]
    target: IntArray | None
    params: Mapping[str, object]
    sample: Sample
    ideal: FloatArray | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Group:
    """All runs of one instance of an experiment at one depth (and repeat): every role and setting of it."""

    experiment: str
    depth: int
    instance: int
    runs: tuple[Run, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Measured:
    """One estimated or predicted value of one group. region: as `regions` writes it, empty for the whole."""

    signature: str
    region: str
    value: float
    std_error: float
    shots: int
    circuit_id: str = ""

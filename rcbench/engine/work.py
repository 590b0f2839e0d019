"""How much work a prediction is: what was done, and what is to be expected before it starts."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass


@dataclass(slots=True)
class Work:
    """What was done, or will be.

    Args:
        amplitudes: amplitudes that operators were applied to, added up over the operators.
        seconds: wall time of evolution alone, without what the caller does with the states.
        peak_bytes: largest memory of states and sums at once.
        circuits, trajectories: how many of each.
    """

    amplitudes: float = 0.0
    seconds: float = 0.0
    peak_bytes: int = 0
    circuits: int = 0
    trajectories: int = 0

    @property
    def rate(self) -> float:
        """Amplitudes times operators a second."""
        return self.amplitudes / self.seconds if self.seconds else 0.0

    def holds(self, needed: int) -> None:
        """Note that so many bytes are held at once."""
        self.peak_bytes = max(self.peak_bytes, needed)

    @contextmanager
    def timed(self) -> Iterator[None]:
        """Add the time of a with-block."""
        start = time.perf_counter()
        try:
            yield
        finally:
            self.seconds += time.perf_counter() - start

    def text(self) -> str:
        """One line for people."""
        return (
            f"{self.circuits} circuits, {self.trajectories} trajectories: {self.seconds:.3g} s, "
            f"{self.rate / 1e9:.3g} billion amplitudes x operators a second, {self.peak_bytes / 2**20:.4g} MiB"
        )

"""How much work a prediction is: what was done, and what is to be expected before it starts.

Whatever the engine does inside `with collecting(work):` is added to that work; no caller in between has to hand it on.
"""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from dataclasses import dataclass


@dataclass(slots=True)
class Work:
    """What was done, or will be.

    Args:
        amplitudes: amplitudes that gates were applied to, added up over the gates; gates fused into one count as one.
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
        """Amplitudes times gates a second."""
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

    def facts(self) -> dict[str, float | int]:
        """What is written down of a run."""
        return {
            "simulated_circuits": self.circuits,
            "simulated_trajectories": self.trajectories,
            "evolution_seconds": round(self.seconds, 3),
            "amplitudes_times_gates": self.amplitudes,
            "amplitudes_times_gates_per_second": self.rate,
            "state_memory_bytes": self.peak_bytes,
        }

    def text(self) -> str:
        """One line for people."""
        return (
            f"{self.circuits} circuits, {self.trajectories} trajectories: {self.seconds:.3g} s, "
            f"{self.rate / 1e9:.3g} billion amplitudes x gates a second, {self.peak_bytes / 2**20:.4g} MiB"
        )


_current: ContextVar[Work | None] = ContextVar("work", default=None)


@contextmanager
def collecting(work: Work) -> Iterator[Work]:
    """Add to this work whatever the engine does inside the block."""
    token = _current.set(work)
    try:
        yield work
    finally:
        _current.reset(token)


def or_current(work: Work | None) -> Work:
    """The work given, else the one that collects, else a new one."""
    if work is not None:
        return work
    collected = _current.get()
    return Work() if collected is None else collected

"""Memory is predicted before it is taken, and what will not fit is refused with the number of bytes."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from rcbench.engine.threads import memory_quota
from rcbench.errors import InputError

DTYPES = ("complex64", "complex128")


def state_dtype(name: str) -> np.dtype[np.complexfloating]:
    """The number type of a state by name."""
    if name not in DTYPES:
        raise InputError("dtype", name, " or ".join(DTYPES))
    return np.dtype(name)


def bytes_needed(n_qubits: int, dtype: str = "complex64", states: int = 1, float64: int = 0) -> int:
    """Bytes of `states` states of n qubits and `float64` arrays of as many double-precision numbers."""
    return int(2**n_qubits * (states * state_dtype(dtype).itemsize + 8 * float64))


def available_memory() -> int:
    """Bytes this process may still take: free memory of the machine and the limit of its cgroup."""
    limit = memory_quota()
    try:
        for line in Path("/proc/meminfo").read_text().splitlines():
            if line.startswith("MemAvailable:"):
                limit = min(limit, 1024 * int(line.split()[1]))
    except OSError:
        pass
    return int(limit) if limit < float("inf") else 2**62


def require(needed: int, memory_limit: int | None, what: str) -> None:
    """Refuse work that needs more bytes than the limit, or than the machine has where no limit is given."""
    limit = available_memory() if memory_limit is None else memory_limit
    if needed > limit:
        whose = "the free memory" if memory_limit is None else "the memory limit"
        raise InputError("memory", f"{needed} bytes for {what}", f"at most {limit} bytes, {whose}")

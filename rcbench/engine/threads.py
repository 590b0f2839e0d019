"""How many threads this process may use, and a pool that runs compiled loops on them."""

from __future__ import annotations

import math
import os
from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from functools import cache
from pathlib import Path
from typing import Any

from rcbench.errors import InputError

CGROUP = Path("/sys/fs/cgroup")


def _cgroup_folders(controller: str) -> list[Path]:
    """The folders whose limits bind this process, innermost first; empty where there are no cgroups."""
    try:
        lines = Path("/proc/self/cgroup").read_text().splitlines()
    except OSError:
        return []
    folders: list[Path] = []
    for line in lines:
        _, controllers, path = line.split(":", 2)
        if controllers and controller not in controllers.split(","):
            continue
        root = CGROUP / controllers if controllers else CGROUP
        # inside a container the path of the host may not be there, and the root folder holds our own limit
        inner = root / path.lstrip("/")
        folders += [folder for folder in (inner, *inner.parents) if folder.is_relative_to(root) and folder.is_dir()]
    return folders


def _number(path: Path, field: int = 0) -> float:
    """A number of a limit file; infinite where there is no file or no limit."""
    try:
        return float(path.read_text().split()[field])
    except (OSError, ValueError, IndexError):
        return math.inf


def cpu_quota() -> float:
    """Cores that the cgroups of this process allow, infinite where they set no limit."""
    quota = math.inf
    for folder in _cgroup_folders("cpu"):
        for allowed, period in (
            (_number(folder / "cpu.max"), _number(folder / "cpu.max", 1)),
            (_number(folder / "cpu.cfs_quota_us"), _number(folder / "cpu.cfs_period_us")),
        ):
            if 0 < allowed < math.inf and period < math.inf:
                quota = min(quota, allowed / period)
    return quota


def memory_quota() -> float:
    """Bytes that the cgroups of this process allow, infinite where they set no limit."""
    limits = [math.inf]
    for folder in _cgroup_folders("memory"):
        limits += [_number(folder / "memory.max"), _number(folder / "memory.limit_in_bytes")]
    return min(limits)


@cache
def available_threads() -> int:
    """Cores this process may use: its affinity and its cgroup quota, not the machine's count."""
    try:
        cores = len(os.sched_getaffinity(0))
    except AttributeError:  # not on every system
        cores = os.cpu_count() or 1
    quota = cpu_quota()
    return max(1, cores if math.isinf(quota) else min(cores, math.ceil(quota)))


def thread_count(threads: int | None) -> int:
    """The number of threads to use: what was asked, or all that this process may use."""
    if threads is None:
        return available_threads()
    if threads < 1:
        raise InputError("threads", threads, "a whole number, 1 or more")
    return threads


class Pool:
    """Threads for loops that hold no interpreter lock; the calling thread works too.

    Work is cut the same way whatever the number of threads, so that results are the same to the last bit.
    """

    def __init__(self, threads: int | None = None) -> None:
        self.threads = thread_count(threads)
        self._executor = ThreadPoolExecutor(self.threads - 1) if self.threads > 1 else None

    def run(self, task: Callable[[int], Any], items: Iterable[int]) -> None:
        """Call the task for every item, in any order; errors are raised here."""
        queue = iter(list(items))

        def work() -> None:
            for item in queue:  # next() of a list iterator is atomic, so each item is taken once
                task(item)

        if self._executor is None:
            return work()
        helpers = [self._executor.submit(work) for _ in range(self.threads - 1)]
        try:
            work()
        except BaseException:  # an interrupt too: the others must not go on with what is left
            for _ in queue:
                pass
            raise
        finally:
            for helper in helpers:
                helper.result()

    def close(self) -> None:
        """Let the threads go."""
        if self._executor is not None:
            self._executor.shutdown()

    def __enter__(self) -> Pool:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

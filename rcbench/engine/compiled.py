"""The one decorator for compiled loops: no interpreter lock, results kept on disk wherever a folder can be written."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar, cast

import numba

F = TypeVar("F", bound=Callable[..., Any])


def kernel(function: F) -> F:
    """Compile a function of arrays and numbers with numba when it is first called.

    A package folder that cannot be written falls back to the user's cache folder (numba does that), then to a
    temporary folder, then to compiling anew in each process: numba alone would fail at import in the last two.
    """
    options = {"nogil": True, "fastmath": True, "error_model": "numpy"}
    try:
        return cast(F, numba.njit(cache=True, **options)(function))
    except RuntimeError:
        numba.config.CACHE_DIR = str(Path(tempfile.gettempdir()) / f"rcbench-compiled-{os.getuid()}")
    try:
        return cast(F, numba.njit(cache=True, **options)(function))
    except (RuntimeError, OSError):
        return cast(F, numba.njit(**options)(function))

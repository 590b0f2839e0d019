"""The decorators for compiled loops: no interpreter lock, results kept on disk wherever a folder can be written."""

from __future__ import annotations

import os
import tempfile
from pathlib import Path
from typing import Any

import numba

_numba: Any = numba  # no types for its decorators in all supported versions
# no relaxed arithmetic: results must not depend on what was compiled together or came from the disk
_OPTIONS = {"nogil": True, "error_model": "numpy", "no_cfunc_wrapper": True}


def kernel(function: Any) -> Any:
    """Compile a function of arrays and numbers with numba when it is first called.

    A package folder that cannot be written falls back to the user's cache folder (numba does that), then to a
    temporary folder, then to compiling anew in each process: numba alone would fail at import in the last two.
    """
    try:
        return _numba.njit(cache=True, **_OPTIONS)(function)
    except RuntimeError:
        _numba.config.CACHE_DIR = str(Path(tempfile.gettempdir()) / f"rcbench-compiled-{os.getuid()}")
    try:
        return _numba.njit(cache=True, **_OPTIONS)(function)
    except (RuntimeError, OSError):
        return _numba.njit(**_OPTIONS)(function)


def part(function: Any) -> Any:
    """The same for a piece that only compiled code calls: it needs no face towards Python and no file of its own."""
    return _numba.njit(no_cpython_wrapper=True, **_OPTIONS)(function)

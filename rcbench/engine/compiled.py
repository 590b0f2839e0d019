"""The decorators for compiled loops: no interpreter lock, results kept on disk wherever a folder can be written."""

from __future__ import annotations

import hashlib
import os
import shutil
import tempfile
from functools import cache
from pathlib import Path
from typing import Any

import numba

_numba: Any = numba  # no types for its decorators in all supported versions
# no relaxed arithmetic: results must not depend on what was compiled together or came from the disk
_OPTIONS = {"nogil": True, "error_model": "numpy", "no_cfunc_wrapper": True}


@cache
def cache_folder() -> Path | None:
    """Where compiled code is kept; None where nothing can be written.

    The folder's name is a digest of this package's source: numba by itself would go on using code compiled from a
    function whose own file is unchanged when a function it calls has changed in another file. Tried in turn:
    NUMBA_CACHE_DIR, the package's own folder, the user's cache folder, the folder for temporary files.
    """
    package = Path(__file__).parent
    digest = hashlib.sha256()
    for file in sorted(package.glob("*.py")):
        digest.update(file.read_bytes())
    own = package / "__pycache__"
    user = Path(os.environ.get("XDG_CACHE_HOME") or Path("~/.cache").expanduser())
    stated = os.environ.get("NUMBA_CACHE_DIR")
    parents = [own, user, Path(tempfile.gettempdir()) / f"cache-{os.getuid() if hasattr(os, 'getuid') else 'user'}"]
    for parent in [Path(stated)] if stated else parents:
        folder = parent / f"rcbench-engine-{digest.hexdigest()[:16]}"
        try:
            folder.mkdir(parents=True, exist_ok=True)
            with tempfile.TemporaryFile(dir=folder):
                pass
        except OSError:
            continue
        for old in own.glob("rcbench-engine-*") if parent == own else ():
            if old != folder:
                shutil.rmtree(old, ignore_errors=True)
        return folder
    return None


def kernel(function: Any) -> Any:
    """Compile a function of arrays and numbers with numba when it is first called, or take it from the disk."""
    folder = cache_folder()
    if folder is None:
        return _numba.njit(**_OPTIONS)(function)
    before = _numba.config.CACHE_DIR
    _numba.config.CACHE_DIR = str(folder)  # read when the decorator runs, and by others of this process too
    try:
        return _numba.njit(cache=True, **_OPTIONS)(function)
    finally:
        _numba.config.CACHE_DIR = before


def part(function: Any) -> Any:
    """The same for a piece that only compiled code calls: it needs no face towards Python and no file of its own."""
    return _numba.njit(no_cpython_wrapper=True, **_OPTIONS)(function)

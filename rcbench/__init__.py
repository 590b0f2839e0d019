"""rcbench: random circuit benchmarks. Does a quantum processor scramble as its circuits say, and keep it?

The public verbs, each fetched on first use: `load_campaign`, `build_kit`, `predict`, `read_shots`, `check_shots`,
`compare`, `write_report`. The modules hold the rest: one noun, one module.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rcbench.campaign import load_campaign
    from rcbench.errors import InputError
    from rcbench.kit import build_kit, read_kit
    from rcbench.predictions import predict
    from rcbench.report.write import write_report
    from rcbench.shots.audit import check_shots
    from rcbench.shots.reader import read_shots
    from rcbench.verbs import compare

__all__ = [
    "InputError",
    "build_kit",
    "check_shots",
    "compare",
    "load_campaign",
    "predict",
    "read_kit",
    "read_shots",
    "write_report",
]
_HOME = {
    "InputError": "rcbench.errors",
    "build_kit": "rcbench.kit",
    "check_shots": "rcbench.shots.audit",
    "compare": "rcbench.verbs",
    "load_campaign": "rcbench.campaign",
    "predict": "rcbench.predictions",
    "read_kit": "rcbench.kit",
    "read_shots": "rcbench.shots.reader",
    "write_report": "rcbench.report.write",
}


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module 'rcbench' has no attribute {name!r}")
    return getattr(import_module(_HOME[name]), name)


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})

"""The demo: an invented device, its campaign, and shots made once by a general simulator of a slightly worse device.

`run_demo` does the whole job on them. The shots are shipped; `tests/demo/make_shots.py` made them.
"""

from __future__ import annotations

import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

from rcbench.errors import InputError

HERE = Path(__file__).resolve().parent


def run_demo(out: Path, progress: Callable[[str], Any] | None = None) -> tuple[Path, str]:
    """Kit, predictions, comparison and report of the demo campaign, into one folder.

    Args:
        out: folder for everything; a folder that an earlier demo filled is completed or left as it is.
        progress: gives a progress callback for each step.
    Returns:
        Path of report.html, and the bottom line as text.
    """
    from rcbench.report.write import bottom_line_text
    from rcbench.verbs import run

    try:
        out.mkdir(parents=True, exist_ok=True)
        shutil.copyfile(HERE / "campaign.toml", out / "campaign.toml")
        shutil.copytree(HERE / "shots", out / "shots", dirs_exist_ok=True)
    except OSError as error:
        raise InputError("out", str(out), f"a folder that can be written ({error.strerror})") from error
    _, report = run(out / "campaign.toml", out / "shots", out, progress=progress)
    return report, bottom_line_text(out / "report")

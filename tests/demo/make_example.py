"""Make the worked example in reports/example: the demo's report, and a picture of its first page for the README.

python tests/demo/make_example.py          # needs chromium for the picture
"""

from __future__ import annotations

import shutil
import subprocess
import tempfile
from pathlib import Path

from rcbench.demo import run_demo

TOP = Path(__file__).resolve().parents[2]
EXAMPLE = TOP / "reports" / "example"
CHROMIUM = ("chromium", "--headless", "--no-sandbox", "--disable-gpu", "--hide-scrollbars", "--no-first-run")
QUIET = ("--disable-quic", "--disable-background-networking", "--disable-component-update", "--disable-sync")


def main() -> None:
    with tempfile.TemporaryDirectory() as folder:
        report, bottom_line = run_demo(Path(folder) / "demo")
        shutil.rmtree(EXAMPLE, ignore_errors=True)
        EXAMPLE.mkdir(parents=True)
        for name in ("report.html", "report.md", "summary.html", "comparison.csv", "provenance.json"):
            shutil.copy(report.parent / name, EXAMPLE / name)
        shutil.copytree(report.parent / "figures", EXAMPLE / "figures", ignore=shutil.ignore_patterns("*.svg"))
        shutil.copytree(report.parent / "tables", EXAMPLE / "tables")
        shot = f"--screenshot={EXAMPLE / 'first-page.png'}"
        profile = f"--user-data-dir={folder}/chromium"
        page = (EXAMPLE / "report.html").as_uri()
        subprocess.run([*CHROMIUM, *QUIET, profile, "--window-size=1100,1480", shot, page], check=True)
        print(bottom_line)


if __name__ == "__main__":
    main()

"""The package as users install it: a wheel in a fresh environment, far from any checkout."""

import subprocess
import sys
import venv
import zipfile
from pathlib import Path

import pytest

TOP = Path(__file__).resolve().parents[1]


def test_the_lock_file_is_plain_pins():
    import re

    lines = (TOP / "requirements.lock").read_text().split()
    assert len(lines) > 30
    assert all(re.fullmatch(r"[A-Za-z0-9_.-]+==[A-Za-z0-9.+]+", line) for line in lines)


def test_the_lock_file_pins_every_dependency_within_its_bounds():
    import tomllib

    from packaging.requirements import Requirement

    pins = dict(line.lower().replace("_", "-").split("==") for line in (TOP / "requirements.lock").read_text().split())
    project = tomllib.loads((TOP / "pyproject.toml").read_text())["project"]
    for text in (*project["dependencies"], *(t for extra in project["optional-dependencies"].values() for t in extra)):
        requirement = Requirement(text)
        assert pins[requirement.name.lower().replace("_", "-")] in requirement.specifier, text


def test_the_top_level_holds_the_agreed_names_only():
    listed = subprocess.run(["git", "ls-files"], cwd=TOP, capture_output=True, text=True)
    if listed.returncode:
        pytest.skip("not a git checkout")
    names = {line.split("/")[0] for line in listed.stdout.splitlines()}
    agreed = {"README.md", "DEVELOPERS.md", "LICENSE", "pyproject.toml", "requirements.lock"}
    assert {name for name in names if not name.startswith(".")} == agreed | {"rcbench", "tests", "protocols", "reports"}


def test_the_readme_has_exactly_two_commands_for_setting_up():
    text = (TOP / "README.md").read_text()
    setting_up = [line for line in text.splitlines() if "pip install" in line]
    assert len(setting_up) == 2
    assert setting_up[0].endswith("rcbench demo")
    assert "pytest" in setting_up[1]
    assert "README.md" in (TOP / ".ci" / "run").read_text()


@pytest.mark.slow
def test_a_wheel_does_the_demo_from_an_empty_folder(tmp_path):
    pip = [sys.executable, "-m", "pip"]
    subprocess.run([*pip, "wheel", "-q", "--no-deps", "-w", tmp_path, TOP], check=True)
    (wheel,) = tmp_path.glob("rcbench-*.whl")
    names = zipfile.ZipFile(wheel).namelist()
    for folder, ending in (("protocols", "*.toml"), ("reports", "*.jinja")):
        for path in (TOP / folder).glob(ending):
            assert f"rcbench/_shipped/{folder}/{path.name}" in names
    assert not [name for name in names if name.startswith("tests")]
    venv.create(tmp_path / "venv", with_pip=True)
    python = tmp_path / "venv" / "bin" / "python"
    subprocess.run([python, "-m", "pip", "install", "-q", "-c", TOP / "requirements.lock", wheel], check=True)
    empty = tmp_path / "empty"
    empty.mkdir()
    done = subprocess.run(
        [tmp_path / "venv" / "bin" / "rcbench", "demo"], cwd=empty, capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    assert (empty / "rcbench-demo" / "report" / "report.html").is_file()
    assert "Spread complete by depth" in done.stdout

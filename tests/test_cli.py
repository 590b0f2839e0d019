"""The command line as a user meets it: quick help, one message for what the user can repair, the right exit status."""

import os
import shutil
import signal
import subprocess
import sys
import time

import pytest
from small_job import CAMPAIGN, write_campaign, write_shots

from rcbench import build_kit, load_campaign
from rcbench.cli import main

HEAVY = ("numba", "cirq", "pandas", "numpy", "scipy", "matplotlib", "networkx", "pyarrow", "rich", "jinja2")


def run(*words, capsys=None):
    """(status, standard output, standard error) of the command, in this process."""
    sys.argv = ["rcbench", *map(str, words)]
    with pytest.raises(SystemExit) as stop:
        main()
    out, err = capsys.readouterr()
    return int(stop.value.code or 0), out, err


@pytest.fixture(scope="module")
def job(tmp_path_factory):
    folder = tmp_path_factory.mktemp("cli")
    text = CAMPAIGN.replace("depths = [2, 4, 6, 8]", "depths = [1, 2]").replace("instances = 8", "instances = 5")
    campaign = write_campaign(folder, text.replace("shots = 800", "shots = 50"))
    kit = build_kit(load_campaign(campaign), folder / "kit")
    write_shots(kit, folder / "shots")
    return folder


def test_help_loads_nothing_heavy():
    code = f"import sys, rcbench.cli; print([m for m in {HEAVY!r} if m in sys.modules])"
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert out.strip() == "[]"


def test_every_command_explains_itself(capsys):
    for command in ("demo", "plan", "build", "predict", "check", "compare", "report", "run", "adopt", "protocols"):
        status, out, _ = run(command, "--help", capsys=capsys)
        assert status == 0
        assert command in out


def test_the_whole_path_by_commands(job, tmp_path, capsys):
    campaign, shots = job / "campaign.toml", job / "shots"
    assert run("plan", campaign, capsys=capsys)[0] == 0
    assert run("build", campaign, "--out", tmp_path / "kit", capsys=capsys)[0] == 0
    kit = tmp_path / "kit"
    assert run("predict", kit, "--out", tmp_path / "p", "--trajectories", 16, capsys=capsys)[0] == 0
    status, out, _ = run("check", kit, shots, "--quick", capsys=capsys)
    assert status == 0
    assert "sampling" in out
    words = ("compare", kit, shots, "--out", tmp_path / "c", "--predictions", tmp_path / "p")
    assert run(*words, capsys=capsys)[0] == 0
    assert run(*words, "--strict", capsys=capsys)[0] == 1
    status, out, _ = run("report", tmp_path / "c", capsys=capsys)
    assert status == 0
    assert (tmp_path / "c" / "report.html").is_file()


def test_protocols_are_listed_and_printed(capsys):
    status, out, _ = run("protocols", capsys=capsys)
    assert status == 0
    assert {"direct-sampling", "loschmidt-echo", "mirror-echo", "butterfly-echo"} <= set(out.split())
    status, out, _ = run("protocols", "mirror-echo", capsys=capsys)
    assert "[[role]]" in out


def fails(words, message, capsys):
    status, out, err = run(*words, capsys=capsys)
    assert status == 2, (out, err)
    assert "Traceback" not in err
    assert message in err, err
    assert out == ""


def test_bad_campaigns_end_with_status_2_and_write_nothing(job, tmp_path, capsys):
    text = (job / "campaign.toml").read_text()
    for old, new, message in (
        ("seed = 11", "seed = ", "campaign.toml:3: syntax"),
        ("seed = 11", "sed = 11", "campaign.toml:3: sed"),
        ("depths = [1, 2]", "depths = [-1, 2]", "depths: found (-1, 2)"),
        ('protocol = "mirror-echo"', 'protocol = "miror-echo"', "did you mean 'mirror-echo'"),
        ("two_qubit.cz", "two_qubit.swap", "swap: found 'swap'"),
        ('layout = "line"', 'layout = "edges"\nedges = [[0, 9]]', "edges: found [0, 9]"),
        ('regions = ["0-1", "0-4"]', 'regions = ["0-7"]', "regions"),
    ):
        assert old in text
        bad = write_campaign(tmp_path / "bad", text.replace(old, new, 1))
        fails(("build", bad, "--out", tmp_path / "kit"), message, capsys)
        assert not (tmp_path / "kit").exists()


def test_a_kit_edited_by_hand_is_refused(job, tmp_path, capsys):
    for name in ("roster.csv", "campaign.toml"):
        kit = tmp_path / f"kit-{name}"
        shutil.copytree(job / "kit", kit)
        (kit / name).write_text((kit / name).read_text().replace("sampling", "sampled", 1))
        fails(("predict", kit, "--out", tmp_path / "p"), name, capsys)
        assert not (tmp_path / "p").exists()
    kit = tmp_path / "kit-circuit"
    shutil.copytree(job / "kit", kit)
    path = sorted((kit / "circuits").glob("*.qasm"))[0]
    path.write_text(path.read_text().replace("cz", "cx", 1) + "\n")
    fails(("predict", kit, "--out", tmp_path / "p2"), path.name, capsys)


def test_an_output_folder_of_other_inputs_is_refused(job, tmp_path, capsys):
    out = tmp_path / "kit"
    assert run("build", job / "campaign.toml", "--out", out, capsys=capsys)[0] == 0
    other = write_campaign(tmp_path, (job / "campaign.toml").read_text().replace("seed = 11", "seed = 12"))
    fails(("build", other, "--out", out), "other inputs", capsys)


def broken_shots(folder, name, data):
    folder.mkdir(parents=True)
    (folder / name).write_bytes(data)
    (folder / "shots.toml").write_text('bit_order = "q0-first"\n')
    return folder


@pytest.mark.parametrize(
    ("name", "data", "message"),
    [
        ("s.csv", b"circuit_id,bitstring\nsampling-sample-i000-d001,0101\n", "s.csv:2"),
        ("s.csv", b"circuit_id,bitstring\nsampling-sample-i000-d001,01012\n", "s.csv:2"),
        ("s.csv", b"circuit_id,bitstring,count\nsampling-sample-i000-d001,01010,-3\n", "s.csv:2"),
        ("s.csv", b"circuit_id,bitstring\nother-i000,01010\n", "kit"),
        ("s.csv", bytes(range(256)) * 40, "s.csv"),
        ("s.json", b'{"sampling-sample-i000-d001": {"01010": 3', "s.json"),
        ("s.npz", b"PK not a zip", "s.npz"),
        ("s.parquet", b"PAR1 nothing", "s.parquet"),
    ],
)
def test_broken_shots_are_refused_by_file_and_line(job, tmp_path, capsys, name, data, message):
    shots = broken_shots(tmp_path / "shots", name, data)
    for words in (("check", job / "kit", shots), ("compare", job / "kit", shots, "--out", tmp_path / "out")):
        fails(words, message, capsys)
        assert not (tmp_path / "out").exists()


def test_a_missing_bit_order_is_asked_for(job, tmp_path, capsys):
    shutil.copytree(job / "shots", tmp_path / "shots")
    (tmp_path / "shots" / "shots.toml").unlink()
    fails(("check", job / "kit", tmp_path / "shots"), "--bit-order", capsys)
    assert run("check", job / "kit", tmp_path / "shots", "--quick", "--bit-order", "q0-first", capsys=capsys)[0] == 0


def test_bad_rows_can_be_set_aside(job, tmp_path, capsys):
    shutil.copytree(job / "shots", tmp_path / "shots")
    with (tmp_path / "shots" / "shots.csv").open("a") as file:
        file.write("sampling-sample-i000-d001,0,0102,1\n")
    words = ("compare", job / "kit", tmp_path / "shots", "--out", tmp_path / "out", "--trajectories", 16)
    fails(words, "shots.csv:", capsys)
    assert run(*words, "--skip-bad", capsys=capsys)[0] == 0
    assert "0102" in (tmp_path / "out" / "bad-rows.csv").read_text()


def test_the_rest_of_a_kit_can_be_built(job, tmp_path, capsys):
    shutil.copytree(job / "shots", tmp_path / "shots")
    path = tmp_path / "shots" / "shots.csv"
    lines = path.read_text().splitlines(keepends=True)
    path.write_text("".join(line for line in lines if "i003" not in line))
    words = ("build", job / "campaign.toml", "--out", tmp_path / "rest", "--missing", tmp_path / "shots")
    assert run(*words, capsys=capsys)[0] == 0
    rows = (tmp_path / "rest" / "roster.csv").read_text().splitlines()[1:]
    assert rows
    assert all("i003" in row for row in rows)


@pytest.mark.skipif(
    os.geteuid() == 0 and not os.path.exists("/dev/full"), reason="needs a place that cannot be written"
)
def test_a_place_that_cannot_be_written_is_named(job, capsys):
    fails(("build", job / "campaign.toml", "--out", "/dev/full/kit"), "/dev/full", capsys)
    fails(("build", job / "campaign.toml", "--out", "/proc/kit"), "/proc/kit", capsys)


def test_a_full_disk_leaves_one_message_and_no_broken_file(job, tmp_path, capsys, monkeypatch):
    from rcbench import files

    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(files.os, "replace", full)
    fails(("predict", job / "kit", "--out", tmp_path / "p", "--trajectories", 16), "No space left on device", capsys)
    assert not list((tmp_path / "p").glob("*.csv"))


@pytest.mark.parametrize("command", ["build", "predict", "compare"])
def test_ctrl_c_ends_with_130_and_the_same_command_goes_on(job, tmp_path, command):
    out = tmp_path / "out"
    many = write_campaign(tmp_path, CAMPAIGN.replace("instances = 8", "instances = 60"))
    long = ["--trajectories", 4000]  # work for some seconds
    words = {
        "build": ["build", many, "--out", out],
        "predict": ["predict", job / "kit", "--out", out, *long],
        "compare": ["compare", job / "kit", job / "shots", "--out", out, *long],
    }[command]
    command_line = [sys.executable, "-m", "rcbench.cli", *map(str, words)]
    process = subprocess.Popen(command_line, stderr=subprocess.PIPE)
    while not out.is_dir() and process.poll() is None:
        time.sleep(0.02)
    time.sleep(0.3)
    process.send_signal(signal.SIGINT)
    message = process.communicate()[1].decode()
    assert process.returncode == 130, message
    assert "Traceback" not in message
    done = subprocess.run(command_line, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr

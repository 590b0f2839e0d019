"""Threads, memory limits and the cache of compiled code."""

from __future__ import annotations

import os
import subprocess
import sys
import threading
import tracemalloc
from pathlib import Path

import numpy as np
import pytest
from engine_cases import noise_model, turns_circuit

import rcbench
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.engine import compiled, memory, threads
from rcbench.engine.local import z_of_all
from rcbench.engine.readout import measured as measured_bits
from rcbench.engine.register import How, measured_probabilities, probabilities, whole_distributions
from rcbench.engine.state import final_state
from rcbench.engine.threads import Pool
from rcbench.engine.work import Work
from rcbench.errors import InputError


def test_default_threads_are_the_cores_this_process_may_use():
    assert threads.thread_count(None) <= len(os.sched_getaffinity(0))
    assert threads.thread_count(5) == 5
    with pytest.raises(InputError, match="threads"):
        threads.thread_count(0)


@pytest.mark.parametrize(("text", "cores"), [("150000 100000", 1.5), ("max 100000", float("inf"))])
def test_cgroup_quota_is_read(tmp_path, monkeypatch, text, cores):
    (tmp_path / "cpu.max").write_text(text)
    monkeypatch.setattr(threads, "_cgroup_folders", lambda controller: [tmp_path])
    assert threads.cpu_quota() == cores


def test_older_cgroup_quota_is_read(tmp_path, monkeypatch):
    (tmp_path / "cpu.cfs_quota_us").write_text("50000")
    (tmp_path / "cpu.cfs_period_us").write_text("100000")
    (tmp_path / "memory.limit_in_bytes").write_text("123456")
    monkeypatch.setattr(threads, "_cgroup_folders", lambda controller: [tmp_path])
    assert threads.cpu_quota() == 0.5
    assert memory.available_memory() == 123456


def test_memory_is_counted_in_states_and_numbers():
    assert memory.bytes_needed(10) == 8 * 1024
    assert memory.bytes_needed(10, "complex128", states=3, float64=2) == 1024 * (48 + 16)


def test_pool_takes_each_item_once():
    seen: list[int] = []
    lock = threading.Lock()

    def task(item: int) -> None:
        with lock:
            seen.append(item)

    with Pool(3) as pool:
        pool.run(task, range(100))
    assert sorted(seen) == list(range(100))


def test_an_error_in_a_task_is_raised_by_the_pool():
    def task(item: int) -> None:
        if item == 3:
            raise KeyError("three")

    with Pool(2) as pool, pytest.raises(KeyError, match="three"):
        pool.run(task, range(5))


def test_compiled_code_is_kept_apart_for_each_state_of_the_source(tmp_path, monkeypatch):
    monkeypatch.setenv("NUMBA_CACHE_DIR", str(tmp_path))
    monkeypatch.setattr(compiled, "__file__", str(tmp_path / "package" / "compiled.py"))
    (tmp_path / "package").mkdir()
    folders = set()
    for text in ("one", "two"):
        (tmp_path / "package" / "lanes.py").write_text(text)
        folders.add(compiled.cache_folder.__wrapped__())
    assert len(folders) == 2
    assert {folder.parent for folder in folders} == {tmp_path}


@pytest.mark.slow
@pytest.mark.parametrize("temporary", ["folder", "nothing"])
def test_a_package_folder_and_home_that_cannot_be_written_still_give_a_state(tmp_path, temporary):
    """Root can write anywhere, so the folders are files: nothing can be made inside them."""
    home = tmp_path / "home"
    home.write_text("")
    code = (
        "from rcbench.circuits.circuit import CircuitBuilder\n"
        "from rcbench.engine.state import final_state\n"
        "b = CircuitBuilder(2); b.add('h', [0]); print(abs(final_state(b.build())[2]) ** 2)\n"
    )
    package = tmp_path / "site" / "rcbench"
    package.parent.mkdir()
    source = Path(rcbench.__file__).parent
    for folder in ("", "circuits", "engine"):
        (package / folder).mkdir()
        for file in (source / folder).glob("*.py"):
            (package / folder / file.name).write_bytes(file.read_bytes())
    (package / "engine" / "__pycache__").write_text("")
    environment = {**os.environ, "PYTHONPATH": str(package.parent), "HOME": str(home), "XDG_CACHE_HOME": str(home)}
    environment["TMPDIR"] = str(tmp_path)
    if temporary == "nothing":
        (tmp_path / f"cache-{os.getuid()}").write_text("")
    environment.pop("NUMBA_CACHE_DIR", None)
    done = subprocess.run([sys.executable, "-c", code], env=environment, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert abs(float(done.stdout) - 0.5) < 1e-6


def in_use(work) -> tuple[int, object]:
    """The most bytes of arrays that were held at once while a function ran, and what it gave."""
    tracemalloc.start()
    try:
        given = work()
        return tracemalloc.get_traced_memory()[1], given
    finally:
        tracemalloc.stop()


@pytest.mark.parametrize("measured", [[3], [0, 21, 9], []])
def test_a_state_is_evolved_in_place_and_read_in_blocks(measured):
    """Nothing above 1.1 times the state's own size, for the state alone and for few measured qubits."""
    plain = turns_circuit(22, 3, seed=1)
    keep = plain.gate_rows
    gates = Circuit(22, plain.layer[keep], plain.kind[keep], plain.qubits[keep], plain.first[keep], plain.parameters)
    builder = CircuitBuilder(22)
    builder.append(gates)
    if not measured:
        peak, _ = in_use(lambda: final_state(gates))
    else:
        builder.measure(measured)
        whole = builder.build()
        peak, _ = in_use(lambda: list(whole_distributions([whole], None, How(), Work())))
    assert peak < 1.1 * memory.bytes_needed(22)


def test_predicted_memory_of_a_distribution_is_what_is_taken():
    whole, work = turns_circuit(22, 3, seed=1), Work()
    peak, _ = in_use(lambda: list(whole_distributions([whole], None, How(), work)))
    assert peak == pytest.approx(work.peak_bytes, rel=0.1)


def test_predicted_memory_of_trajectories_is_what_is_taken():
    whole, work = turns_circuit(18, 3, seed=1), Work()
    noise = noise_model(18)
    peak, _ = in_use(lambda: list(whole_distributions([whole], noise, How(trajectories=16), work)))
    assert 0.5 * work.peak_bytes < peak < 1.1 * work.peak_bytes


def test_z_of_all_qubits_is_that_of_the_marginals():
    rng = np.random.default_rng(0)
    state = rng.normal(size=2**19) + 1j * rng.normal(size=2**19)
    state /= np.linalg.norm(state)
    p = np.abs(state) ** 2
    wanted = [measured_bits(p, [qubit]) @ [1, -1] for qubit in range(19)]
    np.testing.assert_allclose(z_of_all(state), wanted, atol=1e-12)
    np.testing.assert_allclose(measured_probabilities(state, [17, 0, 3]), measured_bits(p, [17, 0, 3]), atol=1e-12)
    np.testing.assert_allclose(probabilities(state), p, atol=1e-18)

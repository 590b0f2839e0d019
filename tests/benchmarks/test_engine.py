"""Timed comparisons of the engine with peers, and its fraction of what the machine can do.

Run with `pytest -m benchmark tests/benchmarks/test_engine.py -s`. Ours and the peer take turns, medians are compared;
RCBENCH_BENCHMARK_FOLDER names a folder for the table as CSV, RCBENCH_BENCHMARK_QUBITS the sizes (20,22,24).
"""

from __future__ import annotations

import os
import statistics
import time
from collections.abc import Callable
from pathlib import Path

import cirq
import numpy as np
import pytest

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.engine.blocks import apply_plan
from rcbench.engine.noise import NoiseModel
from rcbench.engine.predict import distributions
from rcbench.engine.state import compile_circuit, final_state, zero_state
from rcbench.engine.threads import Pool, available_threads

pytestmark = [pytest.mark.benchmark, pytest.mark.filterwarnings("ignore")]

SIZES = [int(size) for size in os.environ.get("RCBENCH_BENCHMARK_QUBITS", "20,22,24").split(",")]
DEPTH = 20
ROWS: list[dict[str, object]] = []


def haar_brickwork(n: int, depth: int) -> tuple[Circuit, cirq.Circuit]:
    rng = np.random.default_rng(n)
    builder, qubits, layers = CircuitBuilder(n), cirq.LineQubit.range(n), []
    for layer in range(depth):
        for a in range(layer % 2, n - 1, 2):
            gate = cirq.testing.random_unitary(4, random_state=int(rng.integers(2**31)))
            builder.add("matrix2", [a, a + 1], np.ascontiguousarray(gate).reshape(-1).view(np.float64))
            layers.append(cirq.MatrixGate(gate).on(qubits[a], qubits[a + 1]))
        builder.next_layer()
    return builder.build(), cirq.Circuit(layers)


def turns_brickwork(n: int, depth: int) -> tuple[Circuit, cirq.Circuit]:
    """Quarter turns about X, Y or X + Y, then CZ gates; a last layer of turns."""
    rng = np.random.default_rng(n)
    builder, qubits, layers = CircuitBuilder(n), cirq.LineQubit.range(n), []
    for layer in range(depth + 1):
        for a in range(n):
            axis = rng.integers(3) / 4
            builder.add("r", [a], [np.pi / 2, axis * np.pi])
            layers.append(cirq.PhasedXPowGate(phase_exponent=axis, exponent=0.5).on(qubits[a]))
        builder.next_layer()
        for a in range(layer % 2, n - 1, 2) if layer < depth else ():
            builder.add("cz", [a, a + 1])
            layers.append(cirq.CZ(qubits[a], qubits[a + 1]))
        builder.next_layer()
    builder.measure(range(n))
    return builder.build(), cirq.Circuit(layers)


def medians(rounds: int, *runs: Callable[[], object]) -> list[float]:
    """Median seconds of each; they take turns, so that what disturbs the machine disturbs all."""
    times: list[list[float]] = [[] for _ in runs]
    for run in runs:
        run()
    for _ in range(rounds):
        for place, run in enumerate(runs):
            start = time.perf_counter()
            run()
            times[place].append(time.perf_counter() - start)
    return [statistics.median(part) for part in times]


def record(work: str, ours: float, peer: float, wanted: float, peer_name: str) -> float:
    ratio = peer / ours
    ROWS.append({"work": work, "ours_s": ours, "peer": peer_name, "peer_s": peer, "ratio": ratio, "wanted": wanted})
    print(f"\n{work:48s} ours {ours:8.4f} s   {peer_name} {peer:8.4f} s   ratio {ratio:5.2f}   wanted {wanted}")
    return ratio


@pytest.fixture(scope="module", autouse=True)
def table():
    yield
    folder = os.environ.get("RCBENCH_BENCHMARK_FOLDER")
    if folder and ROWS:
        import pandas as pd

        Path(folder).mkdir(parents=True, exist_ok=True)
        pd.DataFrame(ROWS).to_csv(Path(folder) / "engine.csv", index=False)


def qsim_runs(circuit: cirq.Circuit, fusions: tuple[int, ...] = (2, 3, 4)) -> list[Callable[[], object]]:
    qsimcirq = pytest.importorskip("qsimcirq")
    out = []
    for fusion in fusions:
        options = qsimcirq.QSimOptions(max_fused_gate_size=fusion, cpu_threads=available_threads())
        simulator = qsimcirq.QSimSimulator(options)
        out.append(lambda simulator=simulator: simulator.simulate(circuit))
    return out


@pytest.mark.parametrize("n", SIZES)
@pytest.mark.parametrize(
    ("name", "make", "wanted"), [("haar", haar_brickwork, 1.2), ("cz+quarter-turns", turns_brickwork, 2.0)]
)
def test_one_circuit(name, make, wanted, n):
    circuit, peer = make(n, DEPTH)
    rounds = 7 if n <= 20 else 5 if n <= 22 else 3
    ours, *peers = medians(rounds, lambda: final_state(circuit), *qsim_runs(peer))
    record(f"{name} n={n} depth {DEPTH}, final state", ours, min(peers), wanted, "qsimcirq")


def test_pauli_trajectories():
    qsimcirq = pytest.importorskip("qsimcirq")
    n, depth, count, p = 16, 16, 200, 0.005
    circuit, peer = turns_brickwork(n, depth)
    noise = NoiseModel(
        one_qubit=np.full(n, p / 10), two_qubit=np.full((n, n), p), t1=np.full(n, np.inf), t2=np.full(n, np.inf),
        gate_times=(30.0, 60.0), read_1_of_0=np.zeros(n), read_0_of_1=np.zeros(n),
    )  # fmt: skip
    noisy = cirq.Circuit()
    for moment in peer:
        noisy.append(moment)
        for operation in moment:
            two = len(operation.qubits) == 2
            noisy.append(cirq.depolarize(p if two else p / 10, n_qubits=2 if two else 1).on(*operation.qubits))
    simulator = qsimcirq.QSimSimulator(qsimcirq.QSimOptions(max_fused_gate_size=4, cpu_threads=available_threads()))

    def theirs() -> None:
        for seed in range(count // 20):  # a twentieth of the work, to be scaled
            qsimcirq.QSimSimulator(simulator.qsim_options, seed=seed).simulate(noisy)

    ours, peer_time = medians(3, lambda: list(distributions([circuit], noise, trajectories=count)), theirs)
    record(f"{count} Pauli trajectories, n={n} depth {depth}", ours, 20 * peer_time, 3.0, "qsimcirq")


def test_trajectory_of_ten_qubits_and_twenty_layers():
    """Not against a peer: microseconds a trajectory a core, 150 or less."""
    n, count = 10, 2000
    circuit, _ = turns_brickwork(n, 20)
    noise = NoiseModel(
        one_qubit=np.full(n, 1e-3), two_qubit=np.full((n, n), 1e-2), t1=np.full(n, 5e4), t2=np.full(n, 4e4),
        gate_times=(30.0, 60.0), read_1_of_0=np.full(n, 0.01), read_0_of_1=np.full(n, 0.02),
        uncertainty={"one_qubit": 0.1, "two_qubit": 0.1, "idle": 0.1},
    )  # fmt: skip
    (ours,) = medians(3, lambda: list(distributions([circuit], noise, trajectories=count, threads=1)))
    print(f"\n{ours / count * 1e6:.1f} microseconds a trajectory, n={n}, 20 layers, one thread")
    ROWS.append({"work": "one trajectory, n=10, 20 layers, one thread", "ours_s": ours / count, "wanted": 150e-6})


@pytest.mark.parametrize(("name", "make"), [("dense", haar_brickwork), ("cz+quarter-turns", turns_brickwork)])
def test_fraction_of_the_machine(name, make):
    """Operators alone at n = 22, against complex matrix products and in-place passes over memory."""
    n = 22
    circuit, _ = make(n, DEPTH)
    plan, state = compile_circuit(circuit, "complex64"), zero_state(n)
    rng = np.random.default_rng(0)
    square = (rng.normal(size=(2048, 2048)) + 1j).astype(np.complex64)
    with Pool() as pool:
        ours, product, passing = medians(
            5, lambda: apply_plan(state, plan, pool), lambda: square @ square, lambda: np.negative(state, out=state)
        )
    rate = 32 * 2**n * len(plan.operators) / ours / 1e9
    peak = 8 * 2048**3 / product / 1e9
    traffic = 16 * 2**n * len(plan.active) / ours / 1e9
    bandwidth = 16 * 2**n / passing / 1e9
    print(f"\n{name}: {rate:.0f} of {peak:.0f} GFLOP/s of a matrix product (32 operations an amplitude), "
          f"{len(plan.active)} sweeps at {traffic:.1f} of {bandwidth:.1f} GB/s (one thread)")  # fmt: skip
    ROWS.append(
        {"work": f"{name} n={n}, fraction of matrix product", "ours_s": ours, "ratio": rate / peak, "wanted": 0.75}
    )


@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("n", [18, 20, 22, 24])
def test_growth_with_size_and_threads(n, threads):
    if threads > available_threads():
        pytest.skip("fewer cores")
    circuit, _ = haar_brickwork(n, DEPTH)
    (ours,) = medians(3, lambda: final_state(circuit, threads=threads))
    print(f"\nhaar n={n} depth {DEPTH}, {threads} threads: {ours:.4f} s")
    ROWS.append({"work": f"haar n={n} depth {DEPTH}, {threads} threads", "ours_s": ours})

"""Timed comparisons of the engine with peers on single circuits and trajectories, and its fraction of the machine.

Run with `pytest -m benchmark tests/benchmarks -s`; see timed.py. RCBENCH_BENCHMARK_QUBITS gives the sizes (20,22,24).
"""

from __future__ import annotations

import os

import cirq
import numpy as np
import pytest
from timed import haar_brickwork, medians, note, qsim_runs, record, turns_brickwork

from rcbench.engine.blocks import apply_plan
from rcbench.engine.noise import NoiseModel
from rcbench.engine.predict import distributions
from rcbench.engine.state import compile_circuit, final_state, zero_state
from rcbench.engine.threads import Pool, available_threads

pytestmark = [pytest.mark.benchmark, pytest.mark.filterwarnings("ignore")]

SIZES = [int(size) for size in os.environ.get("RCBENCH_BENCHMARK_QUBITS", "20,22,24").split(",")]
DEPTH = 20


@pytest.mark.parametrize("n", SIZES)
@pytest.mark.parametrize(
    ("name", "make", "wanted"), [("haar", haar_brickwork, 1.2), ("cz+quarter-turns", turns_brickwork, 2.0)]
)
def test_one_circuit(name, make, wanted, n):
    circuit, peer = make(n, DEPTH)
    rounds = 7 if n <= 20 else 5 if n <= 22 else 3
    ours, *peers = medians(rounds, lambda: final_state(circuit), *qsim_runs(peer))
    record(f"{name} n={n} depth {DEPTH}, final state", ours, min(peers, key=lambda s: s.wall), wanted, "qsimcirq")


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
    record(f"{count} Pauli trajectories, n={n} depth {depth}", ours, peer_time.times(20), 3.0, "qsimcirq")


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
    note("one trajectory, n=10, 20 layers, one thread", ours.wall / count, wanted=150e-6)


@pytest.mark.parametrize(("name", "make"), [("dense", haar_brickwork), ("cz+quarter-turns", turns_brickwork)])
def test_fraction_of_the_machine(name, make):
    """Operators alone at n = 22, against complex matrix products and in-place passes over memory."""
    n = 22
    circuit, _ = make(n, DEPTH)
    plan, state = compile_circuit(circuit, "complex64"), zero_state(n)
    rng = np.random.default_rng(0)
    square = (rng.normal(size=(2048, 2048)) + 1j).astype(np.complex64)
    pieces = state.reshape(16, -1)

    def negate(piece: int) -> None:
        np.negative(pieces[piece], out=pieces[piece])

    with Pool() as pool:
        ours, product, passing = medians(
            5, lambda: apply_plan(state, plan, pool), lambda: square @ square, lambda: pool.run(negate, range(16))
        )
    # arithmetic counts as 32 operations an amplitude for a dense operator, traffic as one read and one write a sweep
    rate, peak = 32 * 2**n * len(plan.operators) / ours.wall, 8 * 2048**3 / product.wall
    traffic, bandwidth = 16 * 2**n * len(plan.active) / ours.wall, 16 * 2**n / passing.wall
    print(f"\n{name}: {rate / 1e9:.0f} of {peak / 1e9:.0f} GFLOP/s, {len(plan.active)} sweeps, "
          f"{traffic / 1e9:.1f} of {bandwidth / 1e9:.1f} GB/s")  # fmt: skip
    note(f"{name} n={n}: fraction of complex matrix product", ours.wall, ratio=rate / peak, wanted=0.75)
    note(f"{name} n={n}: fraction of in-place bandwidth", ours.wall, ratio=traffic / bandwidth, wanted=0.75)


@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("n", [18, 20, 22, 24, 26])
def test_growth_with_size_and_threads(n, threads):
    if threads > available_threads():
        pytest.skip("fewer cores")
    circuit, _ = haar_brickwork(n, DEPTH)
    (ours,) = medians(1 if n > 24 else 3, lambda: final_state(circuit, threads=threads))
    note(f"haar n={n} depth {DEPTH}, {threads} threads", ours.wall)


@pytest.mark.parametrize("depth", [5, 10, 20, 40])
def test_growth_with_depth(depth):
    circuit, _ = haar_brickwork(20, depth)
    (ours,) = medians(3, lambda: final_state(circuit))
    note(f"haar n=20 depth {depth}", ours.wall)


@pytest.mark.parametrize(("name", "make"), [("haar", haar_brickwork), ("cz+quarter-turns", turns_brickwork)])
def test_rounding(name, make):
    """Not a time: how far single precision is from double after 200 layers; a norm within 1e-5."""
    n = 14
    circuit, _ = make(n, 200)
    single, double = final_state(circuit).astype(np.complex128), final_state(circuit, "complex128")
    norm = abs(float(np.linalg.norm(single)) - 1)
    note(f"{name} n={n}, 200 layers: error of the norm (not a time)", norm, wanted=1e-5)
    note(f"{name} n={n}, 200 layers: 1 - fidelity to complex128", abs(1 - abs(np.vdot(single, double)) ** 2))
    note(f"{name} n={n}, 200 layers: distance to complex128", float(np.linalg.norm(single - double)))
    assert norm < 1e-5

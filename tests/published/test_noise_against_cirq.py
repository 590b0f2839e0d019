"""The noise model against cirq's density-matrix simulator, for each kind of rate, idle errors and readout.

cirq holds its own channels: Pauli errors, depolarising by its formula, and relaxation twirled here from the damping
channels themselves. Probabilities must agree within 4 sigma of the trajectories' batches; seeds are fixed.
"""

from __future__ import annotations

import cirq
import numpy as np
import pytest
from scipy import optimize, stats

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.device import Device, ErrorBudget, Rate, Times, Timings
from rcbench.engine.noise import NoiseModel
from rcbench.engine.predict import distributions

PAULIS = [np.eye(2), cirq.unitary(cirq.X), cirq.unitary(cirq.Y), cirq.unitary(cirq.Z)]
TIMINGS = Timings(one_qubit=25.0, two_qubit=70.0)


def brickwork(n_qubits: int, depth: int, seed: int) -> Circuit:
    """Quarter turns of the native set and CZ gates; in odd layers the end qubits are idle."""
    rng = np.random.default_rng(seed)
    builder = CircuitBuilder(n_qubits)
    for layer in range(depth + 1):
        for qubit in range(n_qubits):
            builder.add("r", [qubit], [np.pi / 2, rng.choice([0, np.pi / 4, np.pi / 2])])
        builder.next_layer()
        for qubit in range(n_qubits):
            builder.add("rz", [qubit], [rng.uniform(-3, 3)])
        builder.barrier()
        for qubit in range(layer % 2, n_qubits - 1, 2) if layer < depth else ():
            builder.add("cz", [qubit, qubit + 1])
        builder.barrier()
    builder.measure(range(n_qubits))
    return builder.build()


def mixed_with_full_depolarising(p: float, n_qubits: int) -> cirq.KrausChannel:
    """rho -> (1 - p) rho + p I / d, from its own definition."""
    d = 2**n_qubits
    paulis = [np.array([[1.0]])]
    for _ in range(n_qubits):
        paulis = [np.kron(a, b) for a in paulis for b in PAULIS]
    weights = np.full(d * d, p / d**2)
    weights[0] += 1 - p
    return cirq.KrausChannel([np.sqrt(w) * pauli for w, pauli in zip(weights, paulis, strict=True)])


def average_infidelity(channel: cirq.KrausChannel) -> float:
    """1 minus the fidelity averaged over pure input states."""
    kraus = cirq.kraus(channel)
    d = len(kraus[0])
    # the average over states of |<psi|K|psi>|^2 is (|tr K|^2 + tr K K^dag) / (d (d + 1))
    total = sum(abs(np.trace(k)) ** 2 + np.trace(k @ k.conj().T).real for k in kraus)
    return float(1 - total / (d * (d + 1)))


def channel_of(rate: float, kind: str, n_qubits: int) -> cirq.Gate:
    if kind == "pauli":
        return cirq.depolarize(rate, n_qubits=n_qubits)  # cirq's p is that of any non-identity Pauli
    if kind == "depolarising":
        return mixed_with_full_depolarising(rate, n_qubits)
    p = optimize.brentq(lambda p: average_infidelity(mixed_with_full_depolarising(p, n_qubits)) - rate, 0, 1)
    return mixed_with_full_depolarising(p, n_qubits)


def twirled_relaxation(time: float, t1: float, t2: float) -> cirq.KrausChannel:
    """Amplitude damping and dephasing for a time, conjugated with random Paulis."""
    gamma = 1 - np.exp(-time / t1)
    dephasing = (1 - np.exp(-time / t2 + time / (2 * t1))) / 2
    damped = cirq.kraus(cirq.amplitude_damp(gamma))
    both = [a @ b for a in cirq.kraus(cirq.phase_flip(dephasing)) for b in damped]
    return cirq.KrausChannel([p @ k @ p / 2 for p in PAULIS for k in both])


def cirq_probabilities(circuit: Circuit, budget: ErrorBudget) -> np.ndarray:
    """Every gate followed by its channel; idle channels after each layer that takes time; measurements left out."""
    qubits = cirq.LineQubit.range(circuit.n_qubits)
    out = cirq.Circuit()
    for layer in range(int(circuit.layer[-1]) + 1):
        rows = np.flatnonzero((circuit.layer == layer) & circuit.gate_rows)
        names = {
            int(q): len(circuit.qubits[row][circuit.qubits[row] >= 0])
            for row in rows
            for q in circuit.qubits[row]
            if q >= 0
        }
        timed = False
        for row in rows:
            pair = [qubits[q] for q in circuit.qubits[row] if q >= 0]
            angles = circuit.row_parameters(row)
            if len(pair) == 2:
                out.append(cirq.CZ(*pair))
            elif len(angles) == 1:
                out.append(cirq.rz(angles[0]).on(*pair))
                continue  # virtual
            else:
                out.append(cirq.PhasedXPowGate(phase_exponent=angles[1] / np.pi, exponent=angles[0] / np.pi).on(*pair))
            timed = True
            stated = budget.two_qubit if len(pair) == 2 else budget.one_qubit
            if stated is not None:
                place = [int(q) for q in circuit.qubits[row] if q >= 0]
                out.append(channel_of(stated.at(*place), stated.kind, len(pair)).on(*pair))
        if timed and budget.idle is not None:
            length = {1: TIMINGS.one_qubit, 2: TIMINGS.two_qubit}
            duration = max(length[size] for size in names.values())
            for q in range(circuit.n_qubits):
                waits = duration - length.get(names.get(q, 0), 0.0)
                if waits > 0:
                    t1, t2 = budget.idle.at(q)
                    out.append(twirled_relaxation(waits, 1e3 * t1, 1e3 * t2).on(qubits[q]))
    rho = cirq.DensityMatrixSimulator(dtype=np.complex128).simulate(out, qubit_order=qubits).final_density_matrix
    return rho.diagonal().real


def assert_agrees(n_qubits: int, depth: int, trajectories: int, **errors) -> None:
    budget = ErrorBudget(**errors)
    device = Device(
        name="invented", n_qubits=n_qubits, layout="line", couplers=tuple((q, q + 1) for q in range(n_qubits - 1)),
        timings=TIMINGS, errors=budget,
    )  # fmt: skip
    circuit = brickwork(n_qubits, depth, seed=n_qubits)
    noise = NoiseModel.from_device(device, range(n_qubits))
    ((_, _, found),) = distributions([circuit], noise, trajectories=trajectories, seed=2)
    exact = cirq_probabilities(circuit, budget)
    for q in range(n_qubits):
        up = budget.readout_0to1.at(q) if budget.readout_0to1 else 0.0
        down = budget.readout_1to0.at(q) if budget.readout_1to0 else 0.0
        part = exact.reshape(2**q, 2, -1)
        exact = np.stack(
            [(1 - up) * part[:, 0] + down * part[:, 1], up * part[:, 0] + (1 - down) * part[:, 1]], axis=1
        ).reshape(-1)
    limit = stats.t.isf(stats.norm.sf(4), len(found.batches) - 1)
    error = (1 - found.weight) * found.batches.std(axis=0, ddof=1) / np.sqrt(len(found.batches))
    z = (found.probabilities - exact) / (limit * error + 1e-6)
    assert np.all(np.abs(z) < 1)
    # and the test can tell: without errors the distribution is many sigma away
    assert np.abs((found.exact - exact) / (limit * error + 1e-6)).max() > 3


RATES = {
    "pauli": {
        "one_qubit": Rate(default=0.004, values={(1,): 0.01}, kind="pauli"),
        "two_qubit": Rate(default=0.02, values={(1, 2): 0.05}, kind="pauli"),
    },
    "average-infidelity": {"one_qubit": Rate(default=0.004), "two_qubit": Rate(default=0.02, values={(2, 3): 0.04})},
    "depolarising": {
        "one_qubit": Rate(default=0.006, kind="depolarising"),
        "two_qubit": Rate(default=0.03, kind="depolarising"),
    },
}
IDLE = {"idle": Times(t1=4.0, t2=3.0, t1_values={0: 2.0}, t2_values={3: 6.0})}
READOUT = {"readout_0to1": Rate(default=0.02, values={(0,): 0.05}), "readout_1to0": Rate(default=0.06)}


@pytest.mark.parametrize("kind", RATES)
def test_gate_errors_of_four_qubits_agree_for_each_kind_of_rate(kind):
    assert_agrees(4, 5, 2000, **RATES[kind])


def test_idle_errors_of_four_qubits_agree():
    assert_agrees(4, 5, 2000, **IDLE)


def test_readout_flips_of_four_qubits_agree():
    assert_agrees(4, 5, 2000, two_qubit=Rate(default=0.02), **READOUT)


@pytest.mark.parametrize("kind", RATES)
@pytest.mark.parametrize("n_qubits", [4, 6])
def test_all_sources_together_agree(n_qubits, kind):
    assert_agrees(n_qubits, 8, 20000, **RATES[kind], **IDLE, **READOUT)


def test_idle_errors_of_six_qubits_agree():
    assert_agrees(6, 8, 20000, **IDLE)

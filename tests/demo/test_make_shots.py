import cirq
import numpy as np
import pytest
from make_shots import Depolarize, NoisyOneQubit, Wait, noisy, without_measurements


@pytest.mark.parametrize("n_qubits", [1, 2])
def test_the_quick_channel_is_cirqs_own_depolarizing_channel(n_qubits):
    qubits = cirq.LineQubit.range(3)
    circuit = cirq.Circuit(cirq.H.on_each(*qubits), cirq.CZ(*qubits[:2]), cirq.CZ(*qubits[1:]), cirq.T.on_each(*qubits))
    place = qubits[1:] if n_qubits == 2 else qubits[1:2]
    simulator = cirq.DensityMatrixSimulator(dtype=np.complex128)
    ours = simulator.simulate(circuit + Depolarize(0.2, n_qubits)(*place)).final_density_matrix
    theirs = simulator.simulate(circuit + cirq.depolarize(0.2, n_qubits=n_qubits)(*place)).final_density_matrix
    assert np.abs(ours - theirs).max() < 1e-12


def test_waiting_qubits_lose_coherence_at_t2_and_population_at_t1():
    q = cirq.LineQubit(0)
    other = cirq.LineQubit(1)
    device = {
        "errors": {"one_qubit": {"rate": 0.0}, "two_qubit": {"rate": 0.0}, "idle": {"t1_us": 50, "t2_us": 30}},
        "timings": {"one_qubit_ns": 500.0, "two_qubit_ns": 60.0},
    }
    start = cirq.Circuit(cirq.Moment(cirq.Y(q) ** 0.5))
    body = noisy(cirq.Circuit(cirq.Moment(cirq.X(other))), device, [q, other])
    full = cirq.DensityMatrixSimulator(dtype=np.complex128).simulate(start + body, qubit_order=[q, other])
    rho = cirq.partial_trace(full.final_density_matrix.reshape(2, 2, 2, 2), [0])
    assert abs(rho[0, 1]) == pytest.approx(0.5 * np.exp(-0.5 / 30), abs=1e-9)
    assert rho[1, 1].real == pytest.approx(0.5 * np.exp(-0.5 / 50), abs=1e-9)


def test_measurements_are_taken_out_moment_by_moment():
    q = cirq.LineQubit(0)
    circuit = cirq.Circuit(cirq.Moment(cirq.X(q)), cirq.Moment(cirq.measure(q)))
    assert without_measurements(circuit) == cirq.Circuit(cirq.Moment(cirq.X(q)), cirq.Moment())


def test_the_quick_waiting_channel_is_cirqs_damping_channels_in_turn():
    qubits = cirq.LineQubit.range(3)
    circuit = cirq.Circuit(cirq.H.on_each(*qubits), cirq.CZ(*qubits[:2]), cirq.CZ(*qubits[1:]), cirq.X.on_each(*qubits))
    wait = Wait(500.0, 50_000.0, 30_000.0)
    simulator = cirq.DensityMatrixSimulator(dtype=np.complex128)
    ours = simulator.simulate(circuit + wait(qubits[1])).final_density_matrix
    damped = [cirq.amplitude_damp(wait.down)(qubits[1]), cirq.phase_damp(wait.dephase)(qubits[1])]
    theirs = simulator.simulate(circuit + damped).final_density_matrix
    assert np.abs(ours - theirs).max() < 1e-12


def test_the_quick_noisy_gate_is_the_gate_and_then_cirqs_depolarizing_channel():
    qubits = cirq.LineQubit.range(3)
    circuit = cirq.Circuit(cirq.H.on_each(*qubits), cirq.CZ(*qubits[:2]), cirq.CZ(*qubits[1:]))
    gate = cirq.PhasedXPowGate(phase_exponent=0.3, exponent=0.5)(qubits[1])
    simulator = cirq.DensityMatrixSimulator(dtype=np.complex128)
    ours = simulator.simulate(circuit + NoisyOneQubit(cirq.unitary(gate), 0.1)(qubits[1])).final_density_matrix
    theirs = simulator.simulate(circuit + cirq.Circuit(gate, cirq.depolarize(0.1)(qubits[1]))).final_density_matrix
    assert np.abs(ours - theirs).max() < 1e-12

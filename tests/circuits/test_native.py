from __future__ import annotations

from itertools import product

import cirq
import numpy as np
import pytest
from circuit_cases import phase_distance
from scipy.linalg import expm
from scipy.stats import unitary_group

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.export import to_cirq
from rcbench.circuits.gates import CODE, VIRTUAL
from rcbench.circuits.native import SERVED, add_one_qubit, euler_angles, served_parameters, snap
from rcbench.device import NATIVE_ONE_QUBIT, NATIVE_TWO_QUBIT, NativeGate
from rcbench.errors import InputError

PULSES = {"u": {"u"}, "r+rz": {"r", "rz"}, "sx+rz": {"sx", "rz"}}
LONGEST = {"u": 1, "r+rz": 1, "sx+rz": 2}  # layers that take time
CLIFFORDS = cirq.SingleQubitCliffordGate.all_single_qubit_cliffords


def in_native_gates(native: str, matrices: np.ndarray) -> Circuit:
    builder = CircuitBuilder(len(matrices))
    add_one_qubit(builder, native, range(len(matrices)), np.asarray(matrices, dtype=np.complex128))
    return builder.build()


def one_by_one(circuit: Circuit) -> list[np.ndarray]:
    """The unitary of each qubit, worked out by Cirq."""
    built = to_cirq(circuit)
    qubits = cirq.LineQubit.range(circuit.n_qubits)
    return [
        cirq.Circuit(op for op in built.all_operations() if op.qubits == (q,)).unitary(
            qubits_that_should_be_present=[q]
        )
        for q in qubits
    ]


@pytest.mark.parametrize("native", NATIVE_ONE_QUBIT)
def test_haar_gates_come_out_right_to_rounding_in_every_native_set(native):
    wanted = unitary_group.rvs(2, size=60, random_state=3)
    circuit = in_native_gates(native, wanted)
    assert PULSES[native] >= {name for name in CODE if CODE[name] in circuit.kind}
    assert max(phase_distance(one, two) for one, two in zip(one_by_one(circuit), wanted, strict=True)) < 1e-14
    assert circuit.n_layers == LONGEST[native]


@pytest.mark.parametrize("native", NATIVE_ONE_QUBIT)
def test_gates_next_to_the_identity_and_to_a_half_turn_lose_no_digits(native):
    generator = np.array([[0.3, 0.5 + 0.2j], [0.5 - 0.2j, -0.7]])
    turns = [expm(1j * 10.0**-k * generator) for k in range(1, 18)]
    wanted = np.array([base @ turn for turn, base in product(turns, (np.eye(2), cirq.unitary(cirq.X)))])
    found = one_by_one(in_native_gates(native, wanted))
    assert max(phase_distance(one, two) for one, two in zip(found, wanted, strict=True)) < 3e-12  # angles snap at 1e-12


@pytest.mark.parametrize("native", NATIVE_ONE_QUBIT)
def test_cliffords_have_angles_that_are_exact_multiples_of_an_eighth_turn(native):
    wanted = np.array([cirq.unitary(gate) for gate in CLIFFORDS])
    circuit = in_native_gates(native, wanted)
    steps = circuit.parameters * (4 / np.pi)
    np.testing.assert_array_equal(circuit.parameters, np.round(steps) * (np.pi / 4))
    assert not np.any(np.signbit(circuit.parameters) & (circuit.parameters == 0))
    assert max(phase_distance(one, two) for one, two in zip(one_by_one(circuit), wanted, strict=True)) < 1e-15


@pytest.mark.parametrize("native", NATIVE_ONE_QUBIT)
def test_the_identity_adds_no_row_whatever_its_phase(native):
    circuit = in_native_gates(native, np.array([np.eye(2), 1j * np.eye(2)]))
    assert len(circuit) == 0


@pytest.mark.parametrize("native", ["r+rz", "sx+rz"])
def test_diagonal_gates_take_no_time_where_z_is_virtual(native):
    circuit = in_native_gates(native, np.array([cirq.unitary(cirq.S), cirq.unitary(cirq.rz(0.3))]))
    assert VIRTUAL[circuit.kind].all()
    np.testing.assert_allclose(circuit.parameters, [np.pi / 2, 0.3], rtol=1e-15)


def test_quarter_turns_of_the_equator_are_one_pulse_with_no_virtual_gate():
    wanted = np.array([expm(-0.25j * np.pi * cirq.unitary(pauli)) for pauli in (cirq.X, cirq.Y)])
    circuit = in_native_gates("r+rz", wanted)
    assert circuit.kind.tolist() == [CODE["r"]] * 2
    np.testing.assert_array_equal(circuit.parameters, [np.pi / 2, 0, np.pi / 2, np.pi / 2])


def test_angles_snap_within_a_millionth_of_a_millionth_only_and_wrap_to_one_turn():
    angles = np.array([np.pi / 4 + 1e-13, np.pi / 4 + 1e-11, 3 * np.pi, -np.pi, 7.0])
    np.testing.assert_array_equal(snap(angles), [np.pi / 4, np.pi / 4 + 1e-11, np.pi, np.pi, 7.0 - 2 * np.pi])


def test_euler_angles_keep_the_shape_in_front():
    matrices = unitary_group.rvs(2, size=6, random_state=1).reshape(2, 3, 2, 2)
    assert euler_angles(matrices).shape == (2, 3, 3)
    np.testing.assert_array_equal(euler_angles(matrices)[1, 2], euler_angles(matrices[1, 2]))


def test_an_unknown_native_set_is_refused_by_name():
    with pytest.raises(InputError, match=r"one_qubit: found 'v'; allowed: u, r\+rz, sx\+rz"):
        in_native_gates("v", np.eye(2)[None])


def test_random_two_qubit_gates_are_served_on_every_native_gate():
    assert set(SERVED) == {(logical, native) for logical in ("haar", "clifford") for native in NATIVE_TWO_QUBIT}


def test_couplers_with_different_angles_are_refused_where_gates_are_compiled():
    half = np.pi / 2
    same = NativeGate(name="fsim", parameters=(half, 0.0), by_coupler={(0, 1): (half + 1e-9, 0.0)})
    assert served_parameters(same) == (half, 0.0)
    assert served_parameters(NativeGate(name="zz", by_coupler={(0, 1): (half,)})) == (half,)
    different = NativeGate(name="fsim", parameters=(half, 0.0), by_coupler={(0, 1): (1.5, 0.1)})
    with pytest.raises(InputError, match=r"fsim: found .*1\.5, 0\.1.*; allowed: the same angles on all couplers"):
        served_parameters(different)

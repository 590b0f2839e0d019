from __future__ import annotations

import json
from dataclasses import replace

import cirq
import numpy as np
import pytest
from circuit_cases import phase_distance, unitary

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.export import (
    SUFFIX,
    angle_text,
    to_cirq,
    to_cirq_json,
    to_qasm2,
    to_qasm3,
    write_circuit,
)
from rcbench.circuits.gates import CODE, KINDS
from rcbench.errors import InputError

ANGLES = (0.7, -2.3, 1.1)


def every_gate() -> Circuit:
    """Each named unitary kind once on three qubits, with a barrier in the middle."""
    builder = CircuitBuilder(3)
    for number, kind in enumerate(kind for kind in KINDS if kind.matrices is not None and "matrix" not in kind.name):
        qubits = [(number + shift) % 3 for shift in range(kind.n_qubits)]
        builder.add(kind.name, qubits, ANGLES[: kind.n_parameters])
        builder.next_layer()
        if number == 5:
            builder.barrier()
    return builder.build()


def small() -> Circuit:
    builder = CircuitBuilder(3)
    builder.add("u", [0], (0.1, -1e-05, 3e-17))
    builder.add("r", [1], (np.pi / 2, np.pi / 4))
    builder.barrier()
    builder.add("iswap", [0, 1])
    builder.barrier()
    builder.measure([2, 0])
    return builder.build()


def test_openqasm_3_is_written_line_by_line():
    assert to_qasm3(small()).splitlines() == [
        "OPENQASM 3.0;",
        'include "stdgates.inc";',
        "gate r(alpha, beta) a { U(alpha, beta - pi/2, pi/2 - beta) a; }",
        "gate iswap a, b { s a; s b; h a; cx a, b; cx b, a; h b; }",
        "qubit[3] q;",
        "bit[2] c;",
        "U(0.1, -1.0e-05, 3.0e-17) q[0];",
        "r(1.5707963267948966, 0.7853981633974483) q[1];",
        "barrier q;",
        "iswap q[0], q[1];",
        "barrier q;",
        "c[0] = measure q[2];",
        "c[1] = measure q[0];",
    ]


def test_openqasm_2_has_the_same_rows_in_its_own_words():
    lines = to_qasm2(small()).splitlines()
    assert lines[:2] == ["OPENQASM 2.0;", 'include "qelib1.inc";']
    assert lines[2] == "gate r(alpha, beta) a { u3(alpha, beta - pi/2, pi/2 - beta) a; }"
    assert lines[4:7] == ["qreg q[3];", "creg c[2];", "u3(0.1, -1.0e-05, 3.0e-17) q[0];"]
    assert lines[-2:] == ["measure q[2] -> c[0];", "measure q[0] -> c[1];"]


def test_a_circuit_without_measurement_declares_no_bits():
    assert "bit[" not in to_qasm3(every_gate()).replace("qubit[", "")
    assert "creg" not in to_qasm2(every_gate())


def test_angles_are_text_that_reads_back_as_the_same_float():
    values = [*np.random.default_rng(2).normal(size=200).tolist(), np.pi, 1e-05, -1e-300, 5e22, 0.0]
    texts = angle_text(values)
    assert [float(text) for text in texts] == values
    assert all("." in text for text in texts)  # OpenQASM 2.0 takes no 1e-05


def test_every_gate_kind_is_right_in_cirq_up_to_phase():
    circuit = every_gate()
    found = to_cirq(circuit).unitary(qubit_order=cirq.LineQubit.range(3))
    assert phase_distance(found, unitary(circuit)) < 1e-14


def test_each_kind_alone_means_the_gate_that_cirq_has_by_that_name():
    """The matrices of our table against Cirq's own gates, built by name and not by our writer."""
    a, b, c = ANGLES
    half_turns = {
        "x": cirq.X, "y": cirq.Y, "z": cirq.Z, "h": cirq.H, "s": cirq.S, "sdg": cirq.S**-1, "sx": cirq.X**0.5,
        "sxdg": cirq.X**-0.5, "rz": cirq.rz(a), "r": cirq.PhasedXPowGate(exponent=a / np.pi, phase_exponent=b / np.pi),
        "u": cirq.PhasedXZGate(x_exponent=a / np.pi, z_exponent=(b + c) / np.pi, axis_phase_exponent=0.5 - c / np.pi),
        "cz": cirq.CZ, "cx": cirq.CNOT, "iswap": cirq.ISWAP, "sqrt_iswap": cirq.SQRT_ISWAP, "fsim": cirq.FSimGate(a, b),
        "zz": cirq.ZZ ** (a / np.pi),
    }  # fmt: skip
    for name, gate in half_turns.items():
        kind = KINDS[CODE[name]]
        builder = CircuitBuilder(kind.n_qubits)
        builder.add(name, range(kind.n_qubits), ANGLES[: kind.n_parameters])
        operation = next(to_cirq(builder.build()).all_operations())
        assert phase_distance(cirq.unitary(operation), cirq.unitary(gate)) < 1e-15, name


def test_cirq_json_has_one_moment_a_layer_and_an_empty_one_a_barrier():
    circuit = every_gate()
    built = to_cirq(circuit)
    assert len(built) == len(np.unique(circuit.layer))
    barrier = int(np.searchsorted(np.unique(circuit.layer), circuit.layer[circuit.kind == CODE["barrier"]][0]))
    assert [index for index, moment in enumerate(built) if not moment] == [barrier]
    assert cirq.read_json(json_text=cirq.to_json(built)) == built
    assert len(json.loads(to_cirq_json(circuit))["moments"]) == len(built)


def test_cirq_measures_all_bits_with_one_key_in_the_order_of_the_classical_bits():
    measured = [op for op in to_cirq(small()).all_operations() if cirq.is_measurement(op)]
    assert [(cirq.measurement_key_name(op), op.qubits) for op in measured] == [
        ("c", (cirq.LineQubit(2), cirq.LineQubit(0)))
    ]


def test_measurements_of_several_layers_have_a_key_a_bit_and_resets_stay():
    builder = CircuitBuilder(2)
    builder.add("measure", [0, 0])
    builder.next_layer()
    builder.add("reset", [0])
    builder.next_layer()
    builder.add("measure", [1, 1])
    circuit = builder.build()
    operations = list(to_cirq(circuit).all_operations())
    assert [cirq.measurement_key_name(op) for op in operations if cirq.is_measurement(op)] == ["c[0]", "c[1]"]
    assert operations[1].gate == cirq.ResetChannel()
    assert "reset q[0];" in to_qasm3(circuit).splitlines()
    assert "measure q[1] -> c[1];" in to_qasm2(circuit).splitlines()


def test_a_gate_that_could_slip_into_an_earlier_layer_gets_a_barrier_before_it():
    builder = CircuitBuilder(4)
    builder.add("u", [0], ANGLES)
    builder.next_layer()
    builder.add("cz", [0, 1])
    builder.next_layer()
    builder.add("cz", [2, 3])  # free all along
    builder.next_layer()
    builder.add("u", [2], ANGLES)
    circuit = builder.build()
    assert to_qasm3(circuit).splitlines()[-5:] == [
        "U(0.7, -2.3, 1.1) q[0];",
        "cz q[0], q[1];",
        "barrier q[0], q[2], q[3];",
        "cz q[2], q[3];",
        "U(0.7, -2.3, 1.1) q[2];",
    ]


def test_virtual_gates_take_no_time_so_pulses_that_wait_for_them_need_no_barrier():
    builder = CircuitBuilder(2)
    builder.add("rz", [0], (0.3,))
    builder.next_layer()
    builder.add("sx", [0])
    builder.add("sx", [1])
    builder.next_layer()
    builder.add("rz", [1], (0.4,))
    builder.next_layer()
    builder.add("cz", [0, 1])
    assert "barrier" not in to_qasm3(builder.build())


def test_gates_stored_as_matrices_go_to_cirq_and_are_refused_in_openqasm():
    builder = CircuitBuilder(2)
    entries = cirq.unitary(cirq.CNOT**0.3)
    builder.add("matrix2", [0, 1], np.stack([entries.real, entries.imag], axis=-1).ravel())
    circuit = builder.build()
    np.testing.assert_allclose(to_cirq(circuit).unitary(), entries, atol=1e-15)
    for write in (to_qasm2, to_qasm3):
        with pytest.raises(InputError, match="gate: found 'matrix2'; allowed: gates with a name"):
            write(circuit)


def test_an_angle_that_is_no_number_is_refused_in_every_format():
    circuit = small()
    broken = replace(circuit, parameters=np.where(circuit.parameters == 0.1, np.nan, circuit.parameters))
    for name in SUFFIX:
        with pytest.raises(InputError, match="angle: found 'not a finite number'"):
            write_circuit(broken, name)


def test_an_unknown_format_is_refused_with_the_names_there_are():
    with pytest.raises(InputError, match="circuit_format: found 'qasm4'; allowed: qasm3, qasm2, cirq-json"):
        write_circuit(small(), "qasm4")

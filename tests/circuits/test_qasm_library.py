"""The standard gates of OpenQASM against qiskit's own readers, and modifiers against plain matrices."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_cases import phase_distance, unitary
from qasm_cases import HEAD2, HEAD3, qiskit_unitary, rows
from scipy.linalg import fractional_matrix_power

from rcbench.circuits.qasm import read_qasm
from rcbench.circuits.qasm_definitions import gate_set
from rcbench.circuits.qasm_library import NAMES

ANGLES = ("0.3", "1.1", "-0.7", "2.2")
X = np.array([[0, 1], [1, 0]])


def one_call(name: str, library: str, version: int) -> str:
    """A program with one call of a standard gate, at generic angles."""
    gate = gate_set(version, frozenset((library,)), (), ()).get(name)
    assert gate is not None
    angles = f"({', '.join(ANGLES[: gate.n_parameters])})" if gate.n_parameters else ""
    places = ", ".join(f"q[{qubit}]" for qubit in range(gate.n_qubits))
    register = f"qreg q[{gate.n_qubits}];" if version == 2 else f"qubit[{gate.n_qubits}] q;"
    return f"{HEAD2 if version == 2 else HEAD3}{register}\n{name}{angles} {places};\n"


@pytest.mark.parametrize("name", sorted(NAMES["qelib1.inc"] - {"u0"}))
def test_every_gate_of_the_2_0_file_has_the_unitary_that_qiskit_gives_it(name):
    text = one_call(name, "qelib1.inc", 2)
    assert phase_distance(unitary(read_qasm(text, name="t")), qiskit_unitary(text)) < 1e-9


@pytest.mark.parametrize("name", sorted(NAMES["stdgates.inc"]))
def test_every_gate_of_the_3_file_has_the_unitary_that_qiskit_gives_it(name):
    text = one_call(name, "stdgates.inc", 3)
    assert phase_distance(unitary(read_qasm(text, name="t")), qiskit_unitary(text)) < 1e-9


@pytest.mark.parametrize(
    "name", ["p", "x", "y", "z", "h", "s", "sdg", "t", "tdg", "sx", "rx", "ry", "rz", "phase", "id", "u1"]
)
def test_a_control_sees_the_global_phase_that_qiskit_gives_a_standard_gate(name):
    """Global phases are invisible until a control makes them relative ones."""
    gate = gate_set(3, frozenset(("stdgates.inc",)), (), ()).get(name)
    assert gate is not None
    angles = f"({', '.join(ANGLES[: gate.n_parameters])})" if gate.n_parameters else ""
    text = f"{HEAD3}qubit[2] q;\nctrl @ {name}{angles} q[0], q[1];\n"
    assert phase_distance(unitary(read_qasm(text, name="t")), qiskit_unitary(text)) < 1e-9


@pytest.mark.parametrize(
    ("call", "angles"), [("u2(1.1, -0.7)", (np.pi / 2, 1.1, -0.7)), ("u3(0.3, 1.1, -0.7)", (0.3, 1.1, -0.7))]
)
def test_u2_and_u3_have_determinant_one_under_a_control_as_the_standard_file_defines_them(call, angles):
    """gphase(-(phi + lambda)/2) stands in their definitions; qiskit leaves it out."""
    theta, phi, lam = angles
    rotation = np.exp(-0.5j * (phi + lam)) * np.array(
        [
            [np.cos(theta / 2), -np.exp(1j * lam) * np.sin(theta / 2)],
            [np.exp(1j * phi) * np.sin(theta / 2), np.exp(1j * (phi + lam)) * np.cos(theta / 2)],
        ]
    )
    expected = np.kron(np.diag([1, 0]), np.eye(2)) + np.kron(np.diag([0, 1]), rotation)
    found = unitary(read_qasm(f"{HEAD3}qubit[2] q;\nctrl @ {call} q[0], q[1];\n", name="t"))
    assert phase_distance(found, expected) < 1e-12


@pytest.mark.parametrize(
    ("call", "expected"),
    [
        ("rx(0.4)", ("r", (0,), (0.4, 0.0))),
        ("ry(0.4)", ("r", (0,), (0.4, np.pi / 2))),
        ("rz(0.4)", ("rz", (0,), (0.4,))),
        ("p(0.4)", ("rz", (0,), (0.4,))),
        ("u1(0.4)", ("rz", (0,), (0.4,))),
        ("t", ("rz", (0,), (np.pi / 4,))),
        ("tdg", ("rz", (0,), (-np.pi / 4,))),
        ("z", ("z", (0,), ())),
        ("s", ("s", (0,), ())),
        ("sdg", ("sdg", (0,), ())),
        ("h", ("h", (0,), ())),
        ("sx", ("sx", (0,), ())),
        ("u2(0.4, 0.5)", ("u", (0,), (np.pi / 2, 0.4, 0.5))),
        ("u3(0.3, 0.4, 0.5)", ("u", (0,), (0.3, 0.4, 0.5))),
        ("id", ("rz", (0,), (0.0,))),
    ],
)
def test_a_standard_one_qubit_gate_is_one_row_of_its_kind_with_its_own_angles(call, expected):
    assert rows(f"{HEAD2}qreg q[1];\n{call} q[0];") == [expected]


@pytest.mark.parametrize(
    ("call", "expected"),
    [
        ("cx", ("cx", (1, 0), ())),
        ("cz", ("cz", (1, 0), ())),
        ("rzz(0.4)", ("zz", (1, 0), (0.4,))),
        ("cp(0.4)", ("fsim", (1, 0), (0.0, -0.4))),
        ("cu1(pi)", ("fsim", (1, 0), (0.0, -np.pi))),
    ],
)
def test_a_standard_two_qubit_gate_is_one_row_of_its_kind(call, expected):
    assert rows(f"{HEAD2}qreg q[2];\n{call} q[1],q[0];") == [expected]


def test_three_qubit_gates_become_the_gates_of_their_body():
    found = rows(f"{HEAD2}qreg q[3];\nccx q[0],q[1],q[2];")
    assert [kind for kind, _, _ in found].count("cx") == 6


@pytest.mark.parametrize(
    ("call", "matrix"),
    [
        ("ctrl @ x q[0], q[1]", np.kron(np.diag([1, 0]), np.eye(2)) + np.kron(np.diag([0, 1]), X)),
        ("negctrl @ x q[0], q[1]", np.kron(np.diag([0, 1]), np.eye(2)) + np.kron(np.diag([1, 0]), X)),
        ("ctrl @ gphase(0.7) q[1]", np.diag([1, np.exp(0.7j), 1, np.exp(0.7j)])),
        ("ctrl(2) @ gphase(0.7) q[0], q[1]", np.diag([1, 1, 1, np.exp(0.7j)])),
        ("inv @ rz(0.7) q[0]", np.kron(np.diag([np.exp(0.35j), np.exp(-0.35j)]), np.eye(2))),
        ("pow(0.5) @ x q[0]", np.kron(fractional_matrix_power(X, 0.5), np.eye(2))),
        ("inv @ pow(1/2) @ x q[0]", np.kron(fractional_matrix_power(X, -0.5), np.eye(2))),
        ("pow(-2) @ s q[0]", np.kron(np.diag([1, -1]), np.eye(2))),
        ("pow(2) @ ctrl @ sx q[0], q[1]", np.kron(np.diag([1, 0]), np.eye(2)) + np.kron(np.diag([0, 1]), X)),
        ("pow(1.5) @ swap q[0], q[1]", fractional_matrix_power(np.eye(4)[[0, 2, 1, 3]], 1.5)),
        ("pow(70) @ t q[0]", np.kron(np.diag([1, np.exp(70j * np.pi / 4)]), np.eye(2))),
    ],
)
def test_modifiers_give_the_matrix_that_their_definition_says(call, matrix):
    text = f"{HEAD3}qubit[2] q;\n{call};\n"
    assert phase_distance(unitary(read_qasm(text, name="t")), matrix) < 1e-9


def test_a_controlled_gate_that_is_one_of_our_kinds_becomes_it():
    found = rows(f"{HEAD3}qubit[2] q;\nctrl @ x q[0], q[1];\nctrl @ z q[0], q[1];\nctrl @ p(0.4) q[0], q[1];")
    assert found == [("cx", (0, 1), ()), ("cz", (0, 1), ()), ("fsim", (0, 1), (0.0, pytest.approx(-0.4, abs=1e-12)))]


def test_a_global_phase_of_the_whole_program_leaves_no_row():
    assert rows(f"{HEAD3}qubit q;\ngphase(pi/3);\nx q;") == [("x", (0,), ())]

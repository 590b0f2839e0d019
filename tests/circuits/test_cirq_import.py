"""Circuits from Cirq's JSON against Cirq's own unitaries."""

from __future__ import annotations

import cirq
import numpy as np
import pytest
import sympy
from circuit_cases import phase_distance, unitary
from qasm_cases import layered_rows

from rcbench.circuits.gates import KINDS
from rcbench.circuits.qasm import read_cirq_json
from rcbench.errors import InputError

LINE = cirq.LineQubit.range(3)
ONE = [
    (cirq.X, "x"),
    (cirq.Y, "y"),
    (cirq.Z, "z"),
    (cirq.S, "s"),
    (cirq.S**-1, "sdg"),
    (cirq.T, "rz"),
    (cirq.H, "h"),
    (cirq.H**0.3, "u"),
    (cirq.X**0.5, "sx"),
    (cirq.X**-0.5, "sxdg"),
    (cirq.Y**0.3, "r"),
    (cirq.rx(0.3), "r"),
    (cirq.ry(0.3), "r"),
    (cirq.rz(np.pi), "rz"),
    (cirq.PhasedXPowGate(exponent=0.3, phase_exponent=0.7), "r"),
    (cirq.PhasedXZGate(x_exponent=0.2, z_exponent=0.3, axis_phase_exponent=0.4), "u"),
    (cirq.MatrixGate(cirq.testing.random_unitary(2, random_state=3)), "u"),
]
TWO = [
    (cirq.CZ, "cz"),
    (cirq.CZ**0.3, "fsim"),
    (cirq.CX, "cx"),
    (cirq.CX**0.2, "matrix2"),
    (cirq.ISWAP, "iswap"),
    (cirq.ISWAP**0.5, "sqrt_iswap"),
    (cirq.ISWAP**-0.5, "fsim"),
    (cirq.FSimGate(0.3, 0.4), "fsim"),
    (cirq.ZZ**0.3, "zz"),
    (cirq.SWAP, "matrix2"),
    (cirq.ms(0.3), "matrix2"),
    (cirq.MatrixGate(cirq.testing.random_unitary(4, random_state=3)), "matrix2"),
]


@pytest.mark.parametrize(("gate", "kind"), ONE + TWO, ids=str)
def test_a_gate_becomes_one_row_with_the_unitary_that_cirq_gives_it(gate, kind):
    places = LINE[1:2] if cirq.num_qubits(gate) == 1 else [LINE[2], LINE[0]]
    circuit = cirq.Circuit(gate(*places), cirq.X(LINE[2]))
    found = read_cirq_json(cirq.to_json(circuit), name="t")
    assert kind in [KINDS[code].name for code in found.kind]
    assert len(found) == 2
    expected = circuit.unitary(qubit_order=LINE)
    assert phase_distance(unitary(found), expected) < 1e-7  # Cirq's qubit order is ours: the first is most significant


def test_moments_are_layers_an_empty_one_a_barrier_and_measurements_come_last():
    circuit = cirq.Circuit(
        cirq.Moment(cirq.X(LINE[0])),
        cirq.Moment(),
        cirq.Moment(cirq.X(LINE[1]), cirq.measure(LINE[0], key="b")),
        cirq.Moment(cirq.measure(LINE[2], LINE[1], key="a")),
    )
    assert layered_rows(read_cirq_json(cirq.to_json(circuit), name="t")) == [
        (0, "x", (0,), ()),
        (1, "barrier", (), ()),
        (2, "x", (1,), ()),
        (3, "measure", (0, 0), ()),
        (3, "measure", (2, 1), ()),
        (3, "measure", (1, 2), ()),
    ]


def test_numbered_keys_are_bits_in_the_order_of_their_numbers():
    operations = [cirq.measure(LINE[0], key="c[10]"), cirq.measure(LINE[1], key="c[2]")]
    assert read_cirq_json(cirq.to_json(cirq.Circuit(operations)), name="t").measured_qubits == (1, 0)


def test_other_qubits_are_numbered_in_the_order_of_cirq():
    grid = cirq.GridQubit.square(2)
    found = read_cirq_json(cirq.to_json(cirq.Circuit(cirq.X(grid[3]), cirq.Y(grid[1]))), name="t")
    assert [row[1:3] for row in layered_rows(found)] == [("x", (1,)), ("y", (0,))]


@pytest.mark.parametrize(
    ("circuit", "message"),
    [
        (cirq.Circuit(cirq.CCX(*LINE)), "t: moment 0: operation: .*gates with a matrix on one or two qubits"),
        (cirq.Circuit(cirq.depolarize(0.1)(LINE[0])), "gates with a matrix"),
        (cirq.Circuit(cirq.X(LINE[0]) ** sympy.Symbol("a")), "gates with numbers"),
        (cirq.Circuit(cirq.measure(LINE[0], key="m"), cirq.X(LINE[0])), "t: moment 1: .*nothing on a qubit after"),
        (cirq.Circuit(cirq.measure(LINE[0], key="m"), cirq.X(LINE[1]).with_classical_controls("m")), "outcomes"),
        (cirq.Circuit(cirq.X(LINE[0]), cirq.reset(LINE[0])), "t: moment 1: .*resets before the first gate"),
        (cirq.Circuit(cirq.measure(LINE[0], key="m", invert_mask=(True,))), "no inverted"),
        (
            cirq.Circuit(cirq.X(cirq.LineQid(0, 3)) if False else cirq.IdentityGate(1, (3,))(cirq.LineQid(0, 3))),
            "qudits",
        ),
    ],
)
def test_what_has_no_rows_is_refused_with_its_moment(circuit, message):
    with pytest.raises(InputError, match=message):
        read_cirq_json(cirq.to_json(circuit), name="t")


@pytest.mark.parametrize("text", ["", "{", "[1, 2]", '{"cirq_type": "NoSuchThing"}', cirq.to_json(cirq.X)])
def test_text_that_is_no_circuit_of_cirq_is_refused(text):
    with pytest.raises(InputError, match=r"t: circuit: .*a circuit in Cirq's JSON"):
        read_cirq_json(text, name="t")

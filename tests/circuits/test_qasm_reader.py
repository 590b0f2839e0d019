"""Statements of OpenQASM 2.0 and 3: registers, broadcasts, barriers, measurements, and what is refused."""

from __future__ import annotations

import random

import numpy as np
import pytest
from circuit_cases import phase_distance, unitary
from qasm_cases import HEAD2, HEAD3, layered_rows, qiskit_unitary, rows

from rcbench.circuits.qasm import read_circuit, read_program, read_qasm
from rcbench.errors import InputError

Q2 = f"{HEAD2}qreg q[4];\ncreg c[4];\n"
Q3 = f"{HEAD3}qubit[4] q;\nbit[4] c;\n"


def test_random_programs_of_both_versions_have_the_unitary_that_qiskit_gives():
    draw = random.Random(17)
    one = [
        "x",
        "h",
        "s",
        "sx",
        "tdg",
        "rx({a})",
        "rz({a}*pi)",
        "ry(-pi/{n})",
        "u1({a})",
        "u3({a},{a}/2,-pi/{n})",
        "p({a})",
    ]
    two = ["cx", "cz", "swap", "cp({a})", "crz({a})", "cu3({a},0.1,-{a})", "ch"]
    for version in (2, 3):
        for _ in range(10):
            lines = [f"{HEAD2}qreg q[2];qreg r[2];" if version == 2 else f"{HEAD3}qubit[2] q;qubit[2] r;"]
            places = ["q[0]", "q[1]", "r[0]", "r[1]"]
            for _ in range(30):
                many = draw.random() < 0.4
                gate = draw.choice(two[:-2] + two[-1:] if version == 3 else two) if many else draw.choice(one)
                gate = gate.format(a=round(draw.uniform(0.1, 3), 4), n=draw.randint(1, 8))
                lines.append(f"{gate} {', '.join(draw.sample(places, 2 if many else 1))};")
            text = "\n".join(lines)
            assert phase_distance(unitary(read_qasm(text, name="t")), qiskit_unitary(text)) < 1e-9


def test_registers_follow_one_another_in_the_order_of_their_declaration():
    text = f"{HEAD2}qreg b[2];\nqreg a[1];\nx a[0];\ny b[1];\n"
    program = read_program(text, name="t")
    assert program.qubits == ("b[0]", "b[1]", "a[0]")
    assert rows(text) == [("x", (2,), ()), ("y", (1,), ())]


@pytest.mark.parametrize(
    ("call", "expected"),
    [
        ("x q", [(0,), (1,)]),
        ("x q[1:-1]", [(1,)]),
        ("x q[{1, 0}]", [(1,), (0,)]),
        ("x r[-1]", [(3,)]),
        ("x r[0:1]", [(2,), (3,)]),
        ("x one", [(4,)]),
        ("cx q, r", [(0, 2), (1, 3)]),
        ("cx one, q", [(4, 0), (4, 1)]),
        ("cx q, one", [(0, 4), (1, 4)]),
        ("cx q[1], r", [(1, 2), (1, 3)]),
        ("cx both[0:2:2], both[1:2:3]", [(0, 1), (2, 3)]),
        ("ctrl @ x q, r", [(0, 2), (1, 3)]),
    ],
)
def test_registers_sets_ranges_and_aliases_stand_for_their_qubits(call, expected):
    text = f"{HEAD3}qubit[2] q;\nqubit[2] r;\nqubit one;\nlet both = q ++ r;\n{call};\n"
    assert [qubits for _, qubits, _ in rows(text)] == expected


def test_physical_qubits_are_numbered_in_their_own_order():
    text = 'OPENQASM 3.0;\ninclude "stdgates.inc";\nbit[2] c;\ncx $17, $3;\nc[1] = measure $17;\nc[0] = measure $3;\n'
    program = read_program(text, name="t")
    assert program.qubits == ("$3", "$17")
    assert rows(text) == [("cx", (1, 0), ())]
    assert program.circuit.measured_qubits == (0, 1)


def test_constants_serve_in_angles_sizes_and_indices():
    text = f"{HEAD3}const int[32] n = 3;\nconst angle w = n*pi/4;\nqubit[n] q;\nrz(w/n) q[n-1];\n"
    assert rows(text) == [("rz", (2,), (np.pi / 4,))]


@pytest.mark.parametrize(
    "measure",
    [
        "measure q[2] -> c[0]; measure q[0] -> c[1];",
        "c[0] = measure q[2]; c[1] = measure q[0];",
        "c[1] = measure q[0];\nbarrier q; c[0] = measure q[2];",
    ],
)
def test_measurements_go_to_the_bits_they_name_in_one_last_layer(measure):
    found = layered_rows(read_qasm(f"{Q3}h q[0];\ncx q[0], q[1];\n{measure}", name="t"))
    assert found[-2:] == [(2, "measure", (2, 0), ()), (2, "measure", (0, 1), ())]


@pytest.mark.parametrize("measure", ["measure q -> c;", "c = measure q;", "measure q[0:3] -> c[0:3];"])
def test_a_whole_register_is_measured_bit_by_bit(measure):
    assert read_qasm(f"{Q3}{measure}", name="t").measured_qubits == (0, 1, 2, 3)
    assert read_qasm(f"{HEAD3}qubit[4] q;\nbit[4] d = measure q;", name="t").measured_qubits == (0, 1, 2, 3)


def test_bits_count_over_all_registers_in_order_and_those_never_measured_are_left_out():
    text = f"{HEAD2}qreg q[3];\ncreg late[2];\ncreg early[3];\nmeasure q[0] -> early[2];\nmeasure q[2] -> late[1];\n"
    program = read_program(text, name="t")
    assert program.bits == ("late[1]", "early[2]")
    assert program.declared_bits == 5
    assert program.circuit.measured_qubits == (2, 0)


def test_gates_on_other_qubits_may_follow_a_measurement():
    found = layered_rows(read_qasm(f"{Q2}measure q[0] -> c[0];\nx q[1];\nmeasure q[1] -> c[1];", name="t"))
    assert [row[:3] for row in found] == [(0, "x", (1,)), (1, "measure", (0, 0)), (1, "measure", (1, 1))]


def test_a_reset_of_a_fresh_qubit_is_kept():
    assert rows(f"{Q2}reset q;\nx q[0];")[:4] == [("reset", (qubit,), ()) for qubit in range(4)]


def test_layers_hold_what_can_run_at_once_and_virtual_gates_take_no_time():
    text = f"{Q2}rz(0.1) q[0];\nsx q[0];\nsx q[1];\nrz(0.2) q[1];\ncz q[0],q[1];\nsx q[2];\nrz(0.3) q[2];\n"
    assert [row[:3] for row in layered_rows(read_qasm(text, name="t"))] == [
        (0, "rz", (0,)),
        (1, "sx", (0,)),
        (1, "sx", (1,)),
        (1, "sx", (2,)),
        (2, "rz", (1,)),
        (3, "cz", (0, 1)),
        (4, "rz", (2,)),
    ]
    assert read_qasm(text, name="t").n_layers == 2


@pytest.mark.parametrize("barrier", ["barrier q;", "barrier;"])
def test_a_barrier_on_all_qubits_is_a_row_that_closes_the_layer(barrier):
    found = layered_rows(read_qasm(f"{HEAD3}qubit[2] q;\nx q[0];\n{barrier}\nx q[1];\n", name="t"))
    assert [row[:3] for row in found] == [(0, "x", (0,)), (1, "barrier", ()), (2, "x", (1,))]


@pytest.mark.parametrize("barrier", ["barrier q[0], q[1];", "barrier q[0],q[1];barrier q[1];", "barrier q[0:1];"])
def test_a_barrier_on_some_qubits_holds_back_these_only(barrier):
    found = layered_rows(read_qasm(f"{Q3}x q[0];\n{barrier}\nx q[1];\nx q[2];\n", name="t"))
    assert [row[:3] for row in found] == [(0, "x", (0,)), (0, "x", (2,)), (1, "x", (1,))]


@pytest.mark.parametrize(
    ("statement", "message"),
    [
        ("if (c == 1) x q[0];", r"t.qasm:7: statement: found 'if \(c == 1\) x q\[0\]'; allowed: no `if`"),
        ("if (c[0]) { x q[0]; }", "t.qasm:7: block: .*no `if`"),
        ("for uint i in [0:3] { x q[i]; }", "t.qasm:7: block: .*no loops"),
        ("while (c == 0) { x q[0]; }", "t.qasm:7: block: .*no loops"),
        ("def f(qubit a) { x a; }", "t.qasm:7: block: .*no subroutines"),
        ("input angle t;", "t.qasm:7: statement: .*no input"),
        ("int i = 3;", "t.qasm:7: statement: .*no classical variables"),
        ("delay[100ns] q[0];", "t.qasm:7: statement: .*no timing"),
        ("c[0] = 1;", "t.qasm:7: statement: found 'c\\[0\\] = 1'"),
        ("measure q[0] -> c[0];\nx q[0];", r"t.qasm:8: x: found 'a gate after the measurement of qubit 0'; .*last"),
        ("measure q -> c;\ncx q[1], q[0];", "t.qasm:8: cx: "),
        ("measure q[0] -> c[0];\nmeasure q[0] -> c[1];", "t.qasm:8: measure: found 'qubit 0 twice'"),
        ("measure q[0] -> c[0];\nmeasure q[1] -> c[0];", r"t.qasm:8: measure: found 'into c\[0\] again'"),
        ("measure q[0] -> c[0];\nreset q[0];", "t.qasm:8: reset: "),
        ("x q[0];\nreset q[0];", "t.qasm:8: reset: found 'qubit 0 after a gate or measurement'"),
        ("measure q[0];", "t.qasm:7: measure: .*a classical bit"),
        ("measure q -> c[0];", "t.qasm:7: measure: found '4 qubits into 1 bits'"),
        ("foo(1) q[0];\nbar q[1];", "t.qasm:7: gate: found 'foo'; .*nowhere defined: foo, bar"),
        ("x q[4];", r"t.qasm:7: index: found 'q\[4\]'; allowed: 0 to 3"),
        ("x q[0.5];", "t.qasm:7: number: found '0.5'"),
        ("x r[0];", "t.qasm:7: qubit register: found 'r'; allowed: q"),
        ("cx q[1], q[1];", "t.qasm:7: gate cx: .*different qubits"),
        ("cx q[1];", "t.qasm:7: gate cx: found '1 operands'; allowed: 2 qubits"),
        ("cx q[0:1], q[1:3];", "t.qasm:7: gate cx: .*registers of one size"),
        ("rz q[0];", "t.qasm:7: gate rz: found '0 parameters'; allowed: 1 parameters"),
        ("rz(1, 2) q[0];", "t.qasm:7: gate rz: found '2 parameters'"),
        ("h(1) q[0];", "t.qasm:7: gate h: found '1 parameters'; allowed: 0"),
        ("rz(1/0) q[0];", "t.qasm:7: expression: found '1/0'"),
        ("rz(2^3) q[0];", r"t.qasm:7: expression: found '\^'; allowed: \*\*"),
        ("ctrl @ cx q[0], q[1], q[2];", "t.qasm:7: ctrl @ cx: found '3 qubits'"),
        ("pow(1e300) @ x q[0];", "t.qasm:7: gate pow @ x: found '1e"),
        ("turn @ x q[0];", "t.qasm:7: modifier: found 'turn'"),
        ("qubit[2] q;", "t.qasm:7: register: found 'q'"),
        ("qubit[0] r;", "t.qasm:7: r: found 0"),
        ("qubit[100000000] r;", "t.qasm:7: r: found 100000000; allowed: at most 10000 qubits"),
        ("let a = q[0:1] ++ q[1:2];", "t.qasm:7: let: .*different qubits"),
        ("OPENQASM 3.0;", "t.qasm:7: statement: .*the version once"),
        ("x q[0]\ny q[1];", "t.qasm:7: operand: .*a ; seems to be missing"),
        ("x q[0];\ny q[1]", "t.qasm:8: statement: found 'y q\\[1\\]'; allowed: a statement that ends in ;"),
        ("}", "t.qasm:7: statement: "),
        ("this is no program;", "t.qasm:7: gate: found 'this'"),
    ],
)
def test_what_is_not_read_is_refused_with_file_line_and_reason(statement, message):
    with pytest.raises(InputError, match=message):
        read_qasm(f"{Q3}\n\n{statement}\n", name="t.qasm")


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("OPENQASM 4.0;\nqubit q;", "t.qasm:1: OPENQASM: found '4.0'; allowed: 2.0, 3, 3.0 or 3.1"),
        ("OPENQASM 2.1;\nqreg q[1];", "found '2.1'"),
        ("", "t.qasm:1: program: found 'no qubits'"),
        ("\x00\x01", "t.qasm:1: statement"),
        ("OPENQASM 2.0;\nqreg q[1];\nh q[0];", "t.qasm:3: gate: found 'h'; allowed: .*include \"qelib1.inc\" has it"),
        ("OPENQASM 2.0;\n" + "qreg q[9999];\nqreg r[2];", "t.qasm:3: r: found 2; allowed: at most 10000 qubits"),
        (f"{HEAD2}qreg q[9999];\n" + "h q;\n" * 300, "at most 2000000 gates"),
        (f"{HEAD2}qreg q[9998];\nqreg r[2];\n" + "barrier q;\n" * 300, "at most 2000000 gates"),
    ],
)
def test_programs_that_ask_for_too_much_or_nothing_are_refused(text, message):
    with pytest.raises(InputError, match=message):
        read_qasm(text, name="t.qasm")


@pytest.mark.parametrize(
    "hostile",
    [
        "x" * 200_000 + "(1)=;",
        "x" + " " * 200_000 + "(;",
        "x q[0]" + "," * 200_000 + "=;",
        "x(" + ")" * 100_000 + "=;",
        "const float a = " + " " * 200_000 + "@;",
        "bit" + " " * 200_000 + "=;",
        "gate g a" + " " * 200_000 + "( {}",
        "x q[{" + "0," * 100_000 + "0}];",
        "inv @ " * 20_000 + "x;",
        "@ " * 100_000 + ";",
    ],
)
def test_no_text_makes_a_pattern_slow(hostile):
    with pytest.raises(InputError):
        read_qasm(f"{Q3}{hostile}", name="t.qasm")


def test_mutilated_programs_raise_nothing_but_input_errors():
    """Random cuts and insertions, seed fixed; any other exception fails the test."""
    whole = (
        f"{Q3}const float w = pi/3;\ngate g(t, p) a, b {{ ctrl @ rx(t*2) a, b; pow(p) @ swap a, b; inv @ rz(-t) a; }}\n"
        "g(0.3, pi/2) q[0], q[1];\nnegctrl @ x q[2], q[3];\nbarrier q[0], q[1];\n"
        "rz(w) q;\nlet a = q[0:1];\nc = measure q;\n"
    )
    parts = [
        ";",
        "{",
        "}",
        "(",
        ")",
        "[",
        "]",
        "@",
        "->",
        "=",
        ",",
        "q",
        "gate ",
        "ctrl",
        "1e400",
        "**",
        "//",
        "/*",
        '"',
        "include ",
    ]
    parts += ["\n", "$1", "let", "qubit", "measure", "nan", "9999", "π", "\x00", "++", "{0,1}", "const "]
    draw = random.Random(23)
    places = []
    for _ in range(1500):
        text = whole
        for _ in range(draw.randint(1, 3)):
            place = draw.randrange(len(text))
            cut = draw.randint(0, 6) if draw.random() < 0.5 else 0
            text = text[:place] + (draw.choice(parts) if draw.random() < 0.6 else "") + text[place + cut :]
        try:
            read_qasm(text, name="t.qasm")
        except InputError as error:
            places.append(error.where)
    assert all(place.startswith("t.qasm:") for place in places)
    assert 1000 < len(places) < 1480  # the fixed seed leaves some of them whole


def test_an_unknown_format_is_refused_with_the_names_there_are():
    with pytest.raises(InputError, match="format: found 'qasm'; allowed: qasm3, qasm2, cirq-json"):
        read_circuit("", "qasm", "t")

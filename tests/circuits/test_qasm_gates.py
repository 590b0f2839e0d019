"""Gates that a program or its include files define: against hand-derived matrices, and qiskit where it can read."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_cases import phase_distance, unitary
from qasm_cases import HEAD2, HEAD3, qiskit_unitary, rows

from rcbench.circuits.gates import gate_matrix
from rcbench.circuits.qasm import read_qasm
from rcbench.errors import InputError

Z = np.diag([1, -1])
XX = np.kron([[0, 1], [1, 0]], [[0, 1], [1, 0]])

NATIVE = """
gate RZ(angle) a { U(0, 0, angle) a; }
gate RX(theta) a { U(theta, -pi/2, 2*pi/4) a; } // about X
gate PX(theta, phi) a { RZ(-phi) a; RX(theta) a; RZ(phi) a; }
gate GPI2(turns) a { RZ(-2*pi*turns) a; RX(pi/2) a; RZ(2*pi*turns) a; }
/* the entangler: exp(-i angle/2 XX) */
gate MS(angle) a, b { CX a, b; RX(angle) a; CX a, b; }
gate ZZ(angle) a, b { CX a, b; RZ(angle) b; CX a, b; }
gate CZ a, b { U(pi/2, 0, pi) b; CX a, b; U(pi/2, 0, pi) b; }
"""
HEAD = f"OPENQASM 2.0;{NATIVE}qreg q[3];\n"


@pytest.mark.parametrize(
    ("call", "kind", "parameters"),
    [
        ("RZ(0.7) q[1]", "rz", (0.7,)),
        ("RX(0.7) q[1]", "r", (0.7, 0.0)),
        ("PX(0.7, -1.9) q[1]", "r", (0.7, -1.9)),
        ("ZZ(0.7) q[1], q[2]", "zz", (0.7,)),
        ("CZ q[1], q[2]", "cz", ()),
    ],
)
def test_a_gate_that_equals_one_of_our_kinds_becomes_it_with_the_parameters_as_written(call, kind, parameters):
    found = rows(f"{HEAD}{call};")
    assert [(row[0], row[2]) for row in found] == [(kind, parameters)]


def test_a_gate_of_no_kind_is_one_row_with_its_matrix():
    found = read_qasm(f"{HEAD}MS(0.7) q[0], q[1];", name="t")
    assert [row[0] for row in rows(f"{HEAD}MS(0.7) q[0], q[1];")] == ["matrix2"]
    expected = np.cos(0.35) * np.eye(4) - 1j * np.sin(0.35) * XX
    assert phase_distance(unitary(found), np.kron(expected, np.eye(2))) < 1e-12


def test_a_one_qubit_gate_of_no_kind_is_u_and_a_diagonal_one_is_virtual():
    text = """OPENQASM 2.0;
gate first(a, b) q { U(a*b, sin(a), b^2) q; U(b, 0, a) q; }
gate second(a, b) q { U(pi, 0, pi) q; U(0, 0, a - b) q; U(pi, 0, pi) q; }
qreg q[1];
first(0.3, -1.2) q[0];
second(0.3, -1.2) q[0];
"""
    found = rows(text)
    assert [row[0] for row in found] == ["u", "rz"]
    assert found[1][2] == (pytest.approx(-1.5, abs=1e-12),)
    assert phase_distance(unitary(read_qasm(text, name="t")), qiskit_unitary(text)) < 1e-12


def test_many_calls_of_one_gate_each_get_their_own_angles():
    """Their matrices are worked out together; qiskit works them out one by one."""
    rng = np.random.default_rng(5)
    lines = [
        f"g({a:.6f}, {b:.6f}) q[{q}];"
        for a, b, q in zip(*rng.uniform(-3, 3, (2, 40)), rng.integers(0, 2, 40), strict=True)
    ]
    pairs = [f"h2({a:.6f}) q[0], q[1];" for a in rng.uniform(-3, 3, 10)]
    text = (
        f"{HEAD2}gate g(s, t) a {{ rx(s/2 + t) a; rz(s*t) a; ry(cos(t)) a; }}\n"
        "gate h2(t) a, b { g(t, 0.3) b; cx b, a; g(0.1, t) a; crz(t) a, b; }\n"
        f"qreg q[2];\n{chr(10).join(lines + pairs)}\n"
    )
    assert phase_distance(unitary(read_qasm(text, name="t")), qiskit_unitary(text)) < 1e-9


def test_gates_from_three_qubits_on_are_the_calls_of_their_body_each_one_row():
    text = f"""{HEAD2}
gate mix(t) a, b {{ cx a, b; rx(t) b; cx a, b; }}
gate three(t) a, b, c {{ mix(t) c, a; mix(-t/2) a, b; h c; barrier a, b; }}
qreg q[3];
three(0.7) q[2], q[0], q[1];
"""
    found = rows(text)
    assert [(kind, qubits) for kind, qubits, _ in found] == [("matrix2", (1, 2)), ("matrix2", (2, 0)), ("h", (1,))]
    assert phase_distance(unitary(read_qasm(text, name="t")), qiskit_unitary(text)) < 1e-12


@pytest.mark.parametrize(
    ("name", "parameters", "body"),
    [
        ("iswap", (), "a, b { s a; s b; h a; cx a, b; cx b, a; h b; }"),
        ("sqrt_iswap", (), "a, b { rxx(-pi/4) a, b; sdg a; sdg b; rxx(-pi/4) a, b; s a; s b; }"),
        ("fsim", (0.4, -0.9), "(t, p) a, b { rxx(t) a, b; sdg a; sdg b; rxx(t) a, b; s a; s b; cu1(-p) a, b; }"),
        ("zz", (0.4,), "(t) a, b { cx a, b; rz(t) b; cx a, b; }"),
        ("r", (0.4, 5.9), "(t, p) a { u3(t, p - pi/2, pi/2 - p) a; }"),
        ("whatever", (0.4, 5.9), "(t, p) a { u3(t, p - pi/2, pi/2 - p) a; }"),
    ],
)
def test_our_own_gates_are_known_by_their_matrix_whatever_their_name(name, parameters, body):
    shown = f"({', '.join(map(repr, parameters))})" if parameters else ""
    places = "q[1], q[0]" if "a, b" in body else "q[1]"
    found = rows(f"{HEAD2}gate {name} {body}\nqreg q[2];\n{name}{shown} {places};")
    kind = "r" if name == "whatever" else name
    qubits = (1, 0) if "a, b" in body else (1,)
    assert found == [(kind, qubits, parameters)]


def test_a_gate_with_one_of_our_names_and_another_matrix_keeps_its_matrix():
    text = f"{HEAD2}gate fsim(t, p) a, b {{ cx a, b; rx(t) a; rz(p) b; }}\nqreg q[2];\nfsim(0.3, 0.4) q[0], q[1];"
    assert rows(text)[0][0] == "matrix2"
    assert phase_distance(unitary(read_qasm(text, name="t")), qiskit_unitary(text)) < 1e-12


def test_a_definition_hides_a_standard_gate_of_its_name():
    text = 'OPENQASM 3.0;\ninclude "stdgates.inc";\ngate h a { x a; }\nqubit q;\nh q;'
    assert rows(text) == [("x", (0,), ())]


@pytest.mark.parametrize("kind", ["cz", "iswap", "sqrt_iswap", "cx"])
def test_a_matrix_is_recognised_up_to_a_global_phase(kind):
    """OpenQASM 3 lets a definition carry any phase."""
    bodies = {
        "cz": "gphase(0.3); ctrl @ z a, b;",
        "iswap": "gphase(-1.1); s a; s b; h a; cx a, b; cx b, a; h b;",
        "sqrt_iswap": "gphase(2); pow(1/2) @ own a, b;",
        "cx": "gphase(2); ctrl @ x a, b;",
    }
    own = "gate own a, b { s a; s b; h a; cx a, b; cx b, a; h b; }\n"
    text = f"{HEAD3}{own}gate g a, b {{ {bodies[kind]} }}\nqubit[2] q;\ng q[0], q[1];"
    assert rows(text) == [(kind, (0, 1), ())]
    assert phase_distance(unitary(read_qasm(text, name="t")), gate_matrix(kind)) < 1e-12


def test_modifiers_and_constants_work_inside_bodies():
    text = f"""{HEAD3}const float quarter = pi / 2;
gate g0(quarter) a {{ rz(quarter) a; }}
gate g(t) a, b {{ ctrl @ rx(t + quarter) a, b; pow(t) @ swap a, b; inv @ g0(t) b; negctrl @ y b, a; }}
qubit[2] q;
g(0.37) q[0], q[1];
"""
    plain = text.replace("const float quarter = pi / 2;", "").replace("t + quarter", "t + pi/2")
    plain = plain.replace("pow(t)", "pow(0.37)")  # qiskit reads neither const nor an exponent that is a parameter
    assert phase_distance(unitary(read_qasm(text, name="t")), qiskit_unitary(plain)) < 1e-9


@pytest.mark.parametrize(
    ("definitions", "call", "message"),
    [
        ("gate g a { g a; }", "g q[0]", r"t.qasm:3: gate g: found 'g'; allowed: gates defined before this one"),
        ("gate g a { k a; }\ngate k a { x a; }", "g q[0]", r"t.qasm:3: gate g: found 'k'"),
        ("gate g a {\n x a;\n foo a; }", "g q[0]", r"t.qasm:5: gate: found 'foo'"),
        ("gate g a { x b; }", "g q[0]", r"t.qasm:3: x: found 'b'; allowed: 1 different ones of the gate's qubits a"),
        ("gate g a { x a[0]; }", "g q[0]", r"found 'a\[0\]'"),
        ("gate g a, b { cx a, a; }", "g q[0],q[1]", r"cx: found 'a, a'; allowed: 2 different"),
        ("gate g a { rx a; }", "g q[0]", r"rx: found '0 parameters'; allowed: 1 parameters"),
        ("gate g a { rx(t) a; }", "g q[0]", r"gate g: found 't'; allowed: a name that is known here"),
        ("gate g(t) a {\n rx(1/t) a; }", "g(1) q[0];\ng(0) q[1]", r"t.qasm:7: gate g: found '1/t'; allowed: .* finite"),
        ("gate g(t) a { rx(sqrt(t)) a; }", "g(-1) q[0]", r"t.qasm:5: gate g: found 'sqrt\(t\)'"),
        ("gate g a { measure a -> c[0]; }", "g q[0]", r"allowed: calls of gates and barriers in the body of a gate"),
        ("gate g a { x a;", "", r"t.qasm:3: block: found 'gate g a'; allowed: a block that ends in }"),
        ("gate g a { { x a; } }", "", r"t.qasm:3: block: .* calls of gates and barriers"),
        ("gate g(a, a) b { x b; }", "", r"gate g: found 'a'; allowed: different names"),
        ("gate g(a) { }", "", r"gate g: found 'gate g\(a\)'; allowed: at least one qubit"),
        ("gate g a { x a; }\ngate g a { y a; }", "", r"t.qasm:4: gate: found 'g'; .* \(the first is at t.qasm:3\)"),
        (
            "opaque magic(t) a, b;",
            "magic(1) q[0], q[1]",
            r"t.qasm:5: gate: found 'magic'; .* it is opaque.*\(t.qasm:3\)",
        ),
    ],
)
def test_a_definition_that_cannot_be_used_is_refused_with_its_line(definitions, call, message):
    with pytest.raises(InputError, match=message):
        read_qasm(f"{HEAD2}{definitions}\nqreg q[2];\n{call};\n", name="t.qasm")


def test_an_opaque_gate_that_is_never_called_does_no_harm():
    assert rows(f"{HEAD2}opaque magic a;\nqreg q[1];\nx q[0];") == [("x", (0,), ())]


@pytest.mark.parametrize("n_qubits", [1, 3])
def test_definitions_that_multiply_without_end_are_refused_before_any_work(n_qubits):
    names = ",".join("abc"[:n_qubits])
    chain = [f"gate g0 {names} {{ x a; }}"]
    chain += [f"gate g{k} {names} {{ g{k - 1} {names}; g{k - 1} {names}; }}" for k in range(1, 90)]
    text = f"{HEAD2}{chr(10).join(chain)}\nqreg q[3];\ng89 {','.join(f'q[{q}]' for q in range(n_qubits))};"
    with pytest.raises(InputError, match="at most 100000 gates behind one call"):
        read_qasm(text, name="t.qasm")


def test_a_chain_of_thousands_of_definitions_is_refused_and_exhausts_nothing():
    chain = ["gate g0 a { x a; }", *(f"gate g{k} a {{ g{k - 1} a; }}" for k in range(1, 3000))]
    with pytest.raises(InputError, match="100 definitions inside one another"):
        read_qasm(f"{HEAD2}{chr(10).join(chain)}\nqreg q[1];\ng2999 q[0];", name="t.qasm")

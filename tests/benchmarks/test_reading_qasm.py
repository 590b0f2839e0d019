"""How fast OpenQASM is read, in processor time: `pytest -m benchmark tests/benchmarks/test_reading_qasm.py -s`."""

from __future__ import annotations

import time

import numpy as np
import pytest

from rcbench.circuits.qasm import read_qasm

pytestmark = pytest.mark.benchmark


def kit_circuit() -> str:
    """A circuit as we write it: 12 qubits, 20 layers, one-qubit gates as rz sx rz sx rz; about 1,370 lines."""
    rng = np.random.default_rng(1)
    lines = ["OPENQASM 3.0;", 'include "stdgates.inc";', "qubit[12] q;", "bit[12] c;"]
    for layer in range(20):
        for qubit in range(12):
            a, b, c = rng.uniform(-3, 3, 3).tolist()
            lines += [f"rz({a!r}) q[{qubit}];", f"sx q[{qubit}];", f"rz({b!r}) q[{qubit}];"]
            lines += [f"sx q[{qubit}];", f"rz({c!r}) q[{qubit}];"]
        pairs = [f"cz q[{a}], q[{a + 1}];" for a in range(layer % 2, 11, 2)]
        lines += ["barrier q;", *pairs, "barrier q;"]
    return "\n".join([*lines, *(f"c[{q}] = measure q[{q}];" for q in range(12)), ""])


def foreign_circuit() -> str:
    """A circuit of another compiler: 24 qubits, 12 layers, gates of its own, angles as multiples of pi."""
    rng = np.random.default_rng(2)
    lines = [
        "OPENQASM 2.0;",
        "gate RZ(angle) a { U(0, 0, angle) a; }",
        "gate RX(theta) a { U(theta, -pi/2, pi/2) a; }",
        "gate PX(theta, phi) a { RZ(-phi) a; RX(theta) a; RZ(phi) a; }",
        "gate MS(angle) a, b { CX a, b; RX(angle) a; CX a, b; }",
        "qreg q[24];\ncreg c[24];",
    ]
    for _ in range(12):
        for q in range(24):
            lines.append(f"PX(pi*{rng.uniform(-1, 1):.6f}, {rng.uniform(-3, 3):.6f}) q[{q}];")
            lines.append(f"RZ({rng.uniform(-1, 1):.6f}*pi) q[{q}];")
        order = rng.permutation(24)
        lines += [f"MS({rng.uniform(0, 1):.6f}) q[{a}],q[{b}];" for a, b in zip(order[::2], order[1::2], strict=True)]
    return "\n".join([*lines, "measure q -> c;", ""])


@pytest.mark.parametrize(("make", "most"), [(kit_circuit, 6e-6), (foreign_circuit, 20e-6)])
def test_a_line_takes_microseconds(make, most):
    text = make()
    lines = text.count("\n")
    read_qasm(text, name="t")
    started = time.process_time()
    for _ in range(30):
        read_qasm(text, name="t")
    seconds = (time.process_time() - started) / 30
    print(
        f"\n{make.__name__}: {lines} lines in {1e3 * seconds:.2f} ms, {1e6 * seconds / lines:.2f} microseconds a line"
    )
    assert seconds / lines < most

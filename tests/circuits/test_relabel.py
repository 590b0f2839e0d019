"""Circuits on fewer qubits."""

from __future__ import annotations

import pytest
from qasm_cases import HEAD2, layered_rows

from rcbench.circuits.qasm import read_qasm
from rcbench.circuits.relabel import restrict, used_qubits
from rcbench.errors import InputError

TEXT = (
    f"{HEAD2}qreg q[9];\ncreg c[2];\nh q[7];\nbarrier q;\ncz q[7],q[2];\nmeasure q[2] -> c[1];\nmeasure q[5] -> c[0];\n"
)


def test_used_qubits_are_those_of_gates_and_measurements_not_of_barriers_or_bits():
    assert used_qubits(read_qasm(TEXT, name="t")) == (2, 5, 7)


def test_restricting_renames_qubits_and_leaves_bits_and_layers():
    circuit = read_qasm(TEXT, name="t")
    small = restrict(circuit, (7, 2, 5))
    assert small.n_qubits == 3
    assert layered_rows(small) == [
        (0, "h", (0,), ()),
        (1, "barrier", (), ()),
        (2, "cz", (0, 1), ()),
        (3, "measure", (2, 0), ()),
        (3, "measure", (1, 1), ()),
    ]


def test_a_used_qubit_can_not_be_left_out():
    with pytest.raises(InputError, match=r"all qubits that are used; \[5\] too"):
        restrict(read_qasm(TEXT, name="t"), (2, 7))

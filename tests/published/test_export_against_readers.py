"""Exported circuits as other people's readers see them: qiskit's and Cirq's OpenQASM readers, the reference parser."""

from __future__ import annotations

from itertools import combinations, product

import cirq
import numpy as np
import openqasm3
import pytest
import qiskit.qasm2
import qiskit.qasm3
from cirq.contrib.qasm_import import circuit_from_qasm
from qiskit.quantum_info import Operator

from rcbench.campaign import Circuits, Experiment
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.export import to_cirq_json, to_qasm2, to_qasm3
from rcbench.circuits.families import draw_circuits
from rcbench.circuits.gates import KINDS
from rcbench.device import NATIVE_ONE_QUBIT, Device, NativeGate

HALF = np.pi / 2
# what circuits are made of, on native gates that serve it
GATE_SETS = [
    *product(("haar",), ("none", "haar"), ("cz", "iswap", "sqrt-iswap", "zz", "fsim-half")),
    *product(("clifford",), ("none", "clifford"), ("cz", "iswap", "sqrt-iswap", "zz", "fsim-half")),
    *[
        (name, one, name)
        for name in ("cz", "iswap", "sqrt-iswap", "fsim", "zz")
        for one in ("quarter-turns", "azimuth")
    ],
]
NATIVE = {name: NativeGate(name=name) for name in ("cz", "iswap", "sqrt-iswap", "zz")} | {
    "fsim": NativeGate(name="fsim", parameters=(1.4, 0.3), by_coupler={(0, 1): (1.5, 0.2)}),
    "fsim-half": NativeGate(name="fsim", parameters=(HALF, 0.0)),
}


def random_circuit(number: int) -> Circuit:
    """One of the circuits that a campaign can hold, or every twentieth time one of all gate kinds at random."""
    if number % 20 == 19:
        return mixed_circuit(number)
    rng = np.random.default_rng([3, number])
    two_qubit, one_qubit, native = GATE_SETS[number % len(GATE_SETS)]
    n = int(rng.integers(2, 7))
    layout = ("line", "all-to-all")[int(rng.integers(2))]
    couplers = list(combinations(range(n), 2)) if layout == "all-to-all" else [(q, q + 1) for q in range(n - 1)]
    device = Device(
        name="invented",
        n_qubits=n,
        layout=layout,
        couplers=tuple(couplers),
        one_qubit=NATIVE_ONE_QUBIT[int(rng.integers(3))],
        two_qubit=(NATIVE[native],),
    )
    angle = 0.37 if two_qubit == "zz" else None
    experiment = Experiment(
        name="one",
        circuits=Circuits(two_qubit=two_qubit, one_qubit=one_qubit, angle=angle),
        depths=(int(rng.integers(1, 4)),),
        instances=1,
        qubits=tuple(range(n)),
    )
    return draw_circuits(experiment, device, seed=5, instance=number)[experiment.depths[0]]


def mixed_circuit(number: int) -> Circuit:
    rng = np.random.default_rng([4, number])
    names = [kind for kind in KINDS if kind.matrices is not None and "matrix" not in kind.name]
    builder = CircuitBuilder(int(rng.integers(2, 7)))
    for _ in range(30):
        kind = names[int(rng.integers(len(names)))]
        qubits = rng.permutation(builder.n_qubits)[: kind.n_qubits].tolist()
        builder.add(kind.name, qubits, rng.uniform(-7, 7, kind.n_parameters).tolist())
        builder.barrier() if rng.random() < 0.2 else builder.next_layer()
    return builder.build()


def expected(circuit: Circuit) -> np.ndarray:
    """The unitary of the rows; qubit 0 the most significant bit."""
    state = np.eye(2**circuit.n_qubits, dtype=np.complex128).reshape((2,) * circuit.n_qubits + (-1,))
    for matrix, pair in zip(circuit.row_matrices(), circuit.qubits.tolist(), strict=True):
        if matrix is not None:
            qubits = [qubit for qubit in pair if qubit >= 0]
            k = len(qubits)
            state = np.tensordot(matrix.reshape((2,) * (2 * k)), state, (range(k, 2 * k), qubits))
            state = np.moveaxis(state, range(k), qubits)
    return state.reshape(2**circuit.n_qubits, -1)


def from_qiskit(circuit: qiskit.QuantumCircuit) -> np.ndarray:
    return Operator(circuit.reverse_bits()).data  # qiskit's qubit 0 is the least significant bit


def without_barriers(text: str) -> str:
    return "\n".join(line for line in text.splitlines() if not line.startswith("barrier"))


def from_cirq(circuit: cirq.Circuit, n_qubits: int, register: str = "") -> np.ndarray:
    line = cirq.LineQubit.range(n_qubits)
    qubits = [cirq.NamedQubit(f"{register}_{q.x}") for q in line] if register else line
    return circuit.unitary(qubit_order=qubits, qubits_that_should_be_present=qubits)


READERS = {
    "qasm2 by qiskit": lambda circuit: from_qiskit(qiskit.qasm2.loads(to_qasm2(circuit))),
    "qasm3 by qiskit": lambda circuit: from_qiskit(qiskit.qasm3.loads(to_qasm3(circuit))),
    "qasm2 by cirq": lambda circuit: from_cirq(
        circuit_from_qasm(without_barriers(to_qasm2(circuit))), circuit.n_qubits, "q"
    ),
    "qasm3 by cirq": lambda circuit: from_cirq(
        circuit_from_qasm(without_barriers(to_qasm3(circuit))), circuit.n_qubits, "q"
    ),
    "cirq json by cirq": lambda circuit: from_cirq(cirq.read_json(json_text=to_cirq_json(circuit)), circuit.n_qubits),
}


def check(number: int, reader: str) -> None:
    circuit = random_circuit(number)
    wanted, found = expected(circuit), READERS[reader](circuit)
    overlap = np.vdot(found, wanted)
    assert np.abs(wanted - found * (overlap / abs(overlap))).max() < 1e-12, number


@pytest.mark.parametrize("reader", READERS)
@pytest.mark.parametrize("number", range(0, 40, 3))
def test_a_reader_sees_the_unitary_of_the_circuit_up_to_phase(number, reader):
    check(number, reader)


@pytest.mark.slow
@pytest.mark.parametrize("reader", READERS)
def test_a_reader_sees_the_unitaries_of_200_circuits_up_to_phase(reader):
    for number in range(200):
        check(number, reader)


def measured(number: int) -> Circuit:
    builder = CircuitBuilder(random_circuit(number).n_qubits)
    builder.append(random_circuit(number))
    builder.measure(reversed(range(builder.n_qubits)))
    return builder.build()


@pytest.mark.parametrize("number", range(0, 40, 7))
def test_the_reference_parser_of_openqasm_3_reads_every_statement(number):
    circuit = measured(number)
    program = openqasm3.parse(to_qasm3(circuit))
    kinds = [type(statement).__name__ for statement in program.statements]
    n = circuit.n_qubits
    assert program.version == "3.0"
    assert kinds.count("QuantumMeasurementStatement") == n
    assert kinds.count("QuantumGate") == int(circuit.gate_rows.sum())
    assert kinds.count("QuantumBarrier") >= sum(KINDS[kind].name == "barrier" for kind in circuit.kind)


@pytest.mark.parametrize(("loads", "write"), [(qiskit.qasm2.loads, to_qasm2), (qiskit.qasm3.loads, to_qasm3)])
def test_qiskit_reads_each_measurement_into_the_classical_bit_meant(loads, write):
    circuit = measured(2)
    read = loads(write(circuit))
    n = circuit.n_qubits
    found = {
        read.find_bit(item.clbits[0]).index: read.find_bit(item.qubits[0]).index
        for item in read.data
        if item.operation.name == "measure"
    }
    assert found == {bit: n - 1 - bit for bit in range(n)}

"""Layers from a sequence of rows, and the barriers that keep the layers of a circuit in its text."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_cases import make_device
from qasm_cases import layered_rows

from rcbench.campaign import Circuits, Experiment
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.export import to_cirq_json, to_qasm2, to_qasm3
from rcbench.circuits.families import draw_circuits
from rcbench.circuits.gates import CODE
from rcbench.circuits.qasm import read_cirq_json, read_qasm
from rcbench.circuits.qasm_layers import PARTIAL, layers_of, time_keys, waits
from rcbench.circuits.transform import inverse
from rcbench.device import Limits, NativeGate
from rcbench.errors import InputError

NATIVE = {
    "cz": NativeGate(name="cz"),
    "sqrt-iswap": NativeGate(name="sqrt-iswap"),
    "fsim": NativeGate(name="fsim", parameters=(np.pi / 2, 0.0)),
    "zz": NativeGate(name="zz"),
}


def echo(native: str, one_qubit: str, two_qubit: str, limits: Limits | None, layout: str = "line") -> Circuit:
    """A circuit and its reverse, then measurements, on five or six qubits."""
    device = make_device(layout, 5, one_qubit=one_qubit, gates=(NATIVE[native],), limits=limits)
    circuits = Circuits(two_qubit=two_qubit, one_qubit="quarter-turns", angle=0.3 if two_qubit == "zz" else None)
    experiment = Experiment(
        name="e", signatures=("renyi2_entropy",), circuits=circuits, depths=(3,), instances=1, qubits=tuple(range(5))
    )
    circuit = draw_circuits(experiment, device, 3, 0)[3]
    builder = CircuitBuilder(5)
    builder.append(circuit)
    builder.barrier()
    try:
        builder.append(inverse(circuit, device, range(5)))
    except InputError:
        builder.append(circuit)
    builder.barrier()
    builder.measure(range(5))
    return builder.build()


def cases():
    for native in NATIVE:
        for one_qubit in ("u", "r+rz", "sx+rz"):
            for two_qubit in (native, "haar", "clifford"):
                for limits in (None, Limits(parallel_gates=1)):
                    yield pytest.param(
                        native, one_qubit, two_qubit, limits, id=f"{native}-{one_qubit}-{two_qubit}-{bool(limits)}"
                    )


@pytest.mark.parametrize(("native", "one_qubit", "two_qubit", "limits"), list(cases()))
def test_the_barriers_of_waits_give_back_the_very_layers_of_a_compiled_circuit(native, one_qubit, two_qubit, limits):
    circuit = echo(native, one_qubit, two_qubit, limits)
    held = waits(circuit)
    sequence, partial, own = [], {}, []
    for place, (code, pair) in enumerate(zip(circuit.kind.tolist(), circuit.qubits.tolist(), strict=True)):
        if code == CODE["measure"]:
            break
        if place in held:
            partial[len(sequence)] = held[place]
            sequence.append((PARTIAL, -1, -1))
        own.append(len(sequence))
        sequence.append((code, *pair))
    keys = time_keys(5, sequence, partial)[own]
    order, layer = layers_of(keys)
    assert order.tolist() == list(range(len(own)))
    assert layer.tolist() == circuit.layer[: len(own)].tolist()


@pytest.mark.parametrize(("native", "one_qubit", "two_qubit", "limits"), list(cases()))
def test_our_own_files_give_back_the_same_rows_in_the_same_layers(native, one_qubit, two_qubit, limits):
    circuit = echo(native, one_qubit, two_qubit, limits)
    for write in (to_qasm2, to_qasm3):
        again = read_qasm(write(circuit), name="t")
        assert again.n_qubits == circuit.n_qubits
        assert layered_rows(again) == layered_rows(circuit)


@pytest.mark.parametrize(("native", "one_qubit", "two_qubit", "limits"), list(cases()))
def test_our_own_cirq_files_give_back_the_same_rows_with_angles_to_rounding(native, one_qubit, two_qubit, limits):
    circuit = echo(native, one_qubit, two_qubit, limits)
    again = read_cirq_json(to_cirq_json(circuit), name="t")
    assert [row[:3] for row in layered_rows(again)] == [row[:3] for row in layered_rows(circuit)]
    np.testing.assert_allclose(again.parameters, circuit.parameters, atol=1e-12)


def test_a_gate_that_could_start_earlier_waits_for_one_that_runs_right_before_it():
    builder = CircuitBuilder(3)
    builder.add("x", [0])
    builder.next_layer()
    builder.add("x", [0])
    builder.add("x", [1])
    builder.next_layer()
    builder.add("cz", [1, 2])
    assert waits(builder.build()) == {1: [0, 1]}


def test_ten_thousand_qubits_and_barriers_take_no_time_of_their_square():
    rows = [(CODE["barrier"], -1, -1), (CODE["x"], 9_999, -1)] * 20_000
    keys = time_keys(10_000, rows, {})
    assert np.all(np.diff(keys) > 0)

"""Final states against cirq's state-vector simulator, for every layout and native gate.

The circuits are translated gate by gate here, with cirq's own gates, so that the matrices are cirq's too.
"""

from __future__ import annotations

from itertools import combinations

import cirq
import numpy as np
import pytest

from rcbench.campaign import Circuits, Experiment
from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.families import draw_circuits
from rcbench.circuits.gates import KINDS
from rcbench.device import Device, NativeGate
from rcbench.engine.state import final_state
from rcbench.engine.tree import walk

TOLERANCE = {"complex64": 1e-5, "complex128": 1e-12}
COUPLERS = {
    "line": [(q, q + 1) for q in range(7)],
    "ring": [*((q, q + 1) for q in range(6)), (0, 6)],
    "grid": [(0, 1), (1, 2), (3, 4), (4, 5), (6, 7), (7, 8), (0, 3), (1, 4), (2, 5), (3, 6), (4, 7), (5, 8)],
    "edges": [(0, 1), (0, 2), (0, 3), (3, 4), (4, 5), (2, 5), (5, 6)],
    "all-to-all": list(combinations(range(6), 2)),
}
FIXED = {
    "x": cirq.X, "y": cirq.Y, "z": cirq.Z, "h": cirq.H, "s": cirq.S, "sdg": cirq.S**-1, "sx": cirq.X**0.5,
    "sxdg": cirq.X**-0.5, "cz": cirq.CZ, "cx": cirq.CNOT, "iswap": cirq.ISWAP, "sqrt_iswap": cirq.ISWAP**0.5,
}  # fmt: skip


def cirq_gate(name: str, angles: tuple[float, ...]) -> cirq.Gate:
    """The same unitary, global phase included."""
    if name in FIXED:
        return FIXED[name]
    if name == "rz":
        return cirq.rz(angles[0])
    if name == "zz":
        return cirq.ZZPowGate(exponent=angles[0] / np.pi, global_shift=-0.5)
    if name == "fsim":
        return cirq.FSimGate(*angles)
    if name == "r":
        return cirq.PhasedXPowGate(phase_exponent=angles[1] / np.pi, exponent=angles[0] / np.pi, global_shift=-0.5)
    theta, phi, lam = angles  # u: rotations about z, y, z and the phase that makes its first entry real
    matrix = (
        np.exp(0.5j * (phi + lam))
        * cirq.unitary(cirq.rz(phi))
        @ cirq.unitary(cirq.ry(theta))
        @ cirq.unitary(cirq.rz(lam))
    )
    return cirq.MatrixGate(matrix)


def cirq_state(circuit: Circuit) -> np.ndarray:
    qubits = cirq.LineQubit.range(circuit.n_qubits)
    operations = [
        cirq_gate(KINDS[circuit.kind[row]].name, circuit.row_parameters(row)).on(
            *(qubits[q] for q in circuit.qubits[row] if q >= 0)
        )
        for row in np.flatnonzero(circuit.gate_rows)
    ]
    simulator = cirq.Simulator(dtype=np.complex128)
    return simulator.simulate(cirq.Circuit(operations), qubit_order=qubits).final_state_vector


def device(layout: str, gate: NativeGate, one_qubit: str) -> Device:
    couplers = tuple(sorted(COUPLERS[layout]))
    n_qubits = 1 + max(max(pair) for pair in couplers)
    return Device(
        name="invented", n_qubits=n_qubits, layout=layout, couplers=couplers, rows=3 if layout == "grid" else 0,
        columns=3 if layout == "grid" else 0, one_qubit=one_qubit, two_qubit=(gate,),
    )  # fmt: skip


NATIVE = {
    "cz": NativeGate(name="cz"),
    "iswap": NativeGate(name="iswap"),
    "sqrt-iswap": NativeGate(name="sqrt-iswap"),
    "fsim": NativeGate(name="fsim", parameters=(1.5, 0.4)),
    "zz": NativeGate(name="zz", parameters=(0.9,)),
}


@pytest.mark.parametrize("dtype", ["complex64", "complex128"])
@pytest.mark.parametrize("gate", NATIVE)
@pytest.mark.parametrize("layout", COUPLERS)
def test_states_of_every_layout_and_native_gate_are_those_of_cirq(layout, gate, dtype):
    one_qubit = {"cz": "u", "iswap": "r+rz", "sqrt-iswap": "sx+rz", "fsim": "r+rz", "zz": "u"}[gate]
    target = device(layout, NATIVE[gate], one_qubit)
    experiment = Experiment(
        name="states", depths=(1, 4, 7), instances=1, qubits=tuple(range(target.n_qubits)),
        circuits=Circuits(two_qubit=gate, one_qubit="azimuth" if one_qubit == "u" else "haar"),
    )  # fmt: skip
    circuits = list(draw_circuits(experiment, target, seed=11, instance=0).values())
    for index, state in walk(circuits, dtype=dtype):
        np.testing.assert_allclose(state, cirq_state(circuits[index]), rtol=0, atol=TOLERANCE[dtype])


def test_haar_gates_compiled_to_cz_give_the_states_of_cirq():
    target = device("line", NATIVE["cz"], "u")
    experiment = Experiment(
        name="states",
        depths=(5,),
        instances=1,
        qubits=tuple(range(8)),
        circuits=Circuits(two_qubit="haar", one_qubit="none"),
    )
    (circuit,) = draw_circuits(experiment, target, seed=3, instance=0).values()
    np.testing.assert_allclose(final_state(circuit, "complex128"), cirq_state(circuit), rtol=0, atol=1e-12)


@pytest.mark.parametrize("name", [kind.name for kind in KINDS if kind.matrices is not None and kind.n_parameters < 8])
def test_every_gate_kind_is_the_gate_of_cirq(name):
    kind = next(kind for kind in KINDS if kind.name == name)
    angles = (0.8, -1.3, 2.1)[: kind.n_parameters]
    builder = CircuitBuilder(3)
    for qubit in range(3):
        builder.add("u", [qubit], [0.4 + qubit, 0.2, 0.9])
    builder.next_layer()
    builder.add(name, [2, 0][: kind.n_qubits], angles)
    circuit = builder.build()
    np.testing.assert_allclose(final_state(circuit, "complex128"), cirq_state(circuit), rtol=0, atol=1e-12)


def test_a_state_of_many_sweeps_is_that_of_cirq():
    target = device("line", NATIVE["cz"], "u")
    wide = Device(
        name="wide",
        n_qubits=17,
        layout="line",
        couplers=tuple((q, q + 1) for q in range(16)),
        two_qubit=target.two_qubit,
    )
    experiment = Experiment(name="states", depths=(6,), instances=1, qubits=tuple(range(17)))
    (circuit,) = draw_circuits(experiment, wide, seed=5, instance=0).values()
    np.testing.assert_allclose(final_state(circuit), cirq_state(circuit), rtol=0, atol=1e-5)

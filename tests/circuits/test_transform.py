from __future__ import annotations

import numpy as np
import pytest
from circuit_cases import make_device, phase_distance, unitary

from rcbench.campaign import Circuits, Experiment
from rcbench.circuits.circuit import CircuitBuilder
from rcbench.circuits.families import draw_circuits
from rcbench.circuits.gates import CODE, KINDS, N_QUBITS
from rcbench.circuits.transform import conjugate, inverse, transpose
from rcbench.device import Limits, NativeGate
from rcbench.errors import InputError

CHANGES = {
    "inverse": (inverse, lambda u: u.conj().T),
    "conjugate": (conjugate, lambda u: u.conj()),
    "transpose": (transpose, lambda u: u.T),
}
ALLOWED = {"u": {"u"}, "r+rz": {"r", "rz"}, "sx+rz": {"sx", "rz"}}
GATES = {
    "cz": NativeGate(name="cz"),
    "iswap": NativeGate(name="iswap"),
    "sqrt-iswap": NativeGate(name="sqrt-iswap"),
    "zz at any angle": NativeGate(name="zz"),
    "zz at pi/2": NativeGate(name="zz", parameters=(np.pi / 2,)),
    "zz at 0.7": NativeGate(name="zz", parameters=(0.7,)),
    "zz with negative angles": NativeGate(name="zz", parameters=(0.7,), by_coupler={(1, 2): (0.4,)}, negative=True),
    "fsim with phi 0": NativeGate(name="fsim", parameters=(0.6, 0.0), by_coupler={(1, 2): (0.8, 0.0)}),
    "fsim with theta pi/2": NativeGate(
        name="fsim", parameters=(np.pi / 2, 0.5), by_coupler={(0, 1): (np.pi / 2, -0.2)}
    ),
    "fsim with theta -pi/2": NativeGate(name="fsim", parameters=(-np.pi / 2, 0.5)),
    "fsim with negative angles": NativeGate(name="fsim", parameters=(0.6, 0.5), negative=True),
}  # fmt: skip


def circuit_of(device, gate: NativeGate, one_qubit: str, depth: int = 4, two_qubit: str = ""):
    angle = 0.9 if gate.name == "zz" and not gate.parameters and not two_qubit else None
    experiment = Experiment(
        name="transformed",
        circuits=Circuits(two_qubit=two_qubit or gate.name, one_qubit=one_qubit, angle=angle),
        depths=(depth,),
        instances=1,
        qubits=tuple(range(device.n_qubits)),
    )
    return draw_circuits(experiment, device, 5, 0)[depth]


def kinds(circuit) -> set[str]:
    return {KINDS[code].name for code in np.unique(circuit.kind)}


@pytest.mark.parametrize("change", CHANGES)
@pytest.mark.parametrize("native", ALLOWED)
@pytest.mark.parametrize("gate", GATES)
def test_each_change_is_exact_in_the_same_native_gates(gate, native, change):
    """Against the dense matrix, to 1e-12 up to phase, on a line of four."""
    make, wanted = CHANGES[change]
    device = make_device("line", 4, one_qubit=native, gates=[GATES[gate]])
    for one_qubit in ("haar", "quarter-turns"):
        circuit = circuit_of(device, GATES[gate], one_qubit)
        changed = make(circuit, device, range(4))
        assert phase_distance(unitary(changed), wanted(unitary(circuit))) < 1e-12
        assert kinds(changed) <= ALLOWED[native] | {GATES[gate].name.replace("-", "_"), "barrier"}


@pytest.mark.parametrize("native", ALLOWED)
@pytest.mark.parametrize("one_qubit", ["haar", "quarter-turns"])
@pytest.mark.parametrize("gate", GATES)
def test_inverses_take_as_many_native_layers_as_the_circuit(gate, one_qubit, native):
    device = make_device("line", 5, one_qubit=native, gates=[GATES[gate]])
    circuit = circuit_of(device, GATES[gate], one_qubit, depth=6)
    undone = inverse(circuit, device, range(5))
    assert undone.n_layers == circuit.n_layers
    assert undone.two_qubit_gates == circuit.two_qubit_gates


@pytest.mark.parametrize("change", CHANGES)
@pytest.mark.parametrize(
    ("gate", "two_qubit"), [(g, t) for g in ("cz", "iswap", "sqrt-iswap", "zz at pi/2") for t in ("haar", "clifford")]
)
@pytest.mark.parametrize("native", ALLOWED)
def test_compiled_circuits_change_exactly_too(gate, two_qubit, native, change):
    make, wanted = CHANGES[change]
    device = make_device("ring", 4, one_qubit=native, gates=[GATES[gate]], limits=Limits(parallel_gates=1))
    circuit = circuit_of(device, GATES[gate], "none", two_qubit=two_qubit)
    changed = make(circuit, device, range(4))
    assert phase_distance(unitary(changed), wanted(unitary(circuit))) < 1e-12
    assert kinds(changed) <= ALLOWED[native] | {GATES[gate].name.replace("-", "_"), "barrier"}
    assert changed.two_qubit_gates == circuit.two_qubit_gates


@pytest.mark.parametrize("change", CHANGES)
def test_blocks_between_barriers_are_mirrored_and_keep_their_pairs(change):
    device = make_device("line", 6, gates=[GATES["iswap"]])
    circuit = circuit_of(device, GATES["iswap"], "quarter-turns", depth=3)

    def blocks(c):
        """The pairs of each block between barriers."""
        edges = np.flatnonzero(c.kind == CODE["barrier"])
        parts = np.split(np.arange(len(c)), edges)
        return [sorted(map(tuple, c.qubits[p][N_QUBITS[c.kind[p]] == 2].tolist())) for p in parts]

    changed = CHANGES[change][0](circuit, device, range(6))
    assert blocks(changed) == (blocks(circuit) if change == "conjugate" else blocks(circuit)[::-1])
    assert len(blocks(changed)) == 7


@pytest.mark.parametrize("gate", ["cz", "iswap", "sqrt-iswap", "zz at pi/2"])
def test_inverses_of_discrete_circuits_keep_exact_angles(gate):
    device = make_device("line", 4, one_qubit="r+rz", gates=[GATES[gate]])
    undone = inverse(circuit_of(device, GATES[gate], "quarter-turns"), device, range(4))
    multiples = {sign * k * (np.pi / 4) for k in range(5) for sign in (1, -1)}
    assert set(undone.parameters.tolist()) <= multiples


@pytest.mark.parametrize("name", [kind.name for kind in KINDS if kind.n_qubits == 1 and kind.matrices is not None])
@pytest.mark.parametrize("change", CHANGES)
def test_every_one_qubit_kind_is_changed_exactly(name, change):
    device = make_device("line", 2)
    rng = np.random.default_rng(3)
    for _ in range(4):
        builder = CircuitBuilder(2)
        values = rng.uniform(-4, 4, KINDS[CODE[name]].n_parameters)
        if name == "matrix1":
            q, _ = np.linalg.qr(rng.normal(size=(2, 2)) + 1j * rng.normal(size=(2, 2)))
            values = np.stack([q.real, q.imag], axis=-1).ravel()
        builder.add(name, [1], values)
        circuit = builder.build()
        make, wanted = CHANGES[change]
        assert phase_distance(unitary(make(circuit, device, range(2))), wanted(unitary(circuit))) < 1e-14


@pytest.mark.parametrize("change", CHANGES)
def test_gates_at_the_ends_and_next_to_each_other_are_changed_exactly(change):
    """Circuits with no one-qubit layer to take the added gates into, and one- and two-qubit gates in one layer."""
    make, wanted = CHANGES[change]
    for gate in ("iswap", "fsim with theta pi/2", "zz at 0.7"):
        native = GATES[gate]
        device = make_device("line", 3, one_qubit="sx+rz", gates=[native])
        name = native.name.replace("-", "_")
        builder = CircuitBuilder(3)
        builder.add(name, (0, 1), native.at((0, 1)))
        builder.next_layer()
        builder.add(name, (2, 1), native.at((1, 2)))
        builder.add("sx", (0,))
        builder.barrier()
        builder.add(name, (1, 2), native.at((1, 2)))
        circuit = builder.build()
        changed = make(circuit, device, range(3))
        assert phase_distance(unitary(changed), wanted(unitary(circuit))) < 1e-12


def test_cx_and_stored_matrices_are_changed_exactly():
    device = make_device("line", 2)
    rng = np.random.default_rng(8)
    q, _ = np.linalg.qr(rng.normal(size=(4, 4)) + 1j * rng.normal(size=(4, 4)))
    builder = CircuitBuilder(2)
    builder.add("cx", (1, 0))
    builder.next_layer()
    builder.add("matrix2", (0, 1), np.stack([q.real, q.imag], axis=-1).ravel())
    circuit = builder.build()
    for make, wanted in CHANGES.values():
        assert phase_distance(unitary(make(circuit, device, range(2))), wanted(unitary(circuit))) < 1e-14


def test_an_empty_circuit_stays_empty():
    device = make_device("line", 2)
    empty = CircuitBuilder(2).build()
    assert all(len(make(empty, device, range(2))) == 0 for make, _ in CHANGES.values())


def test_fsim_with_other_angles_is_refused_with_the_reason():
    gate = NativeGate(name="fsim", parameters=(1.5, 0.3))
    device = make_device("line", 4, gates=[gate])
    circuit = circuit_of(device, gate, "quarter-turns")
    for make in (inverse, conjugate):
        with pytest.raises(
            InputError, match=r"fsim: found \(1\.5, 0\.3\); allowed: theta = pi/2 or phi = 0 .*negative"
        ):
            make(circuit, device, range(4))
    assert phase_distance(unitary(transpose(circuit, device, range(4))), unitary(circuit).T) < 1e-12


def test_a_measurement_is_refused():
    builder = CircuitBuilder(2)
    builder.measure([0, 1])
    with pytest.raises(InputError, match="circuit: found 'a measure'; allowed: gates and barriers only"):
        inverse(builder.build(), make_device("line", 2), range(2))

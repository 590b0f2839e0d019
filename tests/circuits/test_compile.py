from __future__ import annotations

import time

import cirq
import numpy as np
import pytest
from circuit_cases import make_device, phase_distance
from scipy.stats import unitary_group

from rcbench.circuits.circuit import CircuitBuilder
from rcbench.circuits.compile import Decomposition, add_native, add_two_qubit, decompose
from rcbench.circuits.export import to_cirq
from rcbench.circuits.gates import CODE
from rcbench.circuits.kak import canonical, interaction, kron
from rcbench.device import NATIVE_ONE_QUBIT, Limits, NativeGate
from rcbench.errors import InputError

HALF = np.pi / 2
NATIVES = [
    ("cz", ()),
    ("iswap", ()),
    ("sqrt-iswap", ()),
    ("zz", ()),
    ("zz", (HALF,)),
    ("zz", (-HALF,)),
    ("fsim", (HALF, 0.0)),
    ("fsim", (-HALF, 0.0)),
]
CIRQ_GATES = {
    "cz": lambda: cirq.CZ,
    "iswap": lambda: cirq.ISWAP,
    "sqrt-iswap": lambda: cirq.SQRT_ISWAP,
    "zz": lambda angle: cirq.ZZPowGate(exponent=angle / np.pi, global_shift=-0.5),
    "fsim": cirq.FSimGate,
}
NAMED = [cirq.IdentityGate(2), cirq.CNOT, cirq.CZ, cirq.SWAP, cirq.ISWAP, cirq.ISWAP**-1, cirq.SQRT_ISWAP, cirq.ZZ**0.3]
NAMED += [cirq.FSimGate(HALF, np.pi / 6), cirq.CZ**0.25, cirq.SWAP**0.5, cirq.XX**0.1, cirq.givens(0.4)]


def special_gates() -> np.ndarray:
    """Named gates; interactions at and close to every corner, edge and wall of the Weyl chamber, in local gates."""
    grid = np.array(list(np.ndindex(5, 5, 5))) * (np.pi / 8) - np.pi / 4
    points = np.concatenate([grid, grid * [1.1, 0.3, 0], grid * [0.9, 0.6, 0.3], grid * [0.9, 0.45, 0.45]])
    shifts = np.random.default_rng(4).normal(size=points.shape)
    points = np.concatenate([points, *(points + size * shifts for size in (1e-15, 1e-12, 1e-10, 1e-8, 1e-4))])
    local = unitary_group.rvs(2, size=2 * len(points), random_state=5).reshape(2, -1, 2, 2)
    turns = kron(np.stack([local, local[::-1]], axis=2))
    named = np.array([cirq.unitary(gate) for gate in NAMED])
    return np.concatenate([named, turns[0] @ interaction(points) @ turns[1]])


GATES = {"haar": unitary_group.rvs(4, size=400, random_state=11), "special": special_gates()}


def rebuilt(found: Decomposition, parameters: tuple[float, ...]) -> np.ndarray:
    """The products of each decomposition, with the two-qubit gates as Cirq has them."""
    local, any_angle = kron(found.locals), found.native == "zz" and not parameters
    out = local[:, 0]
    for step in range(3):
        gate = CIRQ_GATES[found.native]
        angles = [(angle,) for angle in found.angles[:, step]] if any_angle else [parameters]
        gates = np.array([cirq.unitary(gate(*values)) for values in angles])
        out = np.where((found.count > step)[:, None, None], local[:, step + 1] @ gates @ out, out)
    return out


@pytest.mark.parametrize("gates", GATES)
@pytest.mark.parametrize(("native", "parameters"), NATIVES)
def test_a_decomposition_gives_the_gate_back_up_to_phase(native, parameters, gates):
    wanted = GATES[gates]
    found = rebuilt(decompose(wanted, native, parameters), parameters)
    worst = max(phase_distance(one, two) for one, two in zip(found, wanted, strict=True))
    assert worst < (
        5e-14 if gates == "haar" else 5e-11
    )  # coordinates within 1e-11 of a class with fewer gates are set to it


def test_cz_counts_equal_those_of_cirq():
    wanted = np.concatenate([GATES["haar"][:50], GATES["special"][:800]])
    a, b = cirq.LineQubit.range(2)
    counts = [cirq.num_cnots_required(gate, atol=1e-8) for gate in wanted]
    assert decompose(wanted, "cz").count.tolist() == counts
    built = cirq.two_qubit_matrix_to_cz_operations(a, b, wanted[0], allow_partial_czs=False)
    assert sum(len(op.qubits) == 2 for op in built) == counts[0]


def test_sqrt_iswap_counts_equal_those_of_cirq():
    wanted = np.concatenate([GATES["haar"][:100], GATES["special"][:400]])
    qubits = cirq.LineQubit.range(2)
    built = [cirq.two_qubit_matrix_to_sqrt_iswap_operations(*qubits, gate) for gate in wanted]
    counts = [sum(len(op.qubits) == 2 for op in operations) for operations in built]
    assert decompose(wanted, "sqrt-iswap").count.tolist() == counts


def test_two_sqrt_iswaps_serve_79_percent_of_haar_gates():
    """Huang et al., arXiv:2105.06074; 4 sigma of a binomial count."""
    n = 5_000
    count = decompose(unitary_group.rvs(4, size=n, random_state=6), "sqrt-iswap").count
    assert set(count.tolist()) == {2, 3}
    assert abs(np.mean(count == 2) - 0.79) < 4 * np.sqrt(0.79 * 0.21 / n) + 0.005  # published to two digits


def test_iswap_counts_are_three_for_haar_gates_and_the_least_for_named_ones():
    """Gates of z = 0 take two, the iSWAP class one, local gates none; SWAP three."""
    assert set(decompose(GATES["haar"], "iswap").count.tolist()) == {3}
    names = [cirq.IdentityGate(2), cirq.ISWAP, cirq.ISWAP**-1, cirq.CNOT, cirq.ZZ**0.3, cirq.SQRT_ISWAP, cirq.SWAP]
    found = decompose(np.array([cirq.unitary(gate) for gate in names]), "iswap")
    assert found.count.tolist() == [0, 1, 1, 2, 2, 2, 3]


def test_zz_takes_one_gate_a_coordinate_with_angles_from_zero_to_a_quarter_turn():
    found = decompose(np.array([cirq.unitary(gate) for gate in (cirq.CNOT, cirq.ZZ**0.3, cirq.ISWAP, cirq.SWAP)]), "zz")
    assert found.count.tolist() == [1, 1, 2, 3]
    np.testing.assert_allclose(found.angles[1], [0.3 * np.pi, 0, 0], atol=1e-14)
    angles = decompose(GATES["haar"], "zz").angles
    assert (angles > 0).all()
    assert (angles <= HALF).all()


def test_coordinates_equal_those_of_cirq():
    wanted = np.concatenate([GATES["haar"][:100], GATES["special"][: 100 + len(NAMED)]])
    theirs = [cirq.kak_decomposition(gate).interaction_coefficients for gate in wanted]
    np.testing.assert_allclose(canonical(wanted).coordinates, theirs, atol=2e-8)


def test_slices_of_a_decomposition_are_the_decomposition_of_the_slice():
    whole = decompose(GATES["haar"], "sqrt-iswap")
    part, alone = whole[10:30][np.array([3, 5, 7])], decompose(GATES["haar"][[13, 15, 17]], "sqrt-iswap")
    np.testing.assert_allclose(part.euler, alone.euler, atol=1e-12)
    for mine, theirs in zip(part.pulses("sx+rz"), alone.pulses("sx+rz"), strict=True):
        np.testing.assert_array_equal(mine.present, theirs.present)


@pytest.mark.parametrize("one_qubit", NATIVE_ONE_QUBIT)
@pytest.mark.parametrize(("native", "parameters"), NATIVES)
def test_a_layer_of_gates_is_right_in_native_rows_and_aligned(native, parameters, one_qubit):
    gate = NativeGate(name=native, parameters=parameters)
    device = make_device("line", 9, one_qubit=one_qubit, gates=[gate])
    wanted = np.concatenate([GATES["haar"][:2], [np.eye(4), cirq.unitary(cirq.CNOT)]])
    pairs, builder = [(0, 1), (3, 2), (4, 5), (6, 7)], CircuitBuilder(8)
    add_two_qubit(builder, device, range(1, 9), pairs, wanted, native)
    circuit = builder.build()
    one = {"u": {"u"}, "r+rz": {"r", "rz"}, "sx+rz": {"sx", "rz"}}[one_qubit]
    assert {CODE[name] for name in one | {native.replace("-", "_")}} == set(circuit.kind.tolist())
    two_qubit = circuit.kind == CODE[native.replace("-", "_")]
    assert len(np.unique(circuit.layer[two_qubit])) == 3 if native != "sqrt-iswap" else 2
    assert not set(circuit.layer[two_qubit].tolist()) & set(circuit.layer[~two_qubit].tolist())
    built, qubits = to_cirq(circuit), cirq.LineQubit.range(8)
    for pair, gate_wanted in zip(pairs, wanted, strict=True):
        own = [qubits[q] for q in pair]
        alone = cirq.Circuit(op for op in built.all_operations() if set(op.qubits) <= set(own))
        assert phase_distance(alone.unitary(qubit_order=own, qubits_that_should_be_present=own), gate_wanted) < 1e-13


def test_native_layers_keep_to_the_limits_of_the_device():
    limits = Limits(parallel_gates=2, exclusive=(((0, 1), (2, 3)),))
    device = make_device("line", 6, gates=[NativeGate(name="cz")], limits=limits)
    builder = CircuitBuilder(6)
    add_two_qubit(builder, device, range(6), [(0, 1), (2, 3), (4, 5)], GATES["haar"][:3], "cz")
    circuit = builder.build()
    slots = [
        circuit.qubits[circuit.layer == layer].tolist()
        for layer in np.unique(circuit.layer[circuit.kind == CODE["cz"]])
    ]
    assert slots == [[[0, 1], [4, 5]], [[2, 3]]] * 3


def test_fixed_gates_carry_the_angles_of_their_device_couplers():
    gate = NativeGate(name="fsim", parameters=(1.5, 0.2), by_coupler={(3, 4): (1.6, 0.1)}, negative=True)
    device = make_device("line", 6, gates=[gate])
    for negative, sign in ((False, 1), (True, -1)):
        builder = CircuitBuilder(4)
        add_native(builder, device, (5, 4, 3, 2), [(0, 1), (1, 2)], "fsim", negative=negative)
        circuit = builder.build()
        assert [circuit.row_parameters(row) for row in (0, 1)] == [(sign * 1.5, sign * 0.2), (sign * 1.6, sign * 0.1)]


def test_any_angle_zz_takes_the_angle_asked_for():
    device = make_device("line", 4, gates=[NativeGate(name="zz")])
    builder = CircuitBuilder(4)
    add_native(builder, device, range(4), [(0, 1), (2, 3)], "zz", angle=0.7)
    add_native(builder, device, range(4), [(1, 2)], "zz", angle=0.7, negative=True)
    assert builder.build().parameters.tolist() == [0.7, 0.7, -0.7]
    with pytest.raises(InputError, match="angle: found None; allowed: an angle for zz, since invented offers any"):
        add_native(builder, device, range(4), [(0, 1)], "zz")


@pytest.mark.parametrize(
    ("native", "parameters", "message"),
    [
        ("fsim", (1.5, 0.1), r"fsim: found \(1.5, 0.1\); allowed: \(pi/2, 0\) or \(-pi/2, 0\)"),
        ("fsim", (), r"fsim: found \(\); allowed"),
        ("zz", (0.3,), r"zz: found \(0.3,\); allowed: pi/2, -pi/2 or any angle"),
        ("cx", (), "native: found 'cx'; allowed: cz, iswap, sqrt-iswap, fsim, zz"),
    ],
)
def test_native_gates_that_do_not_serve_every_unitary_are_refused(native, parameters, message):
    with pytest.raises(InputError, match=message):
        decompose(GATES["haar"][:1], native, parameters)


@pytest.mark.parametrize(("native", "parameters"), NATIVES)
def test_matrices_with_eight_digits_are_decomposed_as_well_as_they_are_unitary(native, parameters):
    wanted = np.round(np.concatenate([GATES["haar"][:50], GATES["special"][:200]]), 9)
    found = rebuilt(decompose(wanted, native, parameters), parameters)
    assert max(phase_distance(one, two) for one, two in zip(found, wanted, strict=True)) < 1e-7


def test_matrices_that_are_not_unitary_are_refused():
    with pytest.raises(InputError, match=r"unitaries: found 'a matrix 0\.2 from unitary'"):
        decompose(np.eye(4)[None] * np.sqrt(1.2), "cz")
    with pytest.raises(InputError, match=r"unitaries: found \(4, 4\); allowed: an array of shape \(gates, 4, 4\)"):
        decompose(np.eye(4), "cz")


def test_what_the_device_lacks_is_refused_by_name():
    device = make_device("line", 4, gates=[NativeGate(name="cz"), NativeGate(name="fsim", parameters=(1.5, 0.2))])
    builder = CircuitBuilder(4)
    for call, message in (
        (lambda: add_native(builder, device, range(4), [(0, 1)], "iswap"), "two_qubit: found 'iswap'"),
        (
            lambda: add_native(builder, device, range(4), [(0, 1)], "cz", angle=0.1),
            "angle: found 0.1; allowed: no angle",
        ),
        (lambda: add_native(builder, device, range(4), [(0, 1)], "fsim", negative=True), "negative: found 'fsim'"),
        (lambda: add_two_qubit(builder, device, range(4), [(0, 1)], GATES["haar"][:1], "fsim"), "fsim: found"),
    ):
        with pytest.raises(InputError, match=message):
            call()
    unstated = make_device("line", 2, gates=[NativeGate(name="fsim")])
    with pytest.raises(InputError, match=r"fsim: found \(\); allowed: 2 angles for coupler \(0, 1\)"):
        add_native(builder, unstated, range(2), [(0, 1)], "fsim")


@pytest.mark.benchmark
@pytest.mark.parametrize("native", ["cz", "sqrt-iswap"])
def test_220_000_gates_are_decomposed_within_15_seconds(native):
    gates = unitary_group.rvs(4, size=220_000, random_state=1)
    start = time.process_time()
    decompose(gates, native)
    assert time.process_time() - start < 15

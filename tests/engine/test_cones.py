"""Light cones: what is simulated on fewer qubits equals what the whole register gives."""

from __future__ import annotations

import numpy as np
import pytest
from engine_cases import density_probabilities, noise_model, random_circuit, turns_circuit

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.gates import CODE, KINDS
from rcbench.engine import local
from rcbench.engine.cones import clusters, cone, cone_rows, layer_times, simplified
from rcbench.engine.local import z_averages
from rcbench.engine.parts import Parts
from rcbench.engine.predict import distributions
from rcbench.engine.readout import flip, measured
from rcbench.engine.reference import final_state_reference
from rcbench.engine.register import How
from rcbench.errors import InputError

VIRTUAL_KINDS = tuple(code for code, kind in enumerate(KINDS) if kind.virtual)


def inverse(circuit: Circuit) -> Circuit:
    """The adjoint of every gate as a matrix, last gate first, written by hand."""
    builder = CircuitBuilder(circuit.n_qubits)
    rows = list(zip(circuit.row_matrices(), circuit.qubits.tolist(), circuit.layer.tolist(), strict=True))
    before = None
    for matrix, pair, layer in reversed(rows):
        if layer != before:
            builder.next_layer()
        before = layer
        if matrix is not None:
            qubits = pair[: len(matrix) // 2]
            numbers = np.ascontiguousarray(matrix.conj().T, dtype=np.complex128).reshape(-1).view(np.float64)
            builder.add(f"matrix{len(qubits)}", qubits, numbers)
    return builder.build()


def echo(circuit: Circuit, butterfly: int | None, measured_qubits=None) -> Circuit:
    builder = CircuitBuilder(circuit.n_qubits)
    builder.append(circuit)
    if butterfly is not None:
        builder.add("x", [butterfly])
        builder.next_layer()
    builder.append(inverse(circuit))
    builder.measure(range(circuit.n_qubits) if measured_qubits is None else measured_qubits)
    return builder.build()


def brickwork(n: int, depth: int, seed: int, gate: str = "iswap") -> Circuit:
    rng = np.random.default_rng(seed)
    builder = CircuitBuilder(n)
    for layer in range(depth + 1):
        for qubit in range(n):
            builder.add("u", [qubit], rng.uniform(-3, 3, 3))
        builder.barrier()
        for qubit in range(layer % 2, n - 1, 2) if layer < depth else ():
            builder.add(gate, [qubit, qubit + 1])
        builder.barrier()
    return builder.build()


def grid_circuit(side: int, depth: int, seed: int) -> Circuit:
    """CZ gates in the four patterns of a square grid between random one-qubit gates."""
    rng = np.random.default_rng(seed)
    builder = CircuitBuilder(side * side)
    for layer in range(depth):
        for qubit in range(side * side):
            builder.add("u", [qubit], rng.uniform(-3, 3, 3))
        builder.next_layer()
        for row in range(side):
            for column in range(side):
                down, odd = layer % 2, (layer // 2) % 2
                if (row if down else column) % 2 == odd and (row if down else column) < side - 1:
                    here = side * row + column
                    builder.add("cz", [here, here + (side if down else 1)])
        builder.next_layer()
    return builder.build()


def z_by_reference(circuit: Circuit) -> np.ndarray:
    p = np.abs(final_state_reference(circuit)) ** 2
    n = circuit.n_qubits
    return np.array([measured(p, [q]) @ [1, -1] for q in range(n)])


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("butterfly", [None, 0, 3])
def test_simplified_echo_has_the_same_final_state_up_to_a_phase(seed, butterfly):
    whole = echo(random_circuit(6, 4, seed, measure=False), butterfly)
    small = simplified(whole)
    overlap = abs(np.vdot(final_state_reference(whole), final_state_reference(small)))
    assert overlap == pytest.approx(1, abs=1e-12)
    assert small.measured_qubits == whole.measured_qubits
    if butterfly is None:
        assert not np.any(small.gate_rows)
    else:
        assert np.count_nonzero(small.gate_rows) < np.count_nonzero(whole.gate_rows)


def test_native_inverse_with_z_conjugation_cancels():
    """The inverse of iSWAP is Z iSWAP Z: no row is the inverse of another, yet nothing but a phase is left."""
    builder = CircuitBuilder(2)
    builder.add("u", [0], [1, 2, 3])
    builder.next_layer()
    builder.add("iswap", [0, 1])
    builder.next_layer()
    builder.add("z", [0])
    builder.next_layer()
    builder.add("iswap", [1, 0])
    builder.next_layer()
    builder.add("z", [0])
    builder.next_layer()
    builder.add("u", [0], [-1, -3, -2])
    builder.measure([0, 1])
    assert not np.any(simplified(builder.build()).gate_rows)


def test_circuit_without_inverses_keeps_its_two_qubit_gates():
    circuit = brickwork(7, 5, seed=1)
    assert simplified(circuit).two_qubit_gates == circuit.two_qubit_gates


def test_cone_of_a_brickwork_grows_by_one_qubit_a_side_a_layer():
    circuit = brickwork(20, 4, seed=2)
    _, used = cone_rows(circuit, [9])
    # layer 4 holds (9, 10), layer 3 reaches 8 and 11, layer 2 reaches 7 and 12, layer 1 reaches 6 and 13
    assert used == (6, 7, 8, 9, 10, 11, 12, 13)
    part, qubits = cone(circuit, [9])
    assert (part.n_qubits, qubits) == (8, used)
    assert part.measured_qubits == (3,)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("wanted", [(0,), (4, 1), (6, 2, 5)])
def test_cone_gives_the_marginal_of_the_whole_register(seed, wanted):
    circuit = turns_circuit(7, 2, seed) if seed % 2 else random_circuit(7, 2, seed, share=0.4)
    part, _ = cone(circuit, wanted)
    p = np.abs(final_state_reference(circuit)) ** 2
    q = np.abs(final_state_reference(part)) ** 2
    np.testing.assert_allclose(measured(q, part.measured_qubits), measured(p, wanted), atol=1e-13)


def test_clusters_are_the_qubits_that_gates_connect():
    builder = CircuitBuilder(6)
    builder.add("cz", [0, 3])
    builder.add("cz", [4, 1])
    builder.next_layer()
    builder.add("cz", [3, 5])
    assert sorted(clusters(builder.build())) == [(0, 3, 5), (1, 4), (2,)]


@pytest.mark.parametrize("butterfly", [None, 2, 5])
@pytest.mark.parametrize(("dtype", "tolerance"), [("complex128", 1e-13), ("complex64", 1e-5)])
def test_z_averages_equal_those_of_the_whole_register(butterfly, dtype, tolerance):
    whole = echo(brickwork(8, 3, seed=4), butterfly)
    found = z_averages(whole, [7, 0, 3, 5, 1], dtype=dtype)
    np.testing.assert_allclose(found, z_by_reference(whole)[[7, 0, 3, 5, 1]], atol=tolerance)


def test_butterfly_echo_of_a_hundred_qubits_equals_that_of_its_neighbourhood():
    """All sites of a line of 100; the butterfly's cone of depth 4 lies inside sites 42 to 57."""
    circuit = brickwork(100, 4, seed=5)
    found = z_averages(echo(circuit, 50), range(100), dtype="complex128")
    outside = [*range(44), *range(57, 100)]
    np.testing.assert_allclose(found[outside], 1, atol=1e-13)
    keep = np.all((circuit.qubits >= 42) & (circuit.qubits <= 57) | (circuit.qubits < 0), axis=1)
    keep &= circuit.kind != CODE["barrier"]
    builder = CircuitBuilder(16)
    for row in np.flatnonzero(keep):
        qubits = [q - 42 for q in circuit.qubits[row].tolist() if q >= 0]
        builder.add(KINDS[circuit.kind[row]].name, qubits, circuit.row_parameters(row))
        builder.next_layer()
    patch = echo(builder.build(), 8)
    (_, ideal, _) = next(iter(distributions([patch], None, dtype="complex128")))
    near = [ideal.z_average(bit).value for bit in range(16)]
    np.testing.assert_allclose(found[42:58], near, atol=1e-12)


def test_butterfly_echo_on_a_ten_by_ten_grid_is_predicted():
    circuit = echo(grid_circuit(10, 2, seed=6), 44)
    ((_, ideal, _),) = distributions([circuit], None, dtype="complex128")
    assert isinstance(ideal, Parts)
    found = z_averages(circuit, range(100), dtype="complex128")
    np.testing.assert_allclose([ideal.z_average(bit).value for bit in range(100)], found, atol=1e-12)
    assert np.count_nonzero(np.abs(found - 1) > 1e-9) in range(1, 30)


def test_echo_of_a_hundred_qubits_returns_with_certainty():
    ((_, ideal, _),) = distributions([echo(brickwork(100, 3, seed=7), None)], None)
    weights = np.zeros(101)
    weights[0] = 1
    assert ideal.hamming_average(np.zeros(100, dtype=np.int64), weights).value == pytest.approx(1, abs=1e-12)
    assert ideal.collision().value == pytest.approx(1, abs=1e-12)
    with pytest.raises(InputError, match="100"):
        ideal.average(np.zeros(1))


def test_independent_parts_give_the_hamming_distances_of_the_whole():
    whole = echo(brickwork(9, 2, seed=8), 4)
    p = np.abs(final_state_reference(whole)) ** 2
    target = np.array([0, 1, 0, 0, 1, 0, 0, 0, 1])
    small = simplified(whole)
    pieces = [local.Piece.of(small, bits) for bits in clusters(small)]
    assert len(pieces) > 1
    how = How(dtype="complex128")
    parts = local._predicted(whole, [(piece, None) for piece in pieces], True, how, local.Work())
    weights = np.random.default_rng(0).normal(size=10)
    distance = np.bitwise_count(np.arange(512) ^ int("".join(map(str, target)), 2))
    assert parts.hamming_average(target, weights).value == pytest.approx(p @ weights[distance], abs=1e-12)
    assert parts.collision().value == pytest.approx(p @ p, abs=1e-12)


def test_few_measured_qubits_of_a_wide_register_come_from_their_cone(monkeypatch):
    monkeypatch.setattr(local, "REDUCED_FROM", 6)
    circuit = brickwork(12, 2, seed=9)
    builder = CircuitBuilder(12)
    builder.append(circuit)
    builder.measure([8, 7])
    whole = builder.build()
    how = How(dtype="complex128")
    assert local.reduces(whole, None, how)
    ((_, ideal, _),) = distributions([whole], None, dtype="complex128")
    p = np.abs(final_state_reference(whole)) ** 2
    np.testing.assert_allclose(ideal.probabilities, measured(p, [8, 7]), atol=1e-13)


def test_cone_under_noise_equals_the_exact_density_matrix(monkeypatch):
    """Idle times are those of the whole circuit's layers; 5 sigma of the Monte Carlo error, 4000 trajectories."""
    monkeypatch.setattr(local, "REDUCED_FROM", 2)
    monkeypatch.setattr(local, "WORTH", 1)
    builder = CircuitBuilder(5)
    builder.append(brickwork(5, 1, seed=10))
    builder.next_layer()
    builder.add("u", [0], [1, 2, 3])
    builder.add("cz", [3, 4])  # outside the cone, and longer than the gate inside
    builder.next_layer()
    builder.add("sx", [0])
    builder.measure([0, 1])
    whole, noise = builder.build(), noise_model(5, scale=2.0)
    exact = density_probabilities(whole, noise, VIRTUAL_KINDS)
    wanted = flip(measured(exact, [0, 1]), noise.confusion([0, 1]))
    ((_, _, noisy),) = distributions([whole], noise, trajectories=4000, dtype="complex128")
    for outcome in range(4):
        found = noisy.average(np.arange(4.0) == outcome)
        assert abs(found.value - wanted[outcome]) < 5 * found.std_error + 1e-12
    assert set(noisy.tilts) >= {"one_qubit", "two_qubit", "idle", "readout"}


def test_layers_last_as_long_as_their_longest_gate():
    builder = CircuitBuilder(3)
    builder.add("x", [0])
    builder.next_layer()
    builder.add("rz", [0], [1.0])
    builder.next_layer()
    builder.add("x", [0])
    builder.add("cz", [1, 2])
    assert layer_times(builder.build(), (30.0, 60.0)).tolist() == [30, 0, 60]


def test_noisy_prediction_of_single_sites_has_tilts_and_shifts():
    circuit = echo(brickwork(60, 1, seed=11), 30)
    noise = noise_model(60)
    ((_, ideal, noisy),) = distributions([circuit], noise, trajectories=16)
    assert isinstance(ideal, Parts)
    assert isinstance(noisy, Parts)
    assert set(noisy.tilts) == {"one_qubit", "two_qubit", "idle", "readout"}
    worse = noisy.shifted("readout").z_average(0).value
    assert worse < noisy.z_average(0).value < ideal.z_average(0).value
    with pytest.raises(InputError, match="distance to the target"):
        noisy.hamming_average(np.zeros(60, dtype=np.int64), np.zeros(61))


def test_cone_that_does_not_fit_is_refused_with_its_size():
    circuit = brickwork(60, 20, seed=12)
    builder = CircuitBuilder(60)
    builder.append(circuit)
    builder.measure(range(60))
    with pytest.raises(InputError, match="light cone of one qubit"):
        list(distributions([builder.build()], None, memory_limit=2**20))
    with pytest.raises(InputError, match="qubits"):
        z_averages(circuit, [60])

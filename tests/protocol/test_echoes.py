"""The echo protocols against dense linear algebra: targets that are certain, errors that must be seen, OTOCs."""

from __future__ import annotations

import numpy as np
import pytest
from protocol_cases import (
    GATES,
    campaign,
    circuits,
    device,
    final_state,
    line,
    outcome_probabilities,
    pauli,
    unitary,
)

from rcbench.campaign import Circuits
from rcbench.circuits.families import draw_circuits
from rcbench.circuits.frames import randomised
from rcbench.circuits.gates import CODE, N_QUBITS
from rcbench.circuits.passage import PAULIS, passage, unseen
from rcbench.protocol import load_protocol
from rcbench.randomness import Draw

N = 4


def gate_set(gate: str, logical: str = "") -> Circuits:
    native = GATES[gate]
    angle = 0.9 if gate == "zz at any angle" and not logical else None
    return Circuits(two_qubit=logical or native.name, one_qubit="none" if logical else "haar", angle=angle)


@pytest.mark.parametrize("protocol", ["loschmidt-echo", "mirror-echo"])
@pytest.mark.parametrize("gate", GATES)
@pytest.mark.parametrize("one_qubit", ["u", "r+rz", "sx+rz"])
def test_the_ideal_outcome_of_an_echo_is_its_target_with_certainty(protocol, gate, one_qubit):
    of = campaign(device(line(N), GATES[gate], one_qubit), circuits=gate_set(gate))
    for planned in circuits(load_protocol(protocol), of):
        p = outcome_probabilities(planned.circuit)
        assert p[int(planned.target, 2)] == pytest.approx(1, abs=1e-10)


@pytest.mark.parametrize("logical", ["haar", "clifford"])
@pytest.mark.parametrize("gate", ["cz", "iswap", "sqrt-iswap", "zz at any angle"])
def test_the_target_is_certain_for_compiled_gates_and_for_every_family(gate, logical):
    for family in ("brickwork", "product", "dimers"):
        gates = Circuits(two_qubit=logical, one_qubit="none", family=family)
        of = campaign(device(line(N), GATES[gate]), circuits=gates, depths=(0, 3))
        for planned in circuits(load_protocol("mirror-echo"), of):
            p = outcome_probabilities(planned.circuit)
            assert p[int(planned.target, 2)] == pytest.approx(1, abs=1e-10)


@pytest.mark.parametrize("gate", GATES)
def test_a_randomised_circuit_is_the_circuit_up_to_the_paulis_at_its_ends(gate):
    of = campaign(device(line(N), GATES[gate]), circuits=gate_set(gate), depths=(3,))
    circuit = draw_circuits(of.experiments[0], of.device, 5, 0)[3]
    frame = np.array([1, 3, 0, 2])
    for corrected in (False, True):
        made, left = randomised(circuit, "r+rz", frame, Draw(1, gate), corrected=corrected)
        assert not corrected or not left.any()
        ends = [np.eye(1), np.eye(1)]
        for q in range(N):
            ends = [np.kron(ends[0], PAULIS[left[q]]), np.kron(ends[1], PAULIS[frame[q]])]
        overlap = np.trace(unitary(made).conj().T @ ends[0] @ unitary(circuit) @ ends[1]) / 2**N
        assert abs(overlap) == pytest.approx(1, abs=1e-10)


def test_targets_of_the_mirror_echo_are_uniform_and_fresh_at_each_depth():
    """400 bits at depth 4: their mean within 4 standard errors of 1/2; no two depths share all targets."""
    of = campaign(device(line(N)), circuits=gate_set("cz"), depths=(1, 4), instances=100)
    planned = circuits(load_protocol("mirror-echo"), of)
    deep = [one.target for one in planned if one.depth == 4]
    shallow = [one.target for one in planned if one.depth == 1]
    bits = np.array([[int(bit) for bit in target] for target in deep])
    assert abs(bits.mean() - 0.5) < 4 * 0.5 / np.sqrt(bits.size)
    assert deep != shallow


@pytest.mark.parametrize(("gate", "logical"), [("cz", ""), ("iswap", ""), ("cz", "haar")])
def test_pauli_layers_take_no_extra_time(gate, logical):
    of = campaign(device(line(N), GATES[gate]), circuits=gate_set(gate, logical), depths=(5,))
    bare, random = (circuits(load_protocol(name), of)[0].circuit for name in ("loschmidt-echo", "mirror-echo"))
    assert random.n_layers == bare.n_layers
    assert random.two_qubit_gates == bare.two_qubit_gates
    barriers = [int(np.count_nonzero(circuit.kind == CODE["barrier"])) for circuit in (bare, random)]
    assert barriers[0] == barriers[1]


def reversed_error(circuit, angle):
    """exp(-i angle ZZ / 2) after each two-qubit gate of the first half, its inverse before each of the second half.

    The gates are CZ, which commute with it, so 'before' is written as 'after'.
    """
    rows = np.flatnonzero(N_QUBITS[circuit.kind] == 2)
    error = np.exp(-0.5j * angle * np.array([1, -1, -1, 1]))
    half = len(rows) // 2
    return {int(row): np.diag(error if place < half else error.conj()) for place, row in enumerate(rows)}


def test_a_coherent_error_that_a_true_time_reversal_undoes_is_seen_by_the_mirror_echo_only():
    """6 qubits, 8 layers, ZZ over-rotation 0.06 a gate, reversed in sign on the way back.

    An honest two-pass fidelity is about the square of the overlap of the forward state with and without the error.
    The mean of 40 randomised circuits must agree with it within 4 standard errors and 0.02.
    """
    angle, n, depth = 0.12, 6, 8
    gates = Circuits(two_qubit="cz", one_qubit="haar")
    of = campaign(device(line(n)), circuits=gates, depths=(depth,), instances=40)
    bare = circuits(load_protocol("loschmidt-echo"), of)
    mirror = circuits(load_protocol("mirror-echo"), of)
    blind = [abs(final_state(one.circuit, reversed_error(one.circuit, angle))[0]) ** 2 for one in bare]
    seen = [
        abs(final_state(one.circuit, reversed_error(one.circuit, angle))[int(one.target, 2)]) ** 2 for one in mirror
    ]
    assert np.allclose(blind, 1, atol=1e-10)
    honest = []
    for instance in range(40):
        forward = draw_circuits(of.experiments[0], of.device, of.seed, instance)[depth]
        rows = np.flatnonzero(N_QUBITS[forward.kind] == 2)
        error = np.diag(np.exp(-0.5j * angle * np.array([1, -1, -1, 1])))
        noisy = final_state(forward, {int(row): error for row in rows})
        honest.append(abs(np.vdot(final_state(forward), noisy)) ** 4)
    difference = np.array(seen) - np.array(honest)
    assert np.mean(seen) < 0.95
    assert abs(difference.mean()) < 4 * difference.std(ddof=1) / np.sqrt(40) + 0.02


@pytest.mark.parametrize(
    ("name", "parameters", "count", "blind"),
    [
        ("cz", (), 16, ()),
        ("iswap", (), 16, ()),
        ("sqrt_iswap", (), 4, ("XX", "YY", "ZZ")),
        ("zz", (0.7,), 8, ("ZZ",)),
        ("zz", (np.pi / 2,), 16, ()),
        ("fsim", (0.5, 0.3), 4, ("XX", "YY", "ZZ")),
        ("fsim", (np.pi / 2, 0.3), 8, ("ZZ",)),
    ],
)
def test_the_paulis_that_pass_a_gate_and_the_errors_no_frame_sees_are_known(name, parameters, count, blind):
    found = passage(name, parameters)
    assert len(found.allowed) == count
    assert found.commuting == blind
    for a, b in found.allowed:
        gate = np.asarray(found.after[a, b])
        assert np.allclose(gate @ gate.conj().swapaxes(-1, -2), np.eye(2), atol=1e-12)


def test_the_roster_names_errors_that_the_frames_cannot_see():
    of = campaign(device(line(N), GATES["sqrt-iswap"]), circuits=gate_set("sqrt-iswap"), depths=(2,))
    planned = circuits(load_protocol("mirror-echo"), of)[0]
    assert planned.params["unseen_errors"] == ["XX", "YY", "ZZ"]
    assert unseen(circuits(load_protocol("direct-sampling"), of)[0].circuit) == ("XX", "YY", "ZZ")
    assert "unseen_errors" not in circuits(load_protocol("mirror-echo"), campaign(device(line(N))))[0].params


@pytest.mark.parametrize("gate", ["cz", "fsim, phi = 0"])
def test_a_butterfly_echo_gives_the_otoc_of_the_operator_definition(gate):
    """<0|B(t) Z_m B(t) Z_m|0> with B(t) = U^-1 X_b U, dense, 5 qubits; E11."""
    n = 5
    of = campaign(
        device(line(n), GATES[gate]),
        circuits=gate_set(gate),
        depths=(2, 4),
        sites={"butterfly": (4, 2), "probe": (0, 3)},
    )
    drawn = draw_circuits(of.experiments[0], of.device, of.seed, 0)
    planned = circuits(load_protocol("butterfly-echo"), of)
    assert [(one.role, one.setting) for one in planned if one.depth == 2] == [
        ("reference", ""),
        ("butterfly", "butterfly=4"),
        ("butterfly", "butterfly=2"),
    ]
    for one in planned:
        assert one.circuit.measured_qubits == (0, 3)
        p = outcome_probabilities(one.circuit).reshape(2, 2)
        means = p.sum(axis=1) @ [1, -1], p.sum(axis=0) @ [1, -1]
        if one.role == "reference":
            assert np.allclose(means, 1, atol=1e-10)
            continue
        u = unitary(drawn[one.depth])
        b = u.conj().T @ pauli("X", one.params["butterfly"], n) @ u
        for mean, probe in zip(means, one.params["probes"], strict=True):
            m = pauli("Z", probe, n)
            assert mean == pytest.approx((b @ m @ b @ m)[0, 0].real, abs=1e-10)


def test_every_layer_and_the_turning_point_carry_a_barrier():
    of = campaign(device(line(N)), circuits=gate_set("cz"), depths=(3,))
    circuit = circuits(load_protocol("loschmidt-echo"), of)[0].circuit
    two_qubit = N_QUBITS[circuit.kind] == 2
    barrier = circuit.kind == CODE["barrier"]
    blocks = np.cumsum(barrier)
    assert len(np.unique(blocks[two_qubit])) == 6  # each of the 2 x 3 two-qubit layers stands alone
    assert not set(blocks[two_qubit]) & set(blocks[~two_qubit & ~barrier])
    # random frame, L0 .. L3, turning point, L3^-1 .. L0^-1, frame^-1: ten one-qubit blocks, and the measurement
    assert len(np.unique(blocks[~two_qubit & ~barrier])) == 11
    assert np.count_nonzero(barrier) == 16


def test_nested_depths_of_an_echo_share_their_frame_so_that_they_share_their_beginning():
    of = campaign(device(line(N)), circuits=gate_set("cz"), depths=(2, 4))
    short, long = (one.circuit for one in circuits(load_protocol("loschmidt-echo"), of))
    rows = int(np.flatnonzero(short.kind == CODE["barrier"])[5])
    assert np.array_equal(short.kind[:rows], long.kind[:rows])
    assert np.array_equal(short.parameters[: short.first[:rows].max()], long.parameters[: short.first[:rows].max()])

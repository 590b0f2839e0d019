"""Timed comparisons on whole jobs, where circuits share their beginnings or lose a part of themselves.

Where the peer's full work would take minutes it does an even sample of it, and its time is multiplied.
"""

from __future__ import annotations

import os

import cirq
import numpy as np
import pytest
from timed import fastest, haar_brickwork, medians, note, record, turns_brickwork

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.engine.local import z_averages
from rcbench.engine.threads import available_threads
from rcbench.engine.tree import walk
from rcbench.signatures.evolution import adjoint, choi_states
from rcbench.signatures.frame_potential import of_unitary_overlaps, overlaps
from rcbench.signatures.tmi import quarters, state_tmi

pytestmark = [pytest.mark.benchmark, pytest.mark.filterwarnings("ignore")]

ROUNDS = int(os.environ.get("RCBENCH_BENCHMARK_ROUNDS", "3"))
PAULIS = (("x", cirq.X), ("y", cirq.Y), ("z", cirq.Z))


def echo(forward: tuple[Circuit, cirq.Circuit], turn: list[tuple[int, int]]) -> tuple[Circuit, cirq.Circuit]:
    """U, Paulis (qubit, letter), and the inverse of U, in both forms."""
    ours, peer = forward
    builder = CircuitBuilder(ours.n_qubits)
    plain = Circuit(
        ours.n_qubits, *(part[ours.gate_rows] for part in (ours.layer, ours.kind, ours.qubits, ours.first)),
        ours.parameters,
    )  # fmt: skip
    builder.append(plain)
    qubits = cirq.LineQubit.range(ours.n_qubits)
    middle = []
    for qubit, letter in turn:
        builder.add(PAULIS[letter][0], [qubit])
        middle.append(PAULIS[letter][1](qubits[qubit]))
    builder.append(adjoint(plain))
    builder.measure(range(ours.n_qubits))
    return builder.build(), cirq.Circuit(peer, cirq.Moment(middle), cirq.inverse(peer))


def test_echo_tree():
    n, depth, branches = 18, 12, 20
    rng = np.random.default_rng(1)
    forward = turns_brickwork(n, depth)
    pairs = [
        echo(forward, [(q, int(letter) - 1) for q, letter in enumerate(rng.integers(4, size=n)) if letter])
        for _ in range(branches)
    ]
    circuits = [ours for ours, _ in pairs]
    run = fastest(pairs[0][1])

    def ours() -> list[float]:
        return [float(np.abs(state).max()) for _, state in walk(circuits)]

    def theirs() -> list[float]:
        return [float(np.abs(run(peer)).max()) for _, peer in pairs]

    np.testing.assert_allclose(sorted(ours()), sorted(theirs()), atol=1e-4)
    record(f"echo tree, n={n} depth {depth}, {branches} branches", *medians(ROUNDS, ours, theirs), 2.0, "qsimcirq")


def purity_of_parts(state: np.ndarray, kept: list[int], n: int) -> float:
    """tr rho^2 of 3-qubit parts by numpy: the smaller Gram matrix of the state as a matrix."""
    tensor = state.reshape((2 ** (n // 4),) * 4)
    matrix = np.moveaxis(tensor, kept, range(len(kept))).reshape(2 ** (n // 4 * len(kept)), -1)
    if matrix.shape[0] > matrix.shape[1]:
        matrix = matrix.T
    gram = matrix @ matrix.conj().T
    return float(np.vdot(gram, gram).real)


def peer_tmi(state: np.ndarray, n: int) -> float:
    signs = {(0,): 1, (1,): 1, (2,): 1, (0, 1): -1, (1, 2): -1, (0, 2): -1, (0, 1, 2): 1}
    return -sum(sign * np.log(purity_of_parts(state, list(kept), n)) for kept, sign in signs.items())


@pytest.mark.parametrize("instances", [25, 50, 100])
def test_nested_depths_of_many_instances(instances):
    n, depths, sample = 12, range(1, 17), 4
    ours_all, peers = [], []
    for instance in range(instances):
        # the deepest circuit and its beginnings, each with the layer of turns that ends it
        deepest, peer = turns_brickwork(n, 16, seed=instance)
        cuts = np.flatnonzero(deepest.gate_rows)
        layer = deepest.layer[cuts]
        ours_all += [prefix(deepest, cuts[layer <= 2 * depth]) for depth in depths]
        if instance < sample:
            peers.append(peer)
    a, b, c, _ = quarters(n)

    def ours() -> np.ndarray:
        states = np.empty((len(ours_all), 2**n), dtype=np.complex64)
        for place, state in walk(ours_all):
            states[place] = state
        probabilities = np.square(states.real) + np.square(states.imag)
        assert probabilities.shape == states.shape
        return state_tmi(states, a, b, c, order=2)

    simulator = cirq.Simulator(dtype=np.complex64)
    prefixes = [[peer[: 2 * depth + 1] for depth in depths] for peer in peers]
    run = fastest(prefixes[0][-1])

    def with_qsim() -> list[float]:
        out = []
        for circuits in prefixes:
            for circuit in circuits:
                state = run(circuit)
                np.square(np.abs(state))
                out.append(peer_tmi(state, n))
        return out

    def with_steps() -> list[float]:
        out = []
        for peer in peers:
            for moment, step in enumerate(simulator.simulate_moment_steps(peer)):
                if moment % 2 == 0 and moment:
                    state = step.state_vector(copy=False)
                    np.square(np.abs(state))
                    out.append(peer_tmi(state, n))
        return out

    found = ours()
    np.testing.assert_allclose(found[: sample * 16], with_qsim(), atol=1e-3)
    np.testing.assert_allclose(found[: sample * 16], with_steps(), atol=1e-3)
    mine, *theirs = medians(ROUNDS, ours, with_qsim, with_steps)
    if instances < 100:
        note(f"growth: {instances} instances, n={n}, depths 1..16, TMI", mine.wall)
        return
    best = min(range(2), key=lambda place: theirs[place].wall)
    record(
        f"{instances} instances, n={n}, depths 1..16: probabilities, TMI", mine, theirs[best].times(instances / sample),
        10.0, ("qsimcirq", "cirq.Simulator steps")[best],
    )  # fmt: skip


def prefix(circuit: Circuit, rows: np.ndarray) -> Circuit:
    return Circuit(
        circuit.n_qubits, *(part[rows] for part in (circuit.layer, circuit.kind, circuit.qubits, circuit.first)),
        circuit.parameters,
    )  # fmt: skip


def peer_z(state: np.ndarray) -> np.ndarray:
    """<Z> of every qubit in few passes of numpy."""
    p, out = np.square(state.real) + np.square(state.imag), []
    while len(p) > 1:
        zero, one = p.reshape(2, -1)
        out.append(float(zero.sum() - one.sum()))
        p = zero + one
    return np.array(out)


@pytest.mark.parametrize(("name", "make"), [("cz+quarter-turns", turns_brickwork), ("haar", haar_brickwork)])
def test_butterfly_echoes(name, make):
    """Both do every fifth site at every depth: the same share of the work."""
    n = 20
    pairs = [echo(make(n, depth), [(site, 0)]) for depth in range(1, 13) for site in range(2, n, 5)]
    run = fastest(pairs[-1][1])

    def ours() -> list[np.ndarray]:
        return [z_averages(circuit, range(n)) for circuit, _ in pairs]

    def theirs() -> list[np.ndarray]:
        return [peer_z(run(peer)) for _, peer in pairs]

    np.testing.assert_allclose(ours(), theirs(), atol=2e-3)
    mine, peer = medians(1, ours, theirs)
    record(f"butterfly echoes, {name} n={n}, all sites, depths 1..12", mine.times(5), peer.times(5), 5.0, "qsimcirq")


def test_frame_potentials():
    n, instances, depths, sample = 8, 200, range(1, 17), 2
    members, peers = [], []
    for instance in range(instances):
        deepest, peer = turns_brickwork(n, 16, seed=instance)
        cuts = np.flatnonzero(deepest.gate_rows)
        members.append([prefix(deepest, cuts[deepest.layer[cuts] <= 2 * depth]) for depth in depths])
        if instance < sample:
            peers.append([peer[: 2 * depth + 1] for depth in depths])
    qubits = cirq.LineQubit.range(n)

    def ours() -> list[float]:
        chois = np.empty((len(depths), instances, 4**n), dtype=np.complex64)
        for instance, circuits in enumerate(members):
            for place, choi in choi_states(circuits):
                chois[place, instance] = choi
        squares = [overlaps(part) * 4.0**n for part in chois]
        return [of_unitary_overlaps(part, 2**n, k).value for part in squares for k in range(1, 5)]

    def unitaries() -> np.ndarray:
        return np.array([[cirq.unitary(circuit) for circuit in circuits] for circuits in peers])

    rng = np.random.default_rng(0)
    flat = (rng.normal(size=(instances, 4**n)) + 1j).astype(np.complex64)

    def products() -> list[float]:
        squares = np.abs(flat.conj() @ flat.T) ** 2
        return [float((squares**k).sum()) for k in range(1, 5)]

    assert unitaries().shape[-1] == len(qubits) ** 0 * 2**n
    mine, making, multiplying = medians(1, ours, unitaries, products)
    peer = type(mine)(
        making.wall * instances / sample + multiplying.wall * len(depths),
        making.processor * instances / sample + multiplying.processor * len(depths),
    )
    record(f"frame potentials k=1..4, n={n}, {instances} instances, depths 1..16", mine, peer, 20.0, "cirq.unitary")


def test_threads_in_use():
    note("threads that this process may use", float(available_threads()))

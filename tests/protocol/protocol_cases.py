"""Small invented devices, campaigns and a dense simulator that the tests of protocols share."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import combinations
from pathlib import Path

import numpy as np

from rcbench.campaign import Campaign, Circuits, Experiment
from rcbench.circuits.circuit import Circuit
from rcbench.device import Device, NativeGate, Pair
from rcbench.protocol import PlannedCircuit, Protocol, expand, read_protocol

GATES = {
    "cz": NativeGate(name="cz"),
    "iswap": NativeGate(name="iswap"),
    "sqrt-iswap": NativeGate(name="sqrt-iswap"),
    "zz at any angle": NativeGate(name="zz"),
    "zz": NativeGate(name="zz", parameters=(0.7,), by_coupler={(1, 2): (0.9,)}),
    "fsim, phi = 0": NativeGate(name="fsim", parameters=(0.4, 0.0)),
    "fsim, theta = pi/2": NativeGate(name="fsim", parameters=(np.pi / 2, np.pi / 6)),
    "fsim, negative angles": NativeGate(name="fsim", parameters=(0.5, 0.3), negative=True),
}


def line(n: int) -> tuple[Pair, ...]:
    """Couplers of a line."""
    return tuple((q, q + 1) for q in range(n - 1))


def ladder(rungs: int) -> tuple[Pair, ...]:
    """Couplers of a ladder: qubits 0 to rungs - 1 above, the next as many below."""
    rails = [(a + row * rungs, b + row * rungs) for row in (0, 1) for a, b in line(rungs)]
    return tuple(sorted(rails + [(q, q + rungs) for q in range(rungs)]))


def complete(n: int) -> tuple[Pair, ...]:
    """Couplers between all qubits."""
    return tuple(combinations(range(n), 2))


def device(couplers: Sequence[Pair], gate: NativeGate = GATES["cz"], one_qubit: str = "r+rz") -> Device:
    """A device with these couplers."""
    n = max(max(pair) for pair in couplers) + 1
    physical = tuple(f"Q{qubit}" for qubit in range(n))
    return Device(
        name="invented",
        n_qubits=n,
        layout="edges",
        couplers=tuple(couplers),
        physical=physical,
        one_qubit=one_qubit,
        two_qubit=(gate,),
        invented=True,
    )


def campaign(on: Device, **facts: object) -> Campaign:
    """A campaign of one experiment on all qubits of a device."""
    settings: dict[str, object] = {
        "name": "e",
        "protocol": "given",
        "circuits": Circuits(two_qubit="cz", one_qubit="haar"),
        "depths": (0, 1, 4),
        "instances": 1,
        "qubits": tuple(range(on.n_qubits)),
    }
    experiment = Experiment(**(settings | facts))  # type: ignore[arg-type]
    return Campaign(title="t", seed=11, device=on, experiments=(experiment,))


def circuits(protocol: Protocol, of: Campaign) -> list[PlannedCircuit]:
    """All circuits of the campaign's one experiment."""
    return list(expand(protocol, of.experiments[0], of))


def protocol_of(text: str) -> Protocol:
    """A protocol from its text."""
    return read_protocol("mine", text, Path("mine.toml"))


def final_state(circuit: Circuit, errors: Mapping[int, np.ndarray] | None = None) -> np.ndarray:
    """(2**n,) the state after a circuit, one row after the other; errors: a matrix more after some rows."""
    n = circuit.n_qubits
    state = np.zeros((2,) * n, dtype=np.complex128)
    state[(0,) * n] = 1
    for row, (matrix, pair) in enumerate(zip(circuit.row_matrices(), circuit.qubits.tolist(), strict=True)):
        if matrix is None:
            continue
        qubits = [q for q in pair if q >= 0]
        k = len(qubits)
        for gate in (matrix, *([errors[row]] if errors and row in errors else [])):
            state = np.tensordot(gate.reshape((2,) * (2 * k)), state, (range(k, 2 * k), qubits))
            state = np.moveaxis(state, range(k), qubits)
    return state.reshape(-1)


def outcome_probabilities(circuit: Circuit) -> np.ndarray:
    """(2**bits,) probability of each outcome, classical bit 0 the most significant."""
    n, measured = circuit.n_qubits, circuit.measured_qubits
    p = np.abs(final_state(circuit).reshape((2,) * n)) ** 2
    p = p.sum(axis=tuple(q for q in range(n) if q not in measured))
    order = np.argsort(np.argsort(measured))
    return p.transpose(order).reshape(-1)


def unitary(circuit: Circuit) -> np.ndarray:
    """(2**n, 2**n) the unitary of a circuit of gates."""
    n = circuit.n_qubits
    state = np.eye(2**n, dtype=np.complex128).reshape((2,) * n + (2**n,))
    for matrix, pair in zip(circuit.row_matrices(), circuit.qubits.tolist(), strict=True):
        if matrix is None:
            continue
        qubits = [q for q in pair if q >= 0]
        k = len(qubits)
        state = np.tensordot(matrix.reshape((2,) * (2 * k)), state, (range(k, 2 * k), qubits))
        state = np.moveaxis(state, range(k), qubits)
    return state.reshape(2**n, 2**n)


def pauli(letter: str, qubit: int, n: int) -> np.ndarray:
    """(2**n, 2**n) a Pauli on one of n qubits."""
    matrices = {"X": [[0, 1], [1, 0]], "Y": [[0, -1j], [1j, 0]], "Z": [[1, 0], [0, -1]]}
    out = np.eye(1)
    for q in range(n):
        out = np.kron(out, np.array(matrices[letter]) if q == qubit else np.eye(2))
    return out

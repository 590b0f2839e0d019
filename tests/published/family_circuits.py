"""Circuits as the families draw and compile them, as dense unitaries, and OTOC and correlators of these."""

from __future__ import annotations

from functools import reduce

import numpy as np

from rcbench.campaign import Circuits, Experiment
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.families import draw_circuits
from rcbench.device import Device, NativeGate

PAULIS = {
    "I": np.eye(2),
    "X": np.array([[0, 1], [1, 0]]),
    "Y": np.array([[0, -1j], [1j, 0]]),
    "Z": np.diag([1.0, -1.0]),
}


def draw(
    family: str,
    n: int,
    depths,
    instance: int,
    *,
    gates: str = "",
    layout: str = "line",
    native: str = "sqrt-iswap",
    one_qubit: str = "",
    **model,
) -> dict[int, Circuit]:
    """Circuits of one instance by depth, on an invented line or ring."""
    couplers = {(q, q + 1) for q in range(n - 1)} | ({(0, n - 1)} if layout == "ring" else set())
    device = Device(
        name="invented",
        n_qubits=n,
        layout=layout,
        couplers=tuple(sorted(couplers)),
        two_qubit=(NativeGate(name=native),),
    )
    circuits = Circuits(family=family, two_qubit=gates, one_qubit=one_qubit, model=tuple(model.items()))
    experiment = Experiment(name="one", circuits=circuits, depths=tuple(depths), instances=1, qubits=tuple(range(n)))
    return draw_circuits(experiment, device, 11, instance)


def unitaries(circuits: dict[int, Circuit]) -> dict[int, np.ndarray]:
    """(2**n, 2**n) of each depth, from the rows of the deepest one; qubit 0 the most significant bit."""
    deepest = circuits[max(circuits)]
    n = deepest.n_qubits
    state = np.eye(2**n, dtype=np.complex128).reshape((2,) * n + (2**n,))
    stops = {len(circuit): depth for depth, circuit in circuits.items()}
    found = {stops[0]: state.reshape(2**n, 2**n)} if 0 in stops else {}
    for row, (matrix, pair) in enumerate(zip(deepest.row_matrices(), deepest.qubits.tolist(), strict=True)):
        if matrix is not None:
            qubits = [q for q in pair if q >= 0]
            k = len(qubits)
            state = np.tensordot(matrix.reshape((2,) * (2 * k)), state, (range(k, 2 * k), qubits))
            state = np.moveaxis(state, range(k), qubits)
        if row + 1 in stops:
            found[stops[row + 1]] = state.reshape(2**n, 2**n)
    return found


def at(letter: str, site: int, n: int) -> np.ndarray:
    return reduce(np.kron, [PAULIS[letter if each == site else "I"] for each in range(n)])


def forward(u: np.ndarray, one: np.ndarray) -> np.ndarray:
    """U V U^dag: meets the first layer first."""
    return u @ one @ u.conj().T


def correlator(one: np.ndarray, two: np.ndarray) -> float:
    """tr(A B) / D of Hermitian matrices."""
    return float(np.real(np.vdot(one, two)) / len(one))


def otoc(moved: np.ndarray, other: np.ndarray) -> float:
    """tr(W V W V) / D."""
    product = moved @ other
    return float(np.real(np.vdot(product.conj().T, product)) / len(moved))


def assert_means(samples, expected, sigmas: float = 4.0) -> None:
    """Means over the first axis within that many standard errors (and rounding, where nothing varies)."""
    samples = np.asarray(samples, dtype=np.float64)
    error = samples.std(axis=0, ddof=1) / np.sqrt(len(samples))
    deviation = np.abs(samples.mean(axis=0) - np.asarray(expected))
    assert (deviation < sigmas * error + 1e-10).all(), (samples.mean(axis=0), expected, error)

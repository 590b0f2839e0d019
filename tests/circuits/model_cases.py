"""Circuits of the families with gates of their own, and the operators that their tests share."""

from __future__ import annotations

from functools import reduce

import numpy as np
from circuit_cases import make_device, unitary

from rcbench.campaign import Circuits, Experiment
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.families import Task, draw_circuits, task
from rcbench.device import Device, NativeGate

HALF = np.pi / 2
NATIVES = {
    "cz": NativeGate(name="cz"),
    "iswap": NativeGate(name="iswap"),
    "sqrt-iswap": NativeGate(name="sqrt-iswap"),
    "zz": NativeGate(name="zz"),
    "zz-half": NativeGate(name="zz", parameters=(-HALF,)),
    "fsim-half": NativeGate(name="fsim", parameters=(HALF, 0.0)),
}
PAULIS = {
    "I": np.eye(2),
    "X": np.array([[0, 1], [1, 0]]),
    "Y": np.array([[0, -1j], [1j, 0]]),
    "Z": np.diag([1.0, -1.0]),
}


def line(n: int, native: str = "cz", layout: str = "line", **more) -> Device:
    return make_device(layout, n, gates=(NATIVES[native],), **more)


def experiment(two_qubit: str, device: Device, depths, *, family: str = "", one_qubit: str = "", **model) -> Experiment:
    circuits = Circuits(
        family=family or two_qubit, two_qubit=two_qubit, one_qubit=one_qubit, model=tuple(model.items())
    )
    return Experiment(name="one", circuits=circuits, depths=depths, instances=1, qubits=device.working_qubits)


def draw(two_qubit: str, device: Device, depth: int, *, seed: int = 3, instance: int = 0, **more) -> Circuit:
    return draw_circuits(experiment(two_qubit, device, (depth,), **more), device, seed, instance)[depth]


def made(two_qubit: str, device: Device, depth: int, *, seed: int = 3, instance: int = 0, **more) -> Task:
    """The task behind the circuit that `draw` gives."""
    return task(experiment(two_qubit, device, (depth,), **more), device, seed, instance)


def operator(letters: str) -> np.ndarray:
    """A Pauli string as a matrix, the first letter on qubit 0."""
    return reduce(np.kron, [PAULIS[letter] for letter in letters])


def at(letter: str, site: int, n: int) -> np.ndarray:
    return operator("I" * site + letter + "I" * (n - site - 1))


def evolved(circuit: Circuit, one: np.ndarray) -> np.ndarray:
    """U^dag W U."""
    u = unitary(circuit)
    return u.conj().T @ one @ u


def mean_trace(one: np.ndarray, two: np.ndarray) -> float:
    """tr(A B) / D of Hermitian matrices."""
    return float(np.real(np.vdot(one, two)) / len(one))


def otoc(moved: np.ndarray, other: np.ndarray) -> float:
    product = moved @ other
    return float(np.real(np.trace(product @ product)) / len(moved))

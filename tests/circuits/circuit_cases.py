"""Small devices and dense unitaries that the tests of circuits share."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import numpy as np

from rcbench.circuits.circuit import Circuit
from rcbench.device import Device, Limits, NativeGate, Pair

HEAVY_HEX = (  # one cell of 12 qubits with tails; largest degree 3, bipartite
    (0, 1), (1, 2), (2, 3), (3, 4), (4, 5), (5, 6), (6, 7), (7, 8), (8, 9), (9, 10), (10, 11), (0, 11),
    (2, 12), (8, 13), (5, 14),
)  # fmt: skip


def make_device(
    layout: str,
    n_qubits: int,
    *,
    edges: Sequence[Pair] = (),
    columns: int = 0,
    one_qubit: str = "u",
    gates: Sequence[NativeGate] = (NativeGate(name="cz"),),
    broken_qubits: tuple[int, ...] = (),
    broken_couplers: tuple[Pair, ...] = (),
    limits: Limits | None = None,
) -> Device:
    """An invented device with the couplers of its layout."""
    if layout == "line":
        edges = [(q, q + 1) for q in range(n_qubits - 1)]
    elif layout == "ring":
        edges = sorted({(min(q, (q + 1) % n_qubits), max(q, (q + 1) % n_qubits)) for q in range(n_qubits)})
    elif layout == "grid":
        across = [(q, q + 1) for q in range(n_qubits) if (q + 1) % columns]
        edges = across + [(q, q + columns) for q in range(n_qubits - columns)]
    elif layout == "all-to-all":
        edges = list(combinations(range(n_qubits), 2))
    working = [e for e in edges if not set(e) & set(broken_qubits) and e not in broken_couplers]
    return Device(
        name="invented",
        n_qubits=n_qubits,
        layout=layout,  # type: ignore[arg-type]
        couplers=tuple(sorted(working)),
        rows=n_qubits // columns if columns else 0,
        columns=columns,
        broken_qubits=broken_qubits,
        broken_couplers=broken_couplers,
        one_qubit=one_qubit,
        two_qubit=tuple(gates),
        limits=limits or Limits(),
    )


def unitary(circuit: Circuit) -> np.ndarray:
    """(2**n, 2**n) the unitary of a circuit, row by row; qubit 0 the most significant bit."""
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


def phase_distance(one: np.ndarray, two: np.ndarray) -> float:
    """Largest difference of entries, after the best global phase."""
    overlap = np.vdot(two, one)
    return float(np.abs(one - two * (overlap / abs(overlap))).max())

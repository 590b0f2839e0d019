"""A circuit is arrays: rows of (layer, gate kind, qubits, parameter index) and one array of parameters."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from rcbench.circuits.gates import CODE, KINDS, N_PARAMETERS, N_QUBITS, UNITARY, VIRTUAL


@dataclass(frozen=True, slots=True, eq=False)
class Circuit:
    """One circuit on qubits 0 to n_qubits - 1, all starting in |0>.

    Rows of one layer act on different qubits and run at the same time; a later layer runs later. Barriers and
    measurements are rows too.

    Args:
        n_qubits: size of the register.
        layer: (rows,) native layer of each row, never decreasing.
        kind: (rows,) index into `gates.KINDS`.
        qubits: (rows, 2) qubits of each row; -1 where there is none. A measurement holds its qubit and its
            classical bit.
        first: (rows,) index of the row's first parameter in `parameters`, -1 where it has none.
        parameters: (m,) angles in radians (matrix entries for imported gates).
    """

    n_qubits: int
    layer: IntArray
    kind: IntArray
    qubits: IntArray
    first: IntArray
    parameters: FloatArray

    def __len__(self) -> int:
        return len(self.kind)

    @property
    def n_layers(self) -> int:
        """Native layers that take time: those that hold a gate which is not virtual."""
        return len(np.unique(self.layer[self.gate_rows & ~VIRTUAL[self.kind]]))

    @property
    def gate_rows(self) -> BoolArray:
        """(rows,) true where the row is a unitary gate."""
        return UNITARY[self.kind]

    @property
    def two_qubit_gates(self) -> int:
        """Number of native two-qubit gates."""
        return int(np.count_nonzero(N_QUBITS[self.kind] == 2))

    @property
    def measured_qubits(self) -> tuple[int, ...]:
        """The qubit behind each classical bit, bit 0 first."""
        rows = self.qubits[self.kind == CODE["measure"]]
        return tuple(int(qubit) for qubit in rows[np.argsort(rows[:, 1], kind="stable"), 0])

    def row_parameters(self, row: int) -> tuple[float, ...]:
        """The parameters of one row."""
        start = int(self.first[row])
        count = int(N_PARAMETERS[self.kind[row]])
        return tuple(float(value) for value in self.parameters[start : start + count]) if count else ()

    def row_matrices(self) -> list[ComplexArray | None]:
        """The (2, 2) or (4, 4) complex128 matrix of each row; None for barriers, resets and measurements."""
        out: list[ComplexArray | None] = [None] * len(self)
        for code in np.unique(self.kind):
            gate = KINDS[code]
            if gate.matrices is None:
                continue
            rows = np.flatnonzero(self.kind == code)
            columns = self.first[rows][:, None] + np.arange(gate.n_parameters)
            for row, matrix in zip(rows, gate.matrices(self.parameters[columns]), strict=True):
                out[row] = matrix
        return out


class CircuitBuilder:
    """Collects rows layer by layer and freezes them into a Circuit."""

    def __init__(self, n_qubits: int) -> None:
        self.n_qubits = n_qubits
        self._layer = 0
        self._rows: list[tuple[int, int, int, int, int]] = []
        self._parameters: list[float] = []

    def add(self, name: str, qubits: Sequence[int], parameters: Iterable[float] = ()) -> None:
        """One row in the current layer."""
        values = [float(value) for value in parameters]
        first = len(self._parameters) if values else -1
        self._parameters += values
        second = int(qubits[1]) if len(qubits) > 1 else -1
        self._rows.append((self._layer, CODE[name], int(qubits[0]), second, first))

    def add_rows(self, name: str, qubits: IntArray, parameters: FloatArray | None = None) -> None:
        """Many rows of one kind in the current layer; qubits: (m,) or (m, 2); parameters: (m, k)."""
        pairs = np.asarray(qubits)
        count, start = len(pairs), len(self._parameters)
        one, two = pairs.T.tolist() if pairs.ndim == 2 else (pairs.tolist(), [-1] * count)
        first: Iterable[int] = [-1] * count
        if parameters is not None and parameters.size:
            self._parameters += parameters.ravel().tolist()
            first = range(start, len(self._parameters), parameters.shape[1])
        self._rows += zip([self._layer] * count, [CODE[name]] * count, one, two, first, strict=True)

    def next_layer(self) -> None:
        """Later rows run after those so far; an empty layer is not counted."""
        if self._rows and self._rows[-1][0] == self._layer:
            self._layer += 1

    def barrier(self) -> None:
        """A barrier over all qubits, in a layer of its own."""
        self.next_layer()
        self._rows.append((self._layer, CODE["barrier"], -1, -1, -1))
        self._layer += 1

    def measure(self, qubits: Iterable[int]) -> None:
        """Measure the qubits, in a layer of their own, into classical bits 0, 1, 2, ... in that order."""
        self.next_layer()
        for bit, qubit in enumerate(qubits):
            self._rows.append((self._layer, CODE["measure"], int(qubit), bit, -1))
        self.next_layer()

    def append(self, circuit: Circuit, qubits: Sequence[int] | None = None) -> None:
        """All rows of another circuit, after what is there; its qubit j is our qubits[j]."""
        self.next_layer()
        label = np.arange(circuit.n_qubits) if qubits is None else np.asarray(qubits)
        base, start = len(self._parameters), self._layer
        self._parameters += circuit.parameters.tolist()
        for layer, kind, pair, first in zip(
            circuit.layer.tolist(), circuit.kind.tolist(), circuit.qubits.tolist(), circuit.first.tolist(), strict=True
        ):
            one = int(label[pair[0]]) if pair[0] >= 0 else -1
            two = pair[1] if pair[1] < 0 or kind == CODE["measure"] else int(label[pair[1]])
            self._rows.append((start + layer, kind, one, two, first + base if first >= 0 else -1))
        if len(circuit):
            self._layer = start + int(circuit.layer[-1]) + 1

    def build(self) -> Circuit:
        """The circuit, its arrays read-only."""
        rows = np.array(self._rows, dtype=np.int32).reshape(-1, 5)
        arrays = (
            np.ascontiguousarray(rows[:, 0]),
            np.ascontiguousarray(rows[:, 1]),
            np.ascontiguousarray(rows[:, 2:4]),
            np.ascontiguousarray(rows[:, 4]),
            np.array(self._parameters, dtype=np.float64),
        )
        for array in arrays:
            array.flags.writeable = False
        return Circuit(self.n_qubits, *arrays)

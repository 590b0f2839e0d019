"""Rows of a circuit from the calls of a program, and the finished circuit."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from rcbench.circuits import qasm_matrices
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import CODE
from rcbench.circuits.qasm_expressions import ExpressionError
from rcbench.circuits.qasm_gates import EXPAND, RECOGNISE, Gate
from rcbench.circuits.qasm_layers import PARTIAL, layers_of, time_keys
from rcbench.errors import InputError

MAX_ROWS = 2_000_000
MAX_WORK = 20_000_000  # elementary gates times parameter sets, over all gates whose matrices must be worked out


@dataclass(slots=True)
class _Group:
    """Calls of one gate whose matrices are worked out together.

    known: place of each parameter set; statements: where it was first asked for; rows: row and parameter set.
    """

    gate: Gate
    known: dict[tuple[float, ...], int] = field(default_factory=dict)
    statements: list[int] = field(default_factory=list)
    rows: list[tuple[int, int]] = field(default_factory=list)


class Rows:
    """Collects rows. rows: (code, qubit, second qubit) of each; first: place of its parameters, -1 for none."""

    def __init__(self) -> None:
        self.rows: list[tuple[int, int, int]] = []
        self.first: list[int] = []
        self.parameters: list[float] = []
        self.measured: dict[int, int] = {}  # bit of each qubit
        self.statement = 0  # being read
        self.work = 0
        self._partial: dict[int, Sequence[int]] = {}
        self._groups: dict[str, _Group] = {}
        self._before_measurement = 0  # rows so far at the first measurement
        self._used: set[int] = set()
        self._looked_at = 0

    def spend(self, work: int) -> None:
        """Count what a program asks for, so that a short text cannot ask for too much."""
        self.work += work
        if self.work > MAX_ROWS:
            raise InputError(
                "program", f"more than {MAX_ROWS} gates", f"at most {MAX_ROWS} gates on single qubits or pairs"
            )

    def add(self, code: int, qubits: Sequence[int], values: Sequence[float] = ()) -> None:
        """One row."""
        self.rows.append((code, qubits[0], qubits[1] if len(qubits) > 1 else -1))
        self.first.append(len(self.parameters) if values else -1)
        self.parameters += values

    def call(self, gate: Gate, values: Sequence[float], qubits: Sequence[int]) -> None:
        """The rows of one call.

        Raises:
            InputError: a qubit that was measured before, or more rows than MAX_ROWS.
        """
        self.spend(1)
        if self.measured:
            for qubit in qubits:
                if qubit in self.measured:
                    raise InputError(gate.name, f"a gate after the measurement of qubit {qubit}", "measurements last")
        plan = gate.plan
        if plan.code >= 0:
            self.add(plan.code, qubits, plan.angles(values) if plan.angles else values)
        elif plan.code == RECOGNISE:
            self.recognise(gate, values, qubits)
        elif plan.code == EXPAND:
            known = dict(zip(plan.names, values, strict=True))
            for call in plan.body:
                self.call(
                    call.gate,
                    [expression.value(known) for expression in call.parameters],
                    [qubits[place] for place in call.places],
                )

    def recognise(self, gate: Gate, values: Sequence[float], qubits: Sequence[int]) -> None:
        """One row whose kind and angles are worked out at the end, with those of all calls of the same gate."""
        group = self._groups.get(gate.name)
        if group is None:
            group = self._groups[gate.name] = _Group(gate)
        place = group.known.setdefault(tuple(values), len(group.known))
        if place == len(group.statements):
            group.statements.append(self.statement)
        group.rows.append((len(self.rows), place))
        self.add(RECOGNISE, qubits)

    def barrier(self, qubits: Sequence[int] | None) -> None:
        """A barrier on some qubits, or on all."""
        self.spend(len(qubits) if qubits is not None else 1)
        if qubits is not None:
            self._partial[len(self.rows)] = qubits
        self.add(CODE["barrier"] if qubits is None else PARTIAL, (-1,))

    def measure(self, qubit: int, bit: int) -> None:
        """A final measurement.

        Raises:
            InputError: a qubit measured before.
        """
        if qubit in self.measured:
            raise InputError("measure", f"qubit {qubit} twice", "one measurement of each qubit, at the end")
        if not self.measured:
            self._before_measurement = len(self.rows)
        self.measured[qubit] = bit

    def reset(self, qubit: int) -> None:
        """A reset of a qubit that nothing has acted on.

        Raises:
            InputError: a reset after a gate or a measurement.
        """
        self.spend(1)
        for row in self.rows[self._looked_at :]:
            self._used.update(row[1:])
        self._looked_at = len(self.rows)
        if qubit in self._used or qubit in self.measured:
            raise InputError("reset", f"qubit {qubit} after a gate or measurement", "resets before the first gate only")
        self.add(CODE["reset"], (qubit,))
        self._looked_at = len(self.rows)  # a second reset of a fresh qubit is no fault

    def circuit(self, n_qubits: int, where: Callable[[int], str]) -> Circuit:
        """The finished circuit; where: file and line of a statement, for errors in gates worked out last."""
        self._work_out(where)
        while (
            len(self.rows) > self._before_measurement
            and self.measured
            and self.rows[-1][0] in (CODE["barrier"], PARTIAL)
        ):
            del self.rows[-1], self.first[-1]  # nothing follows it but measurements
        order, layer = layers_of(time_keys(n_qubits, self.rows, self._partial))
        table = np.fromiter(itertools.chain.from_iterable(self.rows), np.int32, 3 * len(self.rows)).reshape(-1, 3)
        table = np.column_stack((table, np.array(self.first, dtype=np.int32)))[order]
        seen = table[:, 0] != PARTIAL
        table, layer = table[seen], layer[seen]
        layer = np.cumsum(np.diff(layer, prepend=layer[:1]) != 0)
        bits = sorted(self.measured, key=self.measured.__getitem__)
        last = [(CODE["measure"], qubit, bit, -1) for bit, qubit in enumerate(bits)]
        after = int(layer[-1]) + 1 if len(layer) else 0
        table = np.concatenate((table, np.array(last, dtype=np.int32).reshape(-1, 4)))
        arrays = (
            np.concatenate((layer, np.full(len(last), after))).astype(np.int32),
            np.ascontiguousarray(table[:, 0]),
            np.ascontiguousarray(table[:, 1:3]),
            np.ascontiguousarray(table[:, 3]),
            np.array(self.parameters, dtype=np.float64),
        )
        for array in arrays:
            array.flags.writeable = False
        return Circuit(n_qubits, *arrays)

    def _work_out(self, where: Callable[[int], str]) -> None:
        """Find kind and angles of the calls whose matrices must be worked out."""
        work = 0
        for group in self._groups.values():
            work += group.gate.cost * (len(group.known) + 20)
            if work > MAX_WORK:
                found = f"{group.gate.cost} gates behind each call"
                raise InputError(f"gate {group.gate.name}", found, "simpler definitions", where(group.statements[0]))
            try:
                matrices = group.gate.matrices(np.array(list(group.known)).reshape(len(group.known), -1))
            except ExpressionError as error:
                problem = InputError(f"gate {group.gate.name}", error.found, error.allowed)
                raise problem.at(where(group.statements[error.row])) from None
            codes, parameters = qasm_matrices.recognise(matrices)
            values = [
                qasm_matrices.row_parameters(code, row) for code, row in zip(codes.tolist(), parameters, strict=True)
            ]
            for row, place in group.rows:
                self.rows[row] = (int(codes[place]), *self.rows[row][1:])
                if values[place]:
                    self.first[row] = len(self.parameters)
                    self.parameters += values[place]

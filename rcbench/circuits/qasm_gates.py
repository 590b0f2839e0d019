"""Gates of an OpenQASM program: standard ones, defined ones and modified ones, all with the same face.

A gate turns parameters into matrices, many at once. How a call becomes rows of a circuit is worked out once for each
gate (`Plan`): a kind whose angles are the call's own parameters, a kind to be recognised from the matrix of each call,
or, from three qubits on, the calls of its body.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.circuits import qasm_matrices
from rcbench.circuits.gates import CODE, KINDS
from rcbench.circuits.qasm_expressions import Expression, ExpressionError

MAX_NESTING = 100
MAX_COST = 100_000
Angles = Callable[[Sequence[float]], Sequence[float]]


class Gate(Protocol):
    """What a call may name.

    cost: elementary gates behind one call; nesting: definitions inside one another.
    """

    name: str
    n_qubits: int
    n_parameters: int
    cost: int
    nesting: int

    def matrices(self, parameters: FloatArray) -> ComplexArray:
        """(m, n_parameters) to (m, d, d) unitaries with their global phase; one or two qubits only."""
        ...

    @property
    def plan(self) -> Plan:
        """How a call becomes rows."""
        ...


@dataclass(frozen=True, slots=True)
class Plan:
    """How a call becomes rows.

    code: index into `gates.KINDS`; -1: recognise the matrix of each call; -2: the calls of `body`; -3: no row.
    angles: the row's parameters from those of the call; None where they are the same.
    names: the parameters of the body.
    """

    code: int
    angles: Angles | None = None
    body: tuple[Call, ...] = ()
    names: tuple[str, ...] = ()


RECOGNISE, EXPAND, NOTHING = -1, -2, -3


@dataclass(frozen=True, slots=True)
class Call:
    """One gate in the body of another. places: qubits of the body; offset: place in the text of the body."""

    gate: Gate
    parameters: tuple[Expression, ...]
    places: tuple[int, ...]
    offset: int


class StandardGate:
    """A gate that is one of our kinds: its angles from the call's parameters, and its global phase beside it."""

    cost, nesting = 1, 0

    def __init__(
        self,
        name: str,
        n_parameters: int,
        kind: str,
        angles: Angles | None = None,
        phase: Callable[[Sequence[float]], float] | None = None,
    ) -> None:
        self.name, self.n_parameters, self.kind = name, n_parameters, kind
        self.n_qubits = KINDS[CODE[kind]].n_qubits
        self.plan = Plan(CODE[kind], angles)
        self._phase = phase

    def matrices(self, parameters: FloatArray) -> ComplexArray:
        """See `Gate`."""
        columns = list(parameters.T)
        angles = self.plan.angles(columns) if self.plan.angles else columns
        out = qasm_matrices.kind_matrices(self.kind, _table(angles, len(parameters)))
        return (
            out * np.exp(1j * np.broadcast_to(self._phase(columns), len(parameters)))[:, None, None]
            if self._phase
            else out
        )


class GlobalPhase:
    """gphase of OpenQASM 3: a gate on no qubit, which matters under a control only."""

    name, n_qubits, n_parameters, cost, nesting = "gphase", 0, 1, 1, 0
    plan = Plan(NOTHING)

    def matrices(self, parameters: FloatArray) -> ComplexArray:
        """See `Gate`."""
        out: ComplexArray = np.exp(1j * parameters).reshape(-1, 1, 1)
        return out


class DefinedGate:
    """A gate given by the calls of its body."""

    def __init__(self, name: str, parameters: tuple[str, ...], n_qubits: int, body: tuple[Call, ...]) -> None:
        self.name, self.n_qubits, self.body = name, n_qubits, body
        self.parameters, self.n_parameters = parameters, len(parameters)
        self.cost = 1 + sum(call.gate.cost for call in body)
        self.nesting = 1 + max((call.gate.nesting for call in body), default=0)

    def matrices(self, parameters: FloatArray) -> ComplexArray:
        """See `Gate`; raises ExpressionError where a parameter of the body has no finite value."""
        known = dict(zip(self.parameters, parameters.T, strict=True))
        state: ComplexArray = np.eye(2**self.n_qubits, dtype=np.complex128)[None]
        for call in self.body:
            values = [expression.values(known) for expression in call.parameters]
            # a call that depends on no parameter is worked out once for all
            m = max((len(value) for value in values), default=1)
            state = qasm_matrices.apply_on(call.gate.matrices(_table(values, m)), call.places, state)
        return np.broadcast_to(state, (len(parameters), *state.shape[1:]))

    @cached_property
    def plan(self) -> Plan:
        """See `Gate`."""
        return Plan(EXPAND, body=self.body, names=self.parameters) if self.n_qubits > 2 else find_plan(self)


class ModifiedGate:
    """A gate under ctrl, negctrl, inv or pow; exponents of pow come after the parameters of the gate itself."""

    def __init__(self, base: Gate, modifiers: tuple[str, ...]) -> None:
        self.base, self.modifiers = base, modifiers
        self.name = " @ ".join((*modifiers, base.name))
        self.n_qubits = base.n_qubits + sum(one in ("ctrl", "negctrl") for one in modifiers)
        self.n_parameters = base.n_parameters + modifiers.count("pow")
        self.cost = base.cost + 10 * len(modifiers)
        self.nesting = base.nesting + 1

    def matrices(self, parameters: FloatArray) -> ComplexArray:
        """See `Gate`."""
        out = self.base.matrices(parameters[:, : self.base.n_parameters])
        exponents = list(parameters[:, self.base.n_parameters :].T)
        for modifier in reversed(self.modifiers):  # the one next to the gate acts first
            if modifier == "inv":
                out = out.conj().swapaxes(1, 2)
            elif modifier == "pow":
                out = qasm_matrices.power(out, exponents.pop())
            else:
                out = qasm_matrices.controlled(out, modifier == "ctrl")
        return out

    @cached_property
    def plan(self) -> Plan:
        """See `Gate`."""
        return Plan(NOTHING) if self.n_qubits == 0 else find_plan(self)


def _table(columns: Sequence[FloatArray | float], m: int) -> FloatArray:
    """(m, k) from k columns of m or one."""
    return np.array([np.broadcast_to(column, m) for column in columns], dtype=np.float64).reshape(len(columns), m).T


# angles of a kind that a call's own parameters may be, by number of parameters; most telling first
_GUESSES: dict[tuple[int, int], tuple[tuple[str, Angles], ...]] = {
    (1, 1): (
        ("rz", lambda p: (p[0],)),
        ("rz", lambda p: (-p[0],)),
        ("r", lambda p: (p[0], 0.0)),
        ("r", lambda p: (p[0], np.pi / 2)),
        ("r", lambda p: (np.pi, p[0])),
        ("r", lambda p: (np.pi / 2, p[0])),
    ),
    (1, 2): (
        ("r", lambda p: (p[0], p[1])),
        ("r", lambda p: (p[1], p[0])),
        ("u", lambda p: (np.pi / 2, p[0], p[1])),
    ),
    (1, 3): (("u", lambda p: (p[0], p[1], p[2])),),
    (2, 1): (
        ("zz", lambda p: (p[0],)),
        ("fsim", lambda p: (p[0], 0.0)),
        ("fsim", lambda p: (0.0, p[0])),
        ("fsim", lambda p: (0.0, -p[0])),
    ),
    (2, 2): (("fsim", lambda p: (p[0], p[1])), ("fsim", lambda p: (p[1], p[0]))),
}
# generic angles, some outside one turn: what fits at all of these fits everywhere
_PROBES = np.array([[0.7391, -2.1173, 1.3907], [4.4126, 0.5832, -0.9178], [-1.2057, 8.0319, 2.7744]])


def find_plan(gate: Gate) -> Plan:
    """The plan of a gate on one or two qubits, from its matrices."""
    try:
        if not gate.n_parameters:
            return _fixed_plan(gate.matrices(np.zeros((1, 0))))
        probes = _PROBES[:, : gate.n_parameters]
        guesses = _GUESSES.get((gate.n_qubits, gate.n_parameters), ())
        matrices = gate.matrices(probes) if guesses else None
    except ExpressionError:  # no value at an angle tried here; the calls may hold better ones
        return Plan(RECOGNISE)
    for kind, angles in guesses:
        table = np.array([angles(row) for row in probes.tolist()])
        if (
            matrices is not None
            and qasm_matrices.same_up_to_phase(matrices, qasm_matrices.kind_matrices(kind, table)).all()
        ):
            same = KINDS[CODE[kind]].n_parameters == gate.n_parameters and np.array_equal(table, probes)
            return Plan(CODE[kind], None if same else angles)
    return Plan(RECOGNISE)


def _fixed_plan(matrices: ComplexArray) -> Plan:
    name = qasm_matrices.fixed_kind(matrices[0])
    if name:
        return Plan(CODE[name])
    codes, parameters = qasm_matrices.recognise(matrices)
    values = qasm_matrices.row_parameters(int(codes[0]), parameters[0])
    return Plan(int(codes[0]), lambda _: values)

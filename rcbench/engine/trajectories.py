"""Sampled error patterns of one circuit, and the programs with those errors in.

The pattern without an error is left out: its weight and its state are known exactly. All other patterns are drawn
given that at least one error strikes. An error changes the matrix of the operator it falls into, so a trajectory costs
no more than the circuit itself, and it starts from the error-free state before its first error.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import CODE
from rcbench.engine.blocks import Plan, plan
from rcbench.engine.compiled import kernel, part
from rcbench.engine.noise import SOURCES, ErrorPlaces, NoiseModel, error_places
from rcbench.engine.operators import encode
from rcbench.engine.program import GateRows, Program, apply_row, fuse, gate_rows
from rcbench.engine.turns import split_turns
from rcbench.errors import InputError
from rcbench.randomness import Draw

BLOCK_QUBITS = 16  # up to here a state is one block, and each thread runs trajectories of its own


@dataclass(frozen=True, slots=True, eq=False)
class NoisyProgram:
    """A circuit's program with its error places.

    Args:
        rows, program: the gates and the operators that hold them, in the order of the sweeps.
        sweeps: the program as the kernels run it.
        places: sorted by the operator they fall into.
        op: (m,) that operator.
        hazard: (m + 1,) minus the log of the probability that no error strikes before each place.
    """

    rows: GateRows
    program: Program
    sweeps: Plan
    places: ErrorPlaces
    op: IntArray
    hazard: FloatArray

    @property
    def error_free(self) -> float:
        """Probability that no error strikes."""
        return float(np.exp(-self.hazard[-1]))

    @property
    def error_free_scores(self) -> FloatArray:
        """(sources,) derivative of ln(error_free) with respect to ln(rate) of each of SOURCES."""
        weights = self.places.slope / (1 - self.places.probability)
        return np.bincount(self.places.source, -weights, minlength=len(SOURCES)).astype(np.float64)


def noisy_program(circuit: Circuit, noise: NoiseModel, dtype: str = "complex64") -> NoisyProgram:
    """The program of a circuit with its error places under a noise model."""
    if noise.n_qubits != circuit.n_qubits:
        raise InputError("noise", f"{noise.n_qubits} qubits", f"the circuit's {circuit.n_qubits} qubits")
    rows = split_turns(_touch_all(gate_rows(circuit)))
    program = fuse(rows)
    sweeps = plan(
        encode(program, np.dtype(dtype)), program.start, rows.n_qubits if rows.n_qubits <= BLOCK_QUBITS else None
    )
    program = program.reordered(sweeps.order)
    places = error_places(rows, noise)
    first_op = _first_ops(rows, program)
    op = np.where(places.row >= 0, program.op_of_row[places.row], first_op[places.qubits[:, 0]])
    order = np.lexsort((places.row, op))
    places = places.take(order)
    hazard = np.concatenate([[0.0], np.cumsum(-np.log1p(-places.probability))])
    return NoisyProgram(rows, program, sweeps, places, op[order], hazard)


def _touch_all(rows: GateRows) -> GateRows:
    """Add an identity on every qubit without a gate, so that an idle error on it has an operator to fall into."""
    missing = np.setdiff1d(np.arange(rows.n_qubits), rows.qubits)
    count = len(missing)
    identity = np.zeros((count, 4, 4), dtype=np.complex128)
    identity[:, 0, 0] = identity[:, 1, 1] = 1
    pairs = np.column_stack([missing, np.full(count, -1)]).astype(np.int32)
    return GateRows(
        rows.n_qubits,
        np.concatenate([np.full(count, -1), rows.layer]),
        np.concatenate([np.full(count, CODE["z"]), rows.kind]),  # virtual: takes no time and makes no error
        np.concatenate([pairs, rows.qubits]),
        np.concatenate([identity, rows.matrices]),
        np.concatenate([np.zeros(count, dtype=bool), rows.held]),
        np.array([0, count + len(rows)]),
    )


def _first_ops(rows: GateRows, program: Program) -> IntArray:
    """(n,) the operator that holds the first gate of each qubit."""
    first = np.full(rows.n_qubits, len(rows), dtype=np.int64)
    for column in range(2):
        present = np.flatnonzero(rows.qubits[:, column] >= 0)
        np.minimum.at(first, rows.qubits[present, column], present)
    return program.op_of_row[first]


@dataclass(frozen=True, slots=True, eq=False)
class Patterns:
    """Error patterns of independent, equally long batches of trajectories, each with one error at least.

    Args:
        batches: number of batches; trajectory t belongs to batch t // (count // batches).
        start: (count + 1,) where the errors of each trajectory begin in `place`.
        place: (errors,) index into the error places, rising within a trajectory.
        pauli: (errors,) 1, 2, 3 for X, Y, Z, or 4 a + b for two qubits.
        scores: (count, sources) derivative of ln(probability of the pattern) with respect to ln(rate) of each source.
    """

    batches: int
    start: IntArray
    place: IntArray
    pauli: IntArray
    scores: FloatArray

    def __len__(self) -> int:
        return len(self.start) - 1


def draw_patterns(noisy: NoisyProgram, trajectories: int, batches: int, draw: Draw) -> Patterns:
    """Draw patterns given at least one error; the count is rounded up to whole batches.

    Within a batch the first errors are spread evenly over their distribution (systematic sampling), which makes each
    batch less noisy and leaves it unbiased.
    """
    generator = draw.generator()
    each = -(-trajectories // batches)
    count = each * batches
    strata = (np.arange(each) + generator.random((batches, 1))) / each
    reached = -np.log1p(np.expm1(-noisy.hazard[-1]) * strata.reshape(-1))
    alive = np.arange(count)
    places: list[IntArray] = []
    owners: list[IntArray] = []
    last = len(noisy.places)
    while len(alive):
        place = np.searchsorted(noisy.hazard, reached, side="right") - 1
        if not places:
            place = np.minimum(place, last - 1)  # rounding must not lose the error that is sure to strike
        alive, place = alive[place < last], place[place < last]
        places.append(place)
        owners.append(alive)
        # errors are rare events along the hazard: the next one is an exponential step after the end of this place
        reached = noisy.hazard[place + 1] + generator.exponential(size=len(place))
    place, owner = np.concatenate(places), np.concatenate(owners)
    order = np.lexsort((place, owner))
    place, owner = place[order], owner[order]
    pauli = _draw_paulis(noisy.places.take(place), generator)
    start = np.searchsorted(owner, np.arange(count + 1))
    return Patterns(batches, start, place, pauli, _scores(noisy, owner, place, pauli, count))


def _draw_paulis(places: ErrorPlaces, generator: np.random.Generator) -> IntArray:
    two = 1 + generator.integers(15, size=len(places))
    is_z = generator.random(len(places)) < places.share_z
    one = np.where(is_z, 3, 1 + generator.integers(2, size=len(places)))
    return np.where(places.qubits[:, 1] >= 0, two, one)


def _scores(noisy: NoisyProgram, owner: IntArray, place: IntArray, pauli: IntArray, count: int) -> FloatArray:
    here = noisy.places.take(place)
    z_alone = (here.qubits[:, 1] < 0) & (pauli == 3)
    gain = np.where(z_alone, here.score_z, here.score_xy) + here.slope / (1 - here.probability)
    scores = np.tile(noisy.error_free_scores, (count, 1))
    np.add.at(scores, (owner, here.source), gain)
    return scores


@dataclass(frozen=True, slots=True, eq=False)
class Changes:
    """Operators that errors change.

    Args:
        start: (count + 1,) where the changes of each trajectory begin.
        op: (changes,) operator, rising within a trajectory. matrices: (changes, 4, 4) what it becomes.
    """

    start: IntArray
    op: IntArray
    matrices: ComplexArray


def changed_operators(noisy: NoisyProgram, patterns: Patterns) -> Changes:
    """The operators of each trajectory with its errors in."""
    order = np.argsort(noisy.program.op_of_row, kind="stable")
    first_row = np.searchsorted(noisy.program.op_of_row[order], np.arange(len(noisy.program) + 1))
    op = noisy.op[patterns.place]
    owner = np.repeat(np.arange(len(patterns)), np.diff(patterns.start))
    new = np.ones(len(op), dtype=bool)
    new[1:] = (op[1:] != op[:-1]) | (owner[1:] != owner[:-1])
    begins = np.append(np.flatnonzero(new), len(op))
    matrices = np.zeros((len(begins) - 1, 4, 4), dtype=np.complex128)
    _rebuild(
        matrices,
        begins, op, noisy.places.row[patterns.place], noisy.places.qubits[patterns.place], patterns.pauli,
        first_row, order, noisy.rows.qubits, noisy.rows.matrices, noisy.program.qubits,
    )  # fmt: skip
    start = np.searchsorted(owner[begins[:-1]], np.arange(len(patterns) + 1))
    return Changes(start, op[begins[:-1]], matrices)


_PAULIS = np.zeros((4, 4, 4), dtype=np.complex128)
_PAULIS[:, :2, :2] = np.array([[[1, 0], [0, 1]], [[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])


@part
def _strike(matrix, first, second, qubits, pauli):  # type: ignore[no-untyped-def]
    if qubits[1] < 0:
        apply_row(matrix, first, second, _PAULIS[pauli], qubits[0], -1)
        return
    apply_row(matrix, first, second, _PAULIS[pauli // 4], qubits[0], -1)
    apply_row(matrix, first, second, _PAULIS[pauli % 4], qubits[1], -1)


@kernel
def _rebuild(out, begins, op, after, where, pauli, first_row, order, qubits, gates, op_qubits):  # type: ignore[no-untyped-def]
    for change in range(len(begins) - 1):
        error, stop = begins[change], begins[change + 1]
        place = op[error]
        first, second = op_qubits[place, 0], op_qubits[place, 1]
        matrix = out[change]
        for i in range(2 if second < 0 else 4):
            matrix[i, i] = 1
        while error < stop and after[error] < 0:
            _strike(matrix, first, second, where[error], pauli[error])
            error += 1
        for index in range(first_row[place], first_row[place + 1]):
            row = order[index]
            apply_row(matrix, first, second, gates[row], qubits[row, 0], qubits[row, 1])
            while error < stop and after[error] == row:
                _strike(matrix, first, second, where[error], pauli[error])
                error += 1

"""The operators of a program as the kernels take them: the cheapest exact kind, positions, real numbers."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from rcbench.engine.compiled import kernel, part
from rcbench.engine.kernels import DENSE, DIAGONAL, MIDDLE, ONE, QUARTER
from rcbench.engine.program import Program

NOTHING = 1e-14  # entries below are rounding of zeros; all entries of a unitary are of order 1
# relative cost of an operator by kind: arithmetic, or memory traffic inside the cache where that is more
COSTS = np.array([4.0, 8.0, 3.0, 4.0, 4.0])


@dataclass(frozen=True, slots=True, eq=False)
class Operators:
    """A program for the kernels.

    Args:
        n_qubits: size of the register.
        kind: (m,) kernel of each operator. high, low: (m,) bits of the state index; equal for one qubit.
        numbers: (m, 32) real and imaginary parts, in the state's precision.
    """

    n_qubits: int
    kind: IntArray
    high: IntArray
    low: IntArray
    numbers: FloatArray

    def __len__(self) -> int:
        return len(self.kind)


def encode(program: Program, dtype: np.dtype[np.complexfloating]) -> Operators:
    """The operators of a program for states of a type."""
    kind, numbers = np.empty(len(program), dtype=np.int64), np.zeros((len(program), 32))
    _encode(program.qubits, program.matrices, kind, numbers)
    high = program.n_qubits - 1 - program.qubits[:, 0]
    low = np.where(program.qubits[:, 1] < 0, high, program.n_qubits - 1 - program.qubits[:, 1])
    return Operators(
        program.n_qubits, kind, high.astype(np.int64), low.astype(np.int64), numbers.astype(real_of(dtype))
    )


def real_of(dtype: np.dtype[np.complexfloating]) -> np.dtype[np.floating]:
    """The type of a state's real parts."""
    return np.dtype(np.float32 if dtype == np.complex64 else np.float64)


@part
def _write_numbers(matrix, size, out):  # type: ignore[no-untyped-def]
    """The leading corner of a matrix as real and imaginary parts, row by row."""
    for i in range(size):
        for j in range(size):
            out[2 * (size * i + j)] = matrix[i, j].real
            out[2 * (size * i + j) + 1] = matrix[i, j].imag


@part
def _is_quarter(matrix):  # type: ignore[no-untyped-def]
    """Rows of one phase each, with the signs of [[1, -1], [1, 1]] on both qubits."""
    for i in range(4):
        for j in range(1, 4):
            sign = 1.0  # of the product of the two entries (i, j)
            if j & 1 and not i & 1:
                sign = -sign
            if j & 2 and not i & 2:
                sign = -sign
            if abs(matrix[i, j] * sign - matrix[i, 0]) > NOTHING:
                return False
    return True


@part
def _kind_of(matrix):  # type: ignore[no-untyped-def]
    outside, mixing = False, False
    for i in range(4):
        for j in range(4):
            if i != j and abs(matrix[i, j]) > NOTHING:
                if i + j == 3 and 0 < i < 3:
                    mixing = True
                else:
                    outside = True
    if not outside:
        return MIDDLE if mixing else DIAGONAL
    return QUARTER if _is_quarter(matrix) else DENSE


@kernel
def _encode(qubits, matrices, kinds, numbers):  # type: ignore[no-untyped-def]
    for op in range(len(qubits)):
        if qubits[op, 1] < 0:
            kinds[op] = ONE
            _write_numbers(matrices[op], 2, numbers[op])
            continue
        kinds[op] = kind = _kind_of(matrices[op])
        if kind in (DIAGONAL, QUARTER):
            for i in range(4):
                value = matrices[op, i, i] if kind == DIAGONAL else matrices[op, i, 0]
                numbers[op, 2 * i] = value.real
                numbers[op, 2 * i + 1] = value.imag
        else:
            _write_numbers(matrices[op], 4, numbers[op])


def write_matrices(matrices: ComplexArray, alone: BoolArray) -> FloatArray:
    """(m, 32) numbers of operators of unknown structure; alone: (m,) true for those on one qubit."""
    numbers = np.zeros((len(matrices), 32))
    numbers[:] = np.ascontiguousarray(matrices).reshape(-1, 16).view(np.float64)
    corner = np.ascontiguousarray(matrices[alone, :2, :2]).reshape(-1, 4).view(np.float64)
    numbers[alone, :8], numbers[alone, 8:] = corner, 0
    return numbers

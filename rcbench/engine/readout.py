"""From probabilities of all qubits to probabilities of the measured bits, readout flips included."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.engine.compiled import kernel


def measured(probabilities: FloatArray, qubits: Sequence[int]) -> FloatArray:
    """(..., 2**k) distribution over the measured qubits, the first one the most significant bit; in: (..., 2**n)."""
    outer = probabilities.shape[:-1]
    n = probabilities.shape[-1].bit_length() - 1
    if list(qubits) == list(range(n)):
        return probabilities
    others = tuple(q for q in range(n) if q not in qubits)
    tensor = probabilities.reshape(-1, *(2,) * n)
    tensor = tensor.sum(axis=tuple(1 + q for q in others))
    kept = sorted(qubits)
    tensor = tensor.transpose(0, *(1 + kept.index(q) for q in qubits))
    return np.ascontiguousarray(tensor).reshape(*outer, 2 ** len(qubits))


def flip(probabilities: FloatArray, confusion: FloatArray, *, in_place: bool = False) -> FloatArray:
    """The distribution as read; probabilities: (..., 2**k), confusion: (k, 2, 2) as [bit, read, true].

    in_place: the result takes the place of the probabilities where their memory lies in one piece.
    """
    size = probabilities.shape[-1]
    out = np.ascontiguousarray(probabilities) if in_place else np.array(probabilities, order="C")
    _flip(out.reshape(-1, size), confusion.astype(out.dtype))
    return out


@kernel
def _flip(rows, confusion):  # type: ignore[no-untyped-def]
    bits = len(confusion)
    for row in range(len(rows)):
        values = rows[row]
        for bit in range(bits):
            stay0, to0, to1, stay1 = (
                confusion[bit, 0, 0],
                confusion[bit, 0, 1],
                confusion[bit, 1, 0],
                confusion[bit, 1, 1],
            )
            if to0 == 0 and to1 == 0:
                continue
            half = 1 << (bits - 1 - bit)
            for start in range(0, len(values), 2 * half):
                for place in range(start, start + half):
                    zero, one = values[place], values[place + half]
                    values[place] = stay0 * zero + to0 * one
                    values[place + half] = to1 * zero + stay1 * one

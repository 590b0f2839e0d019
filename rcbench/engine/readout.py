"""From probabilities of all qubits to probabilities of the measured bits, readout flips included."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.arrays import FloatArray


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


def flip(probabilities: FloatArray, confusion: FloatArray) -> FloatArray:
    """The distribution as read; probabilities: (..., 2**k), confusion: (k, 2, 2) as [bit, read, true]."""
    shape, k = probabilities.shape, len(confusion)
    out = probabilities
    for bit in range(k):
        if np.array_equal(confusion[bit], np.eye(2)):
            continue
        part = out.reshape(-1, 2, 2 ** (k - 1 - bit))
        zero, one = part[:, 0], part[:, 1]
        table = confusion[bit].astype(part.dtype)
        new = np.empty_like(part)
        new[:, 0] = table[0, 0] * zero + table[0, 1] * one
        new[:, 1] = table[1, 0] * zero + table[1, 1] * one
        out = new
    return out.reshape(shape)

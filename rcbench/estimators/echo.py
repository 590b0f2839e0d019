"""Echoes: how much of a circuit followed by its reverse returns to the target bitstring."""

from __future__ import annotations

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.estimators.sample import Group, Measured, Value, at_least_one_shot

SIGNATURES = ("echo_return", "polarization")


def apply(group: Group) -> list[Measured]:
    """The values of every run of the group that has a target.

    - echo_return: L, the share of shots that give the target. A fully mixed state gives 1 / D.
    - polarization: S = [4^n sum_k (-1/2)^k h_k - 1] / (4^n - 1) with h_k the share at Hamming distance k. Between a
      random local Clifford layer and its inverse it is the process polarization of any Pauli channel; it may fall
      below 0.

    Standard errors are shot noise, and never below what one shot more could change.

    Sources: Yan, Cincio, Zurek, Phys. Rev. Lett. 124, 160603 (2020); Proctor et al., Nature Physics 18, 75 (2022).
    """
    found = []
    for run in group.runs:
        if run.target is None:
            continue
        n, sample = run.sample.n_bits, run.sample
        for key, weights in (("echo_return", return_weights(n)), ("polarization", polarization_weights(n))):
            value = at_least_one_shot(sample.hamming_average(run.target, weights), sample.shots, float(np.ptp(weights)))
            found.append(_row(key, value, sample.shots, run.circuit_id))
    return found


def return_weights(n_qubits: int) -> FloatArray:
    """(n + 1,) 1 at distance 0, else 0."""
    weights = np.zeros(n_qubits + 1)
    weights[0] = 1.0
    return weights


def polarization_weights(n_qubits: int) -> FloatArray:
    """(n + 1,) weights whose mean over shots is the effective polarization, 0 for uniform bitstrings."""
    small = 4.0**-n_qubits  # not 4**n, which overflows for many qubits
    return ((-0.5) ** np.arange(n_qubits + 1) - small) / (1 - small)


def _row(key: str, value: Value, shots: int, circuit_id: str) -> Measured:
    return Measured(
        signature=key, region="", value=value.value, std_error=value.std_error, shots=shots, circuit_id=circuit_id
    )

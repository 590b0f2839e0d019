"""Butterfly echoes: out-of-time-order correlators by time reversal, normalised by the echo without the butterfly.

A run whose `params` name a `butterfly` site is a butterfly run; one that names none is the reference. Prepared is a
+1 state of Z at every probe, so that C = <Z> after U, the butterfly W, and the inverse of U. A row of `otoc` is
labelled `butterfly=5;probe=2;W=X;V=Z`: W the Pauli of the butterfly, V the one measured at the probe. Whatever else
the `params` hold, such as an input, is the same in a butterfly run and in its reference.
"""

from __future__ import annotations

import math

import numpy as np

from rcbench.estimators.sample import Group, Measured, Run, Value, at_least_one_shot
from rcbench.regions import write_setting

SIGNATURES = ("otoc", "reference_echo")
# A reference below so many standard errors is refused: the ratio gets heavy tails
LEAST_SIGNAL = 5.0


def missing(group: Group) -> str:
    """What the group lacks that all its values need: the reference run."""
    return "the reference echo" if all(is_butterfly(run) for run in group.runs) else ""


def is_butterfly(run: Run) -> bool:
    """Whether a run has a butterfly."""
    return "butterfly" in run.params


def apply(group: Group) -> list[Measured]:
    """`reference_echo` at each probe and `otoc` at each pair of butterfly and probe.

    With B and R the mean Z of a probe with and without the butterfly, otoc = (B / R) / (1 + SE(R)^2 / R^2); the last
    factor takes out the leading bias of a ratio. SE^2 = (SE(B)^2 + otoc^2 SE(R)^2) / R^2, shot noise only. Where
    R < 5 SE(R) the value is NaN.

    Sources: Mi et al., Science 374, 1479 (2021); ratio with imperfect reversal: Swingle and Yunger Halpern, Phys. Rev.
    A 97, 062113 (2018), arXiv:1802.01587; bias of a ratio: Tin, J. Am. Stat. Assoc. 60, 294 (1965) (from memory).
    """
    references = [run for run in group.runs if not is_butterfly(run)]
    if not references:
        return []
    found = []
    echoes: dict[tuple[str, int], Value] = {}
    for run in references:
        for bit, qubit in enumerate(run.measured_qubits):
            echo = _probe(run, bit)
            echoes[_common(run), qubit] = echo
            found.append(_row("reference_echo", write_setting({"probe": qubit}), echo, run))
    for run in group.runs:
        if not is_butterfly(run):
            continue
        for bit, qubit in enumerate(run.measured_qubits):
            reference = echoes.get((_common(run), qubit))
            if reference is not None:
                value = normalise(_probe(run, bit), reference)
                found.append(_row("otoc", label(run, qubit), value, run))
    return found


def label(run: Run, probe: int) -> str:
    """The region of one butterfly and one probe."""
    w, v = run.params.get("pauli", "X"), run.params.get("measured", "Z")
    return write_setting({"butterfly": run.params["butterfly"], "probe": probe, "W": w, "V": v})


def normalise(butterfly: Value, reference: Value) -> Value:
    """The ratio of an echo with a butterfly to the one without; NaN where the reference is too weak."""
    r, error = reference
    if not r > max(LEAST_SIGNAL * error, 1e-9):
        return Value(math.nan, math.nan)
    ratio = butterfly.value / r / (1 + (error / r) ** 2)
    return Value(ratio, math.sqrt(butterfly.std_error**2 + (ratio * error) ** 2) / r)


def _probe(run: Run, bit: int) -> Value:
    sign = 1.0 if run.target is None else 1.0 - 2.0 * float(run.target[bit])
    value = at_least_one_shot(run.sample.z_average(bit), run.sample.shots, 2.0)
    return Value(sign * value.value, value.std_error)


def _common(run: Run) -> str:
    """What a butterfly run and its reference have in common beside the circuit, as text to compare."""
    return repr(sorted((key, value) for key, value in run.params.items() if key not in ("butterfly", "pauli")))


def _row(key: str, region: str, value: Value, run: Run) -> Measured:
    return Measured(
        signature=key,
        region=region,
        value=float(np.float64(value.value)),
        std_error=value.std_error,
        shots=run.sample.shots,
        circuit_id=run.circuit_id,
    )

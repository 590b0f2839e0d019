"""One circuit sampled: cross-entropy with the ideal distribution, and collisions among the shots themselves."""

from __future__ import annotations

import math

import numpy as np

from rcbench.arrays import FloatArray
from rcbench.estimators.sample import Group, Measured, Run, Value
from rcbench.signatures.output import porter_thomas_distance

SIGNATURES = ("xeb_linear", "xeb_fidelity", "self_fidelity", "collision_probability", "porter_thomas_ks")
# Below this v the ideal distribution is uniform up to single-precision rounding and a ratio to it means nothing
LEAST_EXCESS = 1e-6
# With fewer coincident pairs than this expected of uniform bitstrings, most instances see none: no value and no scatter
LEAST_PAIRS = 5


def apply(group: Group) -> list[Measured]:
    """The values of every run of the group; those that need ideal probabilities only where there are any."""
    return [value for run in group.runs for value in of_run(run)]


def of_run(run: Run) -> list[Measured]:
    """The values of one sampled circuit.

    With p the ideal probabilities, D = 2**n and v = D sum p^2 - 1:

    - xeb_linear: X = D <p(x)> - 1. Under white noise its mean is F v.
    - xeb_fidelity: X / v, unbiased under white noise for any p with v > 0; for local noise at shallow depth it exceeds
      the fidelity. NaN where v vanishes.
    - collision_probability: C, over pairs of different shots; unbiased. NaN where uniform bitstrings would give fewer
      than LEAST_PAIRS coincident pairs.
    - self_fidelity: the signed square root of F_self^2 = (D C - 1) / v. F_self^2 is unbiased and may fall below 0; a
      mean over instances must be taken of the squares (`pool.ROOT_MEAN_SQUARE`), since the root bends it towards 0.
    - porter_thomas_ks: of an ideal prediction only.

    Standard errors are shot noise, not the draw of circuits.

    Sources: Arute et al., Nature 574, 505 (2019); Choi et al., Nature 613, 468 (2023); Dalzell, Hunter-Jones, Brandao,
    PRX Quantum 3, 010333 (2022); Boixo et al., Nature Physics 14, 595 (2018).
    """
    dimension = 2.0**run.sample.n_bits
    found: list[tuple[str, Value]] = []
    excess = math.nan
    if run.ideal is not None:
        excess = dimension * sum_squares(run.ideal) - 1
        mean = run.sample.average(run.ideal)
        linear = Value(dimension * mean.value - 1, dimension * mean.std_error)
        found += [("xeb_linear", linear), ("xeb_fidelity", _ratio(linear, excess))]
    if run.sample.shots != 1:  # one shot has no pair
        shots = run.sample.shots
        few = shots > 0 and shots * (shots - 1) < 2 * LEAST_PAIRS * dimension
        collision = Value(math.nan, math.nan) if few else run.sample.collision()
        found.append(("collision_probability", collision))
        if run.ideal is not None:
            square = Value(dimension * collision.value - 1, dimension * collision.std_error)
            found.append(("self_fidelity", signed_root(_ratio(square, excess))))
            if _is_ideal(run):
                found.append(("porter_thomas_ks", Value(porter_thomas_distance(run.ideal), 0.0)))
    return [
        Measured(
            signature=key,
            region="",
            value=value.value,
            std_error=value.std_error,
            shots=run.sample.shots,
            circuit_id=run.circuit_id,
        )
        for key, value in found
    ]


def sum_squares(probabilities: FloatArray) -> float:
    """sum p^2 in double precision, also of single-precision probabilities."""
    return float(np.square(probabilities, dtype=np.float64).sum())


def _ratio(value: Value, excess: float) -> Value:
    if not excess > LEAST_EXCESS:
        return Value(math.nan, math.nan)
    return Value(value.value / excess, value.std_error / excess)


def signed_root(value: Value) -> Value:
    """Square root that keeps the sign, with half the distance between the roots one standard error up and down.

    Near 0, where a derivative would promise an infinite error, that stays finite; `square_again` undoes both.
    """
    if not math.isfinite(value.std_error):
        return Value(_root(value.value), value.std_error)
    error = (_root(value.value + value.std_error) - _root(value.value - value.std_error)) / 2
    return Value(_root(value.value), error)


def _root(value: float) -> float:
    return math.copysign(math.sqrt(abs(value)), value)


def square_again(values: FloatArray, errors: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The signed squares and their standard errors, from what `signed_root` gave."""
    squares = values * np.abs(values)
    size, e2 = np.abs(squares), np.square(errors)
    far = size >= 2 * e2  # both roots on one side of 0
    near_error = e2 + np.divide(size**2, 4 * e2, out=np.zeros_like(e2), where=e2 > 0)
    return squares, np.where(far, 2 * errors * np.sqrt(np.maximum(size - e2, 0.0)), near_error)


def _is_ideal(run: Run) -> bool:
    if run.ideal is None or getattr(run.sample, "batches", 0) is not None:
        return False
    return np.array_equal(getattr(run.sample, "exact", ()), run.ideal)

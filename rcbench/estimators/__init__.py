"""The measured signatures: each from bitstrings and, by the very same code, from predicted distributions.

One file a family:

- `cross_entropy`: one circuit sampled. Is it this circuit (cross-entropy), and is structure still there (collisions)?
- `echo`: a circuit and its reverse, against a target bitstring.
- `butterfly`: the echo with and without a perturbation in the middle; out-of-time-order correlators.
- `decay`: fits against depth, over what the families above gave at single depths.
- `pool`: how the values of single instances become one number with an interval.

A family is `apply(group) -> list[Measured]` with the keys it gives, and one row of ESTIMATORS. An estimator is
unbiased where that can be had: nothing is clipped to its range, since a mean of clipped values is biased. A value
that the data cannot give (a reference too weak to divide by) is NaN, so that it can be counted.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from rcbench.errors import InputError, suggest
from rcbench.estimators import butterfly, cross_entropy, echo
from rcbench.estimators.sample import Group, Measured


@dataclass(frozen=True, slots=True, kw_only=True)
class Estimator:
    """One family of estimators.

    signatures: the keys it gives. needs_ideal: it reads the ideal probabilities of each run. missing: what a group
    lacks that all of it needs, in words; empty where it is whole. apply: the values of a group.
    """

    name: str
    signatures: tuple[str, ...]
    needs_ideal: bool
    apply: Callable[[Group], list[Measured]]
    missing: Callable[[Group], str] = lambda group: ""


ESTIMATORS: dict[str, Estimator] = {
    row.name: row
    for row in (
        Estimator(
            name="cross-entropy", signatures=cross_entropy.SIGNATURES, needs_ideal=True, apply=cross_entropy.apply
        ),
        Estimator(name="echo", signatures=echo.SIGNATURES, needs_ideal=False, apply=echo.apply),
        Estimator(
            name="butterfly-echo",
            signatures=butterfly.SIGNATURES,
            needs_ideal=False,
            apply=butterfly.apply,
            missing=butterfly.missing,
        ),
    )
}


def estimator(name: str) -> Estimator:
    """A family by name; a mistyped name gets the list of names."""
    if name not in ESTIMATORS:
        raise InputError("estimator", name, suggest(name, ESTIMATORS))
    return ESTIMATORS[name]

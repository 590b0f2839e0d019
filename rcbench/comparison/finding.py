"""The finding of one row: agrees, departs, undecided or not-tested, by a rule fixed before the data came.

The rule is an equivalence test of the mean paired difference against the margin. Failing to see a difference is no
agreement; an interval inside the margin is. A dead device must agree with nothing, so a guard stands before the test.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from rcbench.estimators.pool import Difference
from rcbench.signatures.registry import Signature
from rcbench.statistics import (
    MIN_INSTANCES,
    Component,
    Equivalence,
    Interval,
    combine,
    equivalence,
    quantile,
    u_to_settle,
)

POWER = 0.8
# Beyond this many instances the answer is that the difference lies at the margin
MOST_INSTANCES = 100_000


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """finding: one of tables.FINDINGS. direction: better, worse, higher, lower or empty. note: the reason."""

    finding: str
    direction: str = ""
    note: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Guard:
    """dead: why the row has no signal left, empty where it has. faint: why it may not count as agreement."""

    dead: str = ""
    faint: str = ""


def own_guard(null: float, margin: float, reference: float, measured: float, u_shot: float, alpha: float) -> Guard:
    """Prediction and data must both stand apart from a fully mixed state by more than the margin.

    For agreement the data must do so beyond doubt: with a one-sided bound of level 1 - alpha. What could lift a dead
    device above its margin is shot noise, so the bound is made with that and not with the scatter between circuits.

    Args:
        null: value for a fully mixed state. reference, measured: prediction and data. u_shot: shot noise of measured.
    """
    if abs(reference - null) <= margin:
        return Guard(dead="the prediction lies within the margin of a fully mixed state")
    if abs(measured - null) <= margin:
        return Guard(dead="the data lie within the margin of a fully mixed state")
    if not abs(measured - null) - quantile(1 - alpha, math.inf) * u_shot > margin:
        return Guard(faint="the data do not stand apart from a fully mixed state beyond doubt")
    return Guard()


def companion_guard(title: str, null: float | None, companion: Interval | None) -> Guard:
    """The companion measured with the row must exclude its own value for a fully mixed state."""
    if companion is None:
        return Guard(dead=f"its companion, the {title}, was not measured")
    if null is not None and companion.low <= null <= companion.high:
        return Guard(dead=f"its companion, the {title}, does not exclude a fully mixed state")
    return Guard()


def against_margin(found: Difference, u_syst: float, margin: float, alpha: float) -> tuple[Equivalence, Component]:
    """The equivalence test with the systematic uncertainty in it, and the combined uncertainty it used."""
    total = combine(found.stat, Component(u_syst))
    return equivalence(found.value, total, margin, alpha), total


def direction(row: Signature, difference: float) -> str:
    """Better or worse by the registry; higher or lower where neither is better."""
    if difference == 0:
        return ""
    if row.higher_is_better == 0:
        return "higher" if difference > 0 else "lower"
    return "better" if difference * row.higher_is_better > 0 else "worse"


def decide(
    row: Signature,
    found: Difference,
    tested: Equivalence,
    *,
    guard: Guard,
    u_syst: float,
    margin: float,
    alpha: float,
    instances: int,
    shots: int,
) -> Finding:
    """The finding of a row that has data, a prediction and a margin.

    Args:
        tested: the equivalence test of the difference. guard: what bars a finding. u_syst: the model's own uncertainty.
        instances, shots: instances used and shots an instance, for saying what would settle the row.
    """
    which = direction(row, found.value)
    if guard.dead:
        beyond = f"; the difference itself lies beyond the margin ({which})" if tested.outside else ""
        return Finding(
            finding="undecided", direction=which if beyond else "", note=f"no signal left: {guard.dead}{beyond}"
        )
    if margin < u_syst:
        note = f"margin below the model's own uncertainty ({u_syst:.2g})"
        return Finding(finding="undecided", note=note)
    if tested.outside:
        return Finding(finding="departs", direction=which)
    if tested.inside and not guard.faint:
        return Finding(finding="agrees")
    if tested.inside:
        return Finding(finding="undecided", note=f"no signal left: {guard.faint}")
    return Finding(finding="undecided", note=settle(found, u_syst, margin, alpha, instances, shots))


def settle(found: Difference, u_syst: float, margin: float, alpha: float, instances: int, shots: int) -> str:
    """What would settle an undecided row, in words: instances, or shots where their noise is most of the scatter.

    With a difference within one standard uncertainty of 0 the true one is taken to be 0, else as seen. Power POWER.
    """
    none = abs(found.value) <= max(found.stat.u, u_syst)
    gap = margin if none else abs(abs(found.value) - margin)
    target = u_to_settle(gap, alpha, POWER, u_syst, two_sided=none)
    if target == 0:
        return f"more data would hardly settle it: the model's own uncertainty is {u_syst:.2g}, too near the margin"
    needed = math.ceil((found.one / target) ** 2) + 2  # the normal formula falls short of Student's by one or two
    if needed > MOST_INSTANCES:
        return "the difference lies too near the margin for more data to settle it"
    needed = max(needed, instances + 1, MIN_INSTANCES)
    ways = [f"about {needed} instances of {shots} shots" if shots else f"about {needed} instances"]
    room = target**2 * instances - max(found.one**2 - found.shot**2, 0.0)
    if shots and room > 0 and found.shot**2 > found.one**2 / 2:
        ways.append(f"{max(math.ceil(shots * found.shot**2 / room), shots + 1)} shots an instance")
    return "would be settled by " + " or ".join(ways)

"""What was asked against what returned, run by run and by experiment, and whether losses grow with depth."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
import pandas as pd

from rcbench.arrays import FloatArray
from rcbench.shots.shots import Shots

if TYPE_CHECKING:
    from rcbench.kit import Kit, RosterRow

RUN_COLUMNS = (
    "circuit_id", "repeat", "experiment", "role", "depth", "instance", "setting", "asked", "returned",
    "discards", "state",
)  # fmt: skip
TABLE_COLUMNS = (
    "experiment", "asked", "returned", "complete", "short", "over", "missing", "unknown", "repeats", "discards",
    "shots_asked", "shots_returned",
)  # fmt: skip
NOT_OF_THE_KIT = "(not of this kit)"
STATES = ("complete", "short", "over", "missing", "extra")
TREND_LIMIT = 3.0  # sigmas of a linear trend with depth from which a warning is given


def runs_frame(kit: Kit, shots: Shots) -> pd.DataFrame:
    """One row a run: those of the roster, then repeats beyond it (`extra`).

    returned: shots that can be used; discards: shots with a symbol for a lost or leaked qubit. state: one of STATES, by
    returned and discards together, since both were delivered.
    """
    rows, asked_keys, by_id = [], set(), {}
    for row in kit.rows:
        key = (row.circuit_id, row.repeat)
        asked_keys.add(key)
        by_id[row.circuit_id] = row
        returned, discards = _returned(shots, key)
        rows.append((*_place(row, row.repeat), row.shots, returned, discards, _state(row.shots, returned + discards)))
    extra = sorted(shots.returned - asked_keys)
    rows += [(*_place(by_id[key[0]], key[1]), 0, *_returned(shots, key), "extra") for key in extra]
    return pd.DataFrame(rows, columns=list(RUN_COLUMNS))


def _place(row: RosterRow, repeat: int) -> tuple[object, ...]:
    return row.circuit_id, repeat, row.experiment, row.role, row.depth, row.instance, row.setting


def _returned(shots: Shots, key: tuple[str, int]) -> tuple[int, int]:
    outcomes = shots.outcomes.get(key)
    return (outcomes.shots if outcomes is not None else 0), shots.discards.get(key, 0)


def _state(asked: int, delivered: int) -> str:
    if delivered == 0:
        return "missing"
    if delivered < asked:
        return "short"
    return "complete" if delivered == asked else "over"


def by_experiment(frame: pd.DataFrame, names: Sequence[str], unknown: int) -> pd.DataFrame:
    """One row an experiment, in the order of the names, counting runs; discards and the last two columns count shots.

    complete counts runs with at least the shots asked for; those with more are in `over` too. repeats counts runs that
    repeat a circuit, asked for or not. unknown: circuit ids that are not of the kit; they have a row of their own.
    """
    rows = []
    groups = dict(list(frame.groupby("experiment", sort=False)))
    for experiment in (name for name in names if name in groups):
        runs = groups[experiment]
        state = runs["state"]
        asked = state != "extra"
        rows.append(
            (
                experiment,
                int(asked.sum()),
                int((asked & (state != "missing")).sum()),
                int(state.isin(["complete", "over"]).sum()),
                *(int((state == name).sum()) for name in ("short", "over", "missing")),
                0,
                int(((runs["repeat"] > 0) & (state != "missing")).sum()),
                *(int(runs[name].sum()) for name in ("discards", "asked", "returned")),
            )
        )
    if unknown:
        rows.append((NOT_OF_THE_KIT, 0, 0, 0, 0, 0, 0, unknown, 0, 0, 0, 0))
    return pd.DataFrame(rows, columns=list(TABLE_COLUMNS))


class Trend(NamedTuple):
    """A linear trend with depth. score and variance: of the covariance sum, so that experiments can be joined."""

    score: float
    variance: float

    @property
    def z(self) -> float:
        """Standard deviations from no trend; above 0: grows with depth."""
        return self.score / math.sqrt(self.variance) if self.variance > 0 else 0.0


def trend(depth: FloatArray, lost: FloatArray) -> Trend:
    """Whether a lost fraction grows with depth.

    The score is the sum of (depth - mean depth) (lost - mean lost), with its variance when all orders of the values are
    equally likely: z = r sqrt(N - 1), r the correlation. Where each value is 0 or 1 this is the test for a linear trend
    in proportions, given the totals.

    Args:
        depth: (N,) depth of each run. lost: (N,) fraction lost, 0 to 1.

    Source: Armitage, Biometrics 11, 375 (1955); the extended form in Mantel, J. Am. Stat. Assoc. 58, 690 (1963).
    """
    n = len(depth)
    if n < 2:
        return Trend(0.0, 0.0)
    d, f = depth - depth.mean(), lost - lost.mean()
    return Trend(float(d @ f), float((d @ d) * (f @ f)) / (n - 1))


def joined_trend(trends: Iterable[Trend]) -> Trend:
    """One trend over experiments that may differ in what they lost on the whole."""
    found = list(trends)
    return Trend(sum(t.score for t in found), sum(t.variance for t in found))


def lost_fractions(runs: pd.DataFrame) -> tuple[FloatArray, FloatArray]:
    """Fraction of the shots asked for that was not delivered, and fraction discarded of what was; (runs,) each."""
    delivered = (runs["returned"] + runs["discards"]).to_numpy(dtype=np.float64)
    missing = np.clip(1 - delivered / runs["asked"].to_numpy(dtype=np.float64), 0, 1)
    discarded = runs["discards"].to_numpy(dtype=np.float64) / np.maximum(delivered, 1)
    return missing, discarded


def missing_circuits(kit: Kit, shots: Shots) -> frozenset[str]:
    """Ids of the circuits of which a run that was asked for has no shot at all, not even a discarded one."""
    returned = shots.returned
    return frozenset(row.circuit_id for row in kit.rows if (row.circuit_id, row.repeat) not in returned)

"""A lane under examination: its runs, and what has become known of them."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from rcbench.shots.evidence.bit_order import (
    Candidate,
)
from rcbench.shots.evidence.cases import Lane
from rcbench.shots.evidence.orders import Order
from rcbench.shots.evidence.own import Own
from rcbench.shots.shots import RunKey


@dataclass(slots=True, eq=False)
class LaneStudy:
    """A lane and what has become known of it.

    Args:
        lane: its runs, bits in order as far as an order was found. own: against their own circuits.
        orders: the order found of each run that comes in another one. explained: runs that a circuit explains.
        searched: the orders that a search among some runs came to.
    """

    lane: Lane
    own: Own
    orders: dict[RunKey, Order] = field(default_factory=dict)
    explained: set[RunKey] = field(default_factory=set)
    searched: dict[tuple[tuple[int, ...], int], list[Candidate]] = field(default_factory=dict)

    @property
    def doubtful(self) -> list[int]:
        """Places of runs that nothing explains yet."""
        return [
            place
            for place in np.flatnonzero(self.own.doubtful).tolist()
            if self.lane.cases[place].key not in self.explained
        ]

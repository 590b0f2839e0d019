"""Runs as arrays: the outcomes of those that can be examined, put together where they share a floor of noise."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.errors import InputError
from rcbench.shots.evidence import scores
from rcbench.shots.evidence.orders import Order
from rcbench.shots.shots import RunKey, Shots

if TYPE_CHECKING:
    from rcbench.kit import RosterRow
    from rcbench.shots.outcomes import Outcomes

MAX_QUBITS = 20  # circuits up to here are simulated
MAX_INDEX_BITS = 62
FEWEST_BITS = 5  # below, a handful of outcomes has no collisions or cross-entropy worth the name
CACHE_BYTES = 512 * 2**20
Probabilities = Callable[[str], FloatArray | None]


@dataclass(frozen=True, slots=True, eq=False)
class Case:
    """One run. index, counts: (k,) its different outcomes; target: the outcome that should return, or None."""

    key: RunKey
    row: RosterRow
    n_bits: int
    index: IntArray
    counts: IntArray
    target: int | None
    files: tuple[str, ...] = ()

    @property
    def shots(self) -> int:
        """Number of shots."""
        return int(self.counts.sum())

    @property
    def base(self) -> str:
        """The circuit, whichever repeat of it."""
        return self.row.base_id

    def mended(self, order: Order) -> Case:
        """The same run with its bits in order."""
        return replace(self, index=order.mended(self.index))

    def ones(self) -> FloatArray:
        """(n_bits,) share of shots in which each bit is 1."""
        return ones_of(self.index, self.n_bits, self.counts) / max(self.shots, 1)

    def without(self, bits: Sequence[int]) -> Case:
        """The same run with some bits left out."""
        if not bits:
            return self
        index, where = np.unique(drop_bits(self.index, self.n_bits, bits), return_inverse=True)
        counts = np.zeros(len(index), dtype=np.int64)
        np.add.at(counts, where, self.counts)
        target = None
        if self.target is not None:
            target = int(drop_bits(np.array([self.target]), self.n_bits, bits)[0])
        return replace(self, n_bits=self.n_bits - len(bits), index=index, counts=counts, target=target)


def ones_of(index: IntArray, n_bits: int, weights: IntArray | FloatArray) -> FloatArray:
    """(n_bits,) weight of outcomes in which each bit is 1."""
    return np.array([float(((index >> (n_bits - 1 - bit)) & 1) @ weights) for bit in range(n_bits)])


def marginal_ones(p: FloatArray) -> FloatArray:
    """(n,) probability of each bit to be 1; p: (2**n,)."""
    n = len(p).bit_length() - 1
    return np.array([float(p.reshape(2**bit, 2, -1)[:, 1].sum(dtype=np.float64)) for bit in range(n)])


def drop_bits(index: IntArray, n_bits: int, bits: Sequence[int]) -> IntArray:
    """State indices of the other bits."""
    out = np.zeros_like(index)
    for bit in (bit for bit in range(n_bits) if bit not in bits):
        out = out << 1 | (index >> (n_bits - 1 - bit) & 1)
    return out


def target_index(target: str) -> int | None:
    """A target string as a state index, or None where there is none."""
    return int(target, 2) if target and len(target) <= MAX_INDEX_BITS else None


def collect(
    rows: Iterable[RosterRow], shots: Shots, max_qubits: int, files: Mapping[RunKey, tuple[str, ...]]
) -> tuple[list[Case], list[str]]:
    """The runs that can be examined, and in words what cannot.

    Repeats beyond the roster's are runs of the same circuit. In order of experiment and instance, so that whoever
    simulates can share the beginnings of circuits.
    """
    by_id = {row.circuit_id: row for row in rows}
    known = {name for file in shots.files if file.rows for name in [file.name]}
    cases: list[Case] = []
    large: dict[str, int] = defaultdict(int)
    for row, key in sorted_rows(by_id, shots.outcomes):
        outcomes = shots.outcomes[key]
        target = target_index(row.target)
        if outcomes.n_bits > MAX_INDEX_BITS or (target is None and row.n_qubits > max_qubits):
            large[row.experiment] += 1
            continue
        index = outcomes.index()
        order = np.argsort(index, kind="stable")
        of_run = files.get(key, tuple(known) if len(known) == 1 else ())
        cases.append(Case(key, row, outcomes.n_bits, index[order], outcomes.counts[order], target, of_run))
    notes = [
        f"{count} runs of {name}: more than {max_qubits} qubits, which --max-qubits raises at the cost of time"
        for name, count in large.items()
    ]
    return cases, notes


def sorted_rows(by_id: Mapping[str, RosterRow], outcomes: Mapping[RunKey, Outcomes]) -> list[tuple[RosterRow, RunKey]]:
    """Roster row and key of every run with shots, by experiment, instance, depth and circuit."""
    found = [(by_id[key[0]], key) for key, one in outcomes.items() if key[0] in by_id and one.shots]
    return sorted(found, key=lambda pair: (*place_of(pair[0]), pair[1][1]))


def place_of(row: RosterRow) -> tuple[str, int, int, str]:
    """What rows are sorted by, so that circuits of an instance come together."""
    return row.experiment, row.instance, row.depth, row.circuit_id


class Ideals:
    """Ideal probabilities by circuit, kept while they fit into CACHE_BYTES; told: called with how many are done."""

    def __init__(
        self, ideal: Probabilities, max_qubits: int = MAX_QUBITS, told: Callable[[int], None] | None = None
    ) -> None:
        self._ideal, self._max_qubits, self._told, self._done = ideal, max_qubits, told, 0
        self.refused: dict[str, str] = {}  # circuits that cannot be simulated, and why
        self._held: dict[str, FloatArray | None] = {}
        self._bytes = 0

    def get(self, row: RosterRow, dropped: tuple[int, ...] = ()) -> FloatArray | None:
        """(2**n,) float32 probabilities over the measured bits but for the dropped ones; None where not known."""
        if row.n_qubits > self._max_qubits:
            return None
        base = row.base_id
        if base not in self._held:
            found = self._simulated(base)
            size = 0 if found is None else found.nbytes
            if self._bytes + size > CACHE_BYTES:
                return _marginal(found, dropped)
            self._held[base] = found
            self._bytes += size
        return _marginal(self._held[base], dropped)

    def _simulated(self, base: str) -> FloatArray | None:
        self._done += 1
        if self._told is not None:
            self._told(self._done)
        try:
            found = self._ideal(base)
        except InputError as error:  # too little memory, or a circuit that the engine does not take
            self.refused[base] = f"{error.key}: {error.found}; allowed: {error.allowed}"
            return None
        return None if found is None else np.asarray(found, dtype=np.float32)


def _marginal(p: FloatArray | None, dropped: tuple[int, ...]) -> FloatArray | None:
    if p is None or not dropped:
        return p
    n = len(p).bit_length() - 1
    return np.asarray(p.reshape((2,) * n).sum(axis=dropped).reshape(-1))


LaneKey = tuple[str, tuple[int, ...], tuple[str, ...], bool]


def lane_key(case: Case) -> LaneKey:
    """What runs must share to share a floor: experiment, measured qubits, and whether a string should return."""
    return case.row.experiment, case.row.measured_qubits, case.row.physical_qubits, case.target is not None


@dataclass(slots=True, eq=False)
class Lane:
    """Runs that share a floor, one after another.

    Args:
        cases: without the dropped bits. dropped: bits that say nothing. n_bits: what is left.
        bias: (n_bits,) mean Z of the floor of the likelihoods. pair_bias: the same for coincidences; it differs where a
            string should return, since the likelihood then flips bits of its own.
    """

    cases: list[Case]
    dropped: tuple[int, ...]
    bias: FloatArray
    pair_bias: FloatArray

    @property
    def n_bits(self) -> int:
        """Bits of an outcome."""
        return self.cases[0].n_bits

    @property
    def returns(self) -> bool:
        """Whether each run should return one string."""
        return self.cases[0].target is not None

    @property
    def counts(self) -> IntArray:
        """(k,) counts of all outcomes of all runs."""
        return np.concatenate([case.counts for case in self.cases])

    @property
    def index(self) -> IntArray:
        """(k,) state indices of all outcomes of all runs."""
        return np.concatenate([case.index for case in self.cases])

    @property
    def starts(self) -> IntArray:
        """(runs,) where the outcomes of each run start."""
        return np.concatenate([[0], np.cumsum([len(case.index) for case in self.cases])[:-1]]).astype(np.int64)

    @property
    def shots(self) -> FloatArray:
        """(runs,) shots."""
        return np.array([case.shots for case in self.cases], dtype=np.float64)

    def inverse_floor(self) -> FloatArray:
        """(2**n_bits,) 1 / g, float64."""
        return 1 / scores.floor(self.bias)

    def inverse_floor_at(self, bias: FloatArray) -> FloatArray:
        """(k,) 1 / g of all outcomes of all runs, g the floor of a given mean Z; for any number of bits."""
        return scores.inverse_floor_at(self.index, bias)

    def collisions(self) -> scores.Collisions:
        """Coincidences of each run."""
        at = self.inverse_floor_at(self.pair_bias)
        return scores.collisions(at, self.counts, self.starts, 2.0**self.n_bits)

    def some(self, places: Sequence[int]) -> Lane:
        """Some of the runs."""
        return replace(self, cases=[self.cases[place] for place in places])


def common_bias(cases: Sequence[Case], ideals: Ideals, dropped: tuple[int, ...] = ()) -> FloatArray:
    """(n_bits,) mean Z that runs share beyond what their circuits give them: the median over runs.

    With one or two runs their own mean Z is taken whole: a little power is lost, no false finding made.
    """
    rest = []
    for case in cases:
        z = 1 - 2 * case.ones()
        p = ideals.get(case.row, dropped)
        if p is not None:
            size = float(len(p))
            v = size * float(np.square(p, dtype=np.float64).sum()) - 1
            share = 0.0
            if v > scores.LEAST_EXCESS:
                share = float(np.clip((size * float(p[case.index] @ case.counts) / case.shots - 1) / v, 0, 1))
            z = z - share * (1 - 2 * marginal_ones(p))
        rest.append(z)
    return np.asarray(np.median(np.array(rest), axis=0))


def returned_bias(cases: Sequence[Case]) -> FloatArray:
    """(n_bits,) mean Z of bits that return strings, beyond the strings; 0 where a bit should always return one
    value.
    """
    z = 1 - 2 * np.array([case.ones() for case in cases])
    shifts = np.arange(cases[0].n_bits - 1, -1, -1)
    up = (np.array([case.target for case in cases], dtype=np.int64)[:, None] >> shifts & 1) == 0
    both = up.any(axis=0) & ~up.all(axis=0)
    mean_up = (z * up).sum(axis=0) / np.maximum(up.sum(axis=0), 1)
    mean_down = (z * ~up).sum(axis=0) / np.maximum((~up).sum(axis=0), 1)
    return np.where(both, (mean_up + mean_down) / 2, 0.0)


def make_lanes(cases: Sequence[Case]) -> list[list[Case]]:
    """Runs by what they must share to share a floor."""
    found: dict[LaneKey, list[Case]] = defaultdict(list)
    for case in cases:
        found[lane_key(case)].append(case)
    return list(found.values())


def lane_of(cases: Sequence[Case], ideals: Ideals, dropped: tuple[int, ...] = ()) -> Lane:
    """A lane of runs that share a floor, without some bits that say nothing."""
    nothing = np.zeros(0)
    return refloored(Lane([case.without(dropped) for case in cases], dropped, nothing, nothing), ideals)


def refloored(lane: Lane, ideals: Ideals) -> Lane:
    """The lane with its floor worked out from its runs as they are now."""
    if lane.returns:
        return replace(lane, bias=np.zeros(lane.n_bits), pair_bias=returned_bias(lane.cases))
    bias = common_bias(lane.cases, ideals, lane.dropped)
    return replace(lane, bias=bias, pair_bias=bias)


def entries(starts: IntArray, size: int, runs: Sequence[int] | IntArray) -> tuple[IntArray, IntArray]:
    """Positions of the outcomes of some runs among all `size`, and where each run starts among those."""
    ends = np.append(starts[1:], size)
    picked = [np.arange(starts[run], ends[run]) for run in runs]
    lengths = [len(one) for one in picked]
    return np.concatenate(picked), np.concatenate([[0], np.cumsum(lengths)[:-1]]).astype(np.int64)

"""Frame potentials of ensembles of unitaries and of states: how close a random circuit is to a k-design.

F(k) is the mean of |<i|j>|^(2k) over pairs of different members: with <i|j> = tr(U_i^dag U_j) for unitaries, the
overlap for states. Haar has the least value; k = 1 to 4. Pairs i = j are left out, else D^(2k) / N is added.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, comb, sqrt

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.engine import memory
from rcbench.errors import InputError
from rcbench.reference import frame_potentials as reference

ORDERS = (1, 2, 3, 4)
_BLOCK = 2**26  # bytes of the members brought into one matrix product
LEAST_INSTANCES = 4  # the jackknife leaves one out and still needs pairs


@dataclass(frozen=True, slots=True, kw_only=True)
class FramePotential:
    """One estimate beside Haar.

    Args:
        k: the order. value: unbiased estimate. std_error: from a jackknife over instances.
        haar: value of Haar-random unitaries or states of the same dimension. instances: members of the ensemble.
        warning: what the instances cannot resolve and how many could, or empty.
    """

    k: int
    value: float
    std_error: float
    haar: float
    instances: int
    warning: str = ""

    @property
    def excess(self) -> float:
        """Relative distance above Haar."""
        return self.value / self.haar - 1


def overlaps(members: Sequence[ComplexArray] | ComplexArray, *, memory_limit: int | None = None) -> FloatArray:
    """|<i|j>|^2 of all pairs of members, as matrix products over blocks of their entries.

    Args:
        members: vectors (size,), or matrices (D, D) with the trace of i^dag j as product; one array of them, which may
            be a memmap, or a list.
        memory_limit: bytes for the blocks and the result, the free memory where None.
    Returns:
        (instances, instances) double precision.
    Raises:
        InputError: too little memory for the result and blocks of one entry.
    """
    count = len(members)
    flat = [np.reshape(member, -1) for member in members]
    size, item = flat[0].size, flat[0].itemsize
    result = 24 * count * count  # sums in double precision, and their squares
    limit = memory.available_memory() if memory_limit is None else memory_limit
    entry = 2 * item * count  # a block and its conjugate
    columns = max(1, min(size, _BLOCK // entry, (limit - result) // entry))
    memory.require(result + entry * columns, memory_limit, f"overlaps of {count} instances")
    gram = np.zeros((count, count), dtype=np.complex128)
    for start in range(0, size, columns):
        block = np.stack([member[start : start + columns] for member in flat])
        gram += block.conj() @ block.T
    return np.square(gram.real) + np.square(gram.imag)


def _check(k: int, instances: int) -> None:
    if k not in ORDERS:
        raise InputError("k", k, "1, 2, 3 or 4")
    if instances < LEAST_INSTANCES:
        raise InputError(
            "instances", instances, f"{LEAST_INSTANCES} or more for a frame potential with an error; hundreds for k = 2"
        )


def estimate(squares: FloatArray, k: int) -> tuple[float, float]:
    """Frame potential and its standard error from |<i|j>|^2 of all pairs.

    The mean over i != j, a U-statistic, has no bias; leaving out one instance at a time gives its error, which holds
    also where members are not spread invariantly. Where they are, as for Haar, it is too large by up to sqrt(2).

    Args:
        squares: (instances, instances) as `overlaps`. k: 1 to 4.
    Returns:
        value, standard error.
    Raises:
        InputError: k outside 1 to 4, or fewer than four instances.

    Source: Efron and Stein, Ann. Stat. 9, 586 (1981), for the jackknife (from memory).
    """
    count = len(squares)
    _check(k, count)
    powers = squares**k
    np.fill_diagonal(powers, 0.0)
    rows = powers.sum(axis=1)
    total = rows.sum()
    without = (total - 2 * rows) / ((count - 1) * (count - 2))
    value = float(total / (count * (count - 1)))
    spread = (count - 1) / count * float(np.square(without - without.mean()).sum())
    return value, sqrt(spread)


def _of(squares: FloatArray, k: int, haar: float, needed: int) -> FramePotential:
    value, error = estimate(squares, k)
    warning = ""
    if len(squares) < needed:
        warning = f"{len(squares)} instances cannot resolve k = {k} to 50 % at three sigmas; {needed} could"
    return FramePotential(k=k, value=value, std_error=error, haar=haar, instances=len(squares), warning=warning)


def of_unitaries(unitaries: ComplexArray, k: int, *, memory_limit: int | None = None) -> FramePotential:
    """Frame potential of an ensemble of unitaries.

    Args:
        unitaries: (instances, D, D). k: 1 to 4. memory_limit: as `overlaps`.
    Raises:
        InputError: k outside 1 to 4, fewer than four instances, or too little memory.

    Source: Gross, Audenaert and Eisert, J. Math. Phys. 48, 052104 (2007), quant-ph/0611002; Hunter-Jones,
    arXiv:1905.12053.
    """
    return of_unitary_overlaps(overlaps(unitaries, memory_limit=memory_limit), unitaries.shape[-1], k)


def of_unitary_overlaps(squares: FloatArray, dimension: int, k: int) -> FramePotential:
    """The same from |tr U_i^dag U_j|^2 of all pairs (instances, instances)."""
    _check(k, len(squares))
    return _of(squares, k, float(reference.unitary(k, dimension)), instances_to_resolve(k, dimension, 1 / 6))


def of_states(states: ComplexArray, k: int, *, memory_limit: int | None = None) -> FramePotential:
    """Frame potential of an ensemble of states (instances, D); the rest as `of_unitaries`.

    Source: Renes, Blume-Kohout, Scott and Caves, J. Math. Phys. 45, 2171 (2004) (from memory).
    """
    return of_state_overlaps(overlaps(states, memory_limit=memory_limit), states.shape[-1], k)


def of_state_overlaps(squares: FloatArray, dimension: int, k: int) -> FramePotential:
    """The same from |<i|j>|^2 of all pairs (instances, instances)."""
    _check(k, len(squares))
    needed = instances_to_resolve(k, dimension, 1 / 6, states=True)
    return _of(squares, k, reference.state(k, dimension), needed)


def instances_to_resolve(k: int, dimension: int, relative_error: float, *, states: bool = False) -> int:
    """Haar-random members that give the k-th frame potential within a relative standard error.

    Args:
        k: 1 to 4. dimension: D. relative_error: above 0. states: of states, not of unitaries.
    Raises:
        InputError: k outside 1 to 4, or an error that is not above 0.

    Source: variance of a degenerate U-statistic, 2 (F(2k) - F(k)^2) / (N (N - 1)).
    """
    if k not in ORDERS:
        raise InputError("k", k, "1, 2, 3 or 4")
    if not states:
        return max(LEAST_INSTANCES, reference.instances_needed(k, dimension, relative_error))
    if not relative_error > 0:
        raise InputError("relative_error", relative_error, "a number above 0")
    ratio = comb(dimension + k - 1, k) ** 2 / comb(dimension + 2 * k - 1, 2 * k)
    pairs = max(ratio - 1, 0) / relative_error**2
    return max(LEAST_INSTANCES, ceil((1 + sqrt(1 + 8 * pairs)) / 2))


@dataclass(frozen=True, slots=True, kw_only=True)
class DesignDepth:
    """The depth from which an ensemble is an approximate design.

    Args:
        depth: the first depth at and after which every excess is below epsilon; None where there is none.
        certain: whether every such excess is below epsilon by `sigmas` standard errors too.
        epsilon: relative excess over Haar that is allowed. message: what was found, or what is missing.
    """

    depth: int | None
    certain: bool
    epsilon: float
    message: str


def design_depth(
    depths: list[int], potentials: list[FramePotential], dimension: int, epsilon: float = 0.1, *, sigmas: float = 2.0
) -> DesignDepth:
    """Depth from which the frame potential is within a relative error of Haar.

    Args:
        depths: rising. potentials: one each, of one order k. dimension: D of the unitaries.
        epsilon: relative excess over Haar that is allowed. sigmas: standard errors of a certain statement.
    Raises:
        InputError: no depths, lists of different length, or an epsilon that is not above 0.

    Source: frame-potential criterion as in Hunter-Jones, arXiv:1905.12053.
    """
    if not depths or len(depths) != len(potentials):
        raise InputError("depths", len(depths), "one or more depths, with one frame potential each")
    if not epsilon > 0:
        raise InputError("epsilon", epsilon, "a relative error above 0")
    k, count = potentials[0].k, potentials[0].instances
    first: int | None = None
    for depth, potential in zip(reversed(depths), reversed(potentials), strict=True):
        if potential.excess > epsilon:
            break
        first = depth
    needed = instances_to_resolve(k, dimension, epsilon / sigmas)
    if first is None:
        return DesignDepth(
            depth=None, certain=False, epsilon=epsilon,
            message=f"no depth up to {depths[-1]} is within {epsilon:g} of Haar at k = {k}; deeper circuits could be",
        )  # fmt: skip
    held = [p for d, p in zip(depths, potentials, strict=True) if d >= first]
    certain = all(p.excess + sigmas * p.std_error / p.haar <= epsilon for p in held)
    message = f"within {epsilon:g} of Haar at k = {k} from depth {first}"
    if not certain:
        message += f", but {count} instances do not resolve {epsilon:g}; {max(needed, count + 1)} could"
    return DesignDepth(depth=first, certain=certain, epsilon=epsilon, message=message)

"""Spreading of an operator: sizes and ends of its Pauli strings, and the velocity and width of its front.

Distributions come from the Pauli weights of one evolved operator. The front is fitted to 1 - F against distance and
depth, averaged over instances, by

    1 - F = a/2 erfc((r - r0 - v L) / (s sqrt(2 L)))

with the velocity v in sites a layer, the front s in sites a square root of a layer and a shift r0 of about one site.
Depths of one instance are correlated, so errors come from leaving out whole instances.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import BoolArray, FloatArray
from rcbench.errors import InputError

LEAST_DEPTHS = 3
LEAST_POINTS = 6
LEAST_INSTANCES = 3
STILL = 1e-6  # scatter between instances below which a point is exact, as ahead of the light cone


def occupation_weights(weights: FloatArray) -> FloatArray:
    """(2,) * n share of the strings that are trivial (0) or not (1) on each qubit, from Pauli weights (4,) * n."""
    table = weights.astype(np.float64)
    table /= table.sum()
    n = table.ndim
    for qubit in range(n):
        view = table.reshape(2**qubit, 4, -1)
        table = np.stack([view[:, 0], view[:, 1:].sum(axis=1)], axis=1)
    return table.reshape((2,) * n)


def size_distribution(weights: FloatArray) -> FloatArray:
    """(n + 1,) share of the strings of each size, the number of qubits where a string is not the identity.

    Args:
        weights: (4,) * n as `paulis.pauli_weights`.

    Source: Roberts, Stanford and Streicher, JHEP 06 (2018) 122, arXiv:1802.02633 (from memory).
    """
    shares = occupation_weights(weights)
    sizes = np.indices(shares.shape, dtype=np.int8).sum(axis=0, dtype=np.int64)
    counts: FloatArray = np.bincount(sizes.ravel(), weights=shares.ravel(), minlength=shares.ndim + 1).astype(
        np.float64
    )
    return counts


def operator_size(weights: FloatArray) -> float:
    """Mean size; (3n/4) 4^n / (4^n - 1) when fully scrambled. Arguments as `size_distribution`."""
    distribution = size_distribution(weights)
    return float(distribution @ np.arange(len(distribution)))


def support(weights: FloatArray) -> FloatArray:
    """(n,) share of the strings that are not trivial at each qubit. Arguments as `size_distribution`."""
    shares = occupation_weights(weights)
    axes = range(shares.ndim)
    return np.array([shares.sum(axis=tuple(a for a in axes if a != axis))[1] for axis in axes])


def end_density(weights: FloatArray, end: str = "right") -> FloatArray:
    """(n,) share of the strings whose last non-trivial qubit is each one; the identity string counts nowhere.

    Args:
        weights: as `size_distribution`. end: "right" for the highest qubit, "left" for the lowest.
    Raises:
        InputError: another word.

    Source: Nahum, Vijay and Haah, PRX 8, 021014 (2018), arXiv:1705.08975.
    """
    if end not in ("right", "left"):
        raise InputError("end", end, "right or left")
    shares = occupation_weights(weights)
    n = shares.ndim
    if end == "left":
        shares = shares.transpose(range(n - 1, -1, -1))
    # trivial on all qubits from x on, for every x
    # the last qubits vary fastest, so a string trivial from x on has an index that 2^(n - x) divides
    flat = np.ascontiguousarray(shares).ravel()
    beyond = np.array([flat[:: 2 ** (n - x)].sum() for x in range(n + 1)])
    density = np.diff(beyond)
    return density[::-1] if end == "left" else density


@dataclass(frozen=True, slots=True, kw_only=True)
class FrontFit:
    """A fitted front.

    Args:
        velocity: sites a layer; velocity_error: its standard error, 0 where it is not known.
        width: standard deviation of the front in sites after one layer, growing as its square root; width_error.
        shift: r0 in sites. height: a, the plateau of 1 - F behind the front.
        misfit: root mean square of the residuals of 1 - F. chi_square: sum of squared residuals over their errors a
            degree of freedom, of the points that scatter between instances, NaN without errors; points are correlated
            and the law holds for many layers, so 1 is a guide and no exact target.
        points: used by the fit. instances: behind the errors.
    """

    velocity: float
    velocity_error: float
    width: float
    width_error: float
    shift: float
    height: float
    misfit: float
    chi_square: float
    points: int
    instances: int


def _front(inputs: tuple[FloatArray, FloatArray], v: float, r0: float, s: float, a: float) -> FloatArray:
    from scipy.special import erfc

    distance, depth = inputs
    return np.asarray(a / 2 * erfc((distance - r0 - v * depth) / (abs(s) * np.sqrt(2 * depth))))


def _window(mean: FloatArray, depths: FloatArray, distances: FloatArray) -> BoolArray:
    """All points of the depths at which the front has left its site and not yet met the last one."""
    under_way = (depths > 0) & (mean.max(axis=1) > 0.5) & (mean[:, -1] < 0.5)
    use: BoolArray = under_way[:, None] & (distances > 0)
    return use


def _solve(mean: FloatArray, inputs: tuple[FloatArray, FloatArray], use: BoolArray, start: FloatArray) -> FloatArray:
    from scipy.optimize import curve_fit

    limits = ([0.0, -10.0, 0.02, 0.2], [10.0, 10.0, 20.0, 2.0])
    found, _ = curve_fit(_front, inputs, mean[use], p0=start, bounds=limits, maxfev=20000)
    found[2] = abs(found[2])
    return np.asarray(found)


def fit_front(
    growth: FloatArray, depths: Sequence[int], distances: Sequence[float], *, first_depth: int = 1
) -> FrontFit:
    """Butterfly velocity and front width from 1 - F.

    Args:
        growth: (instances, depths, sites) 1 - F on one side of the operator, or (depths, sites) of an exact average.
        depths: layers, rising. distances: sites from the operator, rising. first_depth: shallower ones are left out.
    Returns:
        The fit; errors by a jackknife over instances where there are three or more.
    Raises:
        InputError: shapes that do not fit, or too few depths or points within the front: says what would work.

    Source: Nahum, Vijay and Haah, PRX 8, 021014 (2018), arXiv:1705.08975; von Keyserlingk et al., PRX 8, 021013 (2018).
    """
    growth = np.asarray(growth, dtype=np.float64)
    samples = growth[None] if growth.ndim == 2 else growth
    if samples.ndim != 3 or samples.shape[1:] != (len(depths), len(distances)):
        allowed = f"(instances, {len(depths)} depths, {len(distances)} distances)"
        raise InputError("growth", growth.shape, allowed)
    keep = np.asarray(depths) >= max(first_depth, 1)
    layer, place = np.asarray(depths, dtype=np.float64)[keep], np.asarray(distances, dtype=np.float64)
    samples = samples[:, keep]
    mean = samples.mean(axis=0)
    use = _window(mean, layer, place) if mean.size else np.zeros(mean.shape, dtype=bool)
    seen = int(use.any(axis=1).sum())
    if seen < LEAST_DEPTHS or use.sum() < LEAST_POINTS:
        raise InputError(
            "front",
            f"{seen} depths at which the front is under way",
            f"{LEAST_DEPTHS} depths or more before the front meets the end of the line, and {LEAST_POINTS} points: "
            "take more depths below 1.6 times the distance to the end, or a longer line with the operator at its edge",
        )
    grid = np.meshgrid(place, layer)
    inputs = (grid[0][use], grid[1][use])
    found = _solve(mean, inputs, use, np.array([0.6, 0.5, 0.8, 1.0]))
    residuals = mean[use] - _front(inputs, *found)
    count = len(samples)
    errors, chi = np.zeros(4), float("nan")
    if count >= LEAST_INSTANCES:
        total = samples.sum(axis=0)
        left_out = np.array([_solve((total - one) / (count - 1), inputs, use, found) for one in samples])
        errors = np.sqrt((count - 1) / count * np.square(left_out - left_out.mean(axis=0)).sum(axis=0))
        scatter = samples.std(axis=0, ddof=1)[use] / np.sqrt(count)
        moving = scatter > STILL
        chi = float(np.square(residuals[moving] / scatter[moving]).sum() / max(int(moving.sum()) - 4, 1))
    return FrontFit(
        velocity=float(found[0]),
        velocity_error=float(errors[0]),
        width=float(found[2]),
        width_error=float(errors[2]),
        shift=float(found[1]),
        height=float(found[3]),
        misfit=float(np.sqrt(np.square(residuals).mean())),
        chi_square=chi,
        points=int(use.sum()),
        instances=count,
    )

"""Frame potentials: Haar unitaries and states, the Clifford group, and the spread of the estimator.

The k-th frame potential of an ensemble of unitaries is the mean of |tr U^dag V|^(2k) over independent members; Haar
has the least. All values here are exact counts.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from math import ceil, comb, factorial, sqrt

from rcbench.errors import InputError
from rcbench.reference.sizes import whole

_MOST_BOXES = 40  # 37 338 partitions, a second; each 10 more boxes cost ten times as much


def unitary(k: int, dimension: int) -> int:
    """k-th frame potential of Haar unitaries: the permutations of k with no rising subsequence longer than d.

    The sum of f^2 over the partitions of k with at most d rows, f the number of standard tableaux: k! for k <= d.

    Args:
        k: 0 or more, at most 40 where it is larger than the dimension. dimension: d, 1 or more.
    Raises:
        InputError: values outside these.

    Source: Rains, Electron. J. Combin. 5, R12 (1998); Gross, Audenaert and Eisert, J. Math. Phys. 48, 052104 (2007),
    quant-ph/0611002; Scott, J. Phys. A 41, 055308 (2008) (the last from memory).
    """
    k, d = whole("k", k, 0), whole("dimension", dimension, 1)
    if k <= d:
        return factorial(k)
    if d == 2:
        return comb(2 * k, k) // (k + 1)  # Catalan numbers
    whole("k", k, 0, _MOST_BOXES, f" (for dimension {d}; any k up to the dimension)")
    return sum(_tableaux(rows) ** 2 for rows in _partitions(k, k, d))


def _partitions(total: int, largest: int, rows: int) -> Iterator[tuple[int, ...]]:
    """Partitions of a number into at most `rows` parts, none above `largest`, each falling."""
    if total == 0:
        yield ()
    elif rows > 0:
        for first in range(min(total, largest), (total - 1) // rows, -1):
            for rest in _partitions(total - first, first, rows - 1):
                yield (first, *rest)


def _tableaux(rows: tuple[int, ...]) -> int:
    """Standard Young tableaux of a shape, by the formula of Frobenius."""
    shifted = [row + len(rows) - 1 - place for place, row in enumerate(rows)]
    top = factorial(sum(rows))
    for place, a in enumerate(shifted):
        for b in shifted[place + 1 :]:
            top *= a - b
    bottom = 1
    for a in shifted:
        bottom *= factorial(a)
    return top // bottom


def state(k: int, dimension: int) -> float:
    """k-th frame potential of Haar states, the mean of |<psi|phi>|^(2k): 1 / binomial(D + k - 1, k).

    Raises:
        InputError: k below 0, dimension below 1.

    Source: Scott, J. Phys. A 41, 055308 (2008) (from memory); the dimension of the symmetric space.
    """
    return 1 / comb(whole("dimension", dimension, 1) + whole("k", k, 0) - 1, k) if k else 1.0


def clifford_order(n_qubits: int) -> int:
    """Number of n-qubit Cliffords up to phase: 2^(n^2 + 2n) times the product of 4^j - 1 over j from 1 to n.

    Raises:
        InputError: n_qubits below 1.

    Source: Zhu, Phys. Rev. A 96, 062336 (2017), arXiv:1510.02619.
    """
    n = whole("n_qubits", n_qubits, 1, 1000)
    order = 1 << (n * n + 2 * n)
    for j in range(1, n + 1):
        order *= 4**j - 1
    return order


def clifford(k: int, n_qubits: int) -> int:
    """k-th frame potential of the n-qubit Clifford group, which is a 3-design and no 4-design.

    The orbits of (k - 1)-tuples of binary vectors of length 2n under the symplectic group. By Witt's theorem an orbit
    is a set of linear relations (a quotient space of dimension r) and an alternating form on the quotient that fits:
    of rank 2s with r - s <= n. For n >= k - 1 it is the product of 2^j + 1 over j from 0 to k - 2.

    Raises:
        InputError: k outside 1 to 60, n_qubits below 1.

    Source: Zhu, Kueng, Grassl and Gross, arXiv:1609.08172; Webb, arXiv:1510.02769; Gross, Nezami and Walter,
    arXiv:1712.08628 (the last from memory).
    """
    k, n = whole("k", k, 1, 60), whole("n_qubits", n_qubits, 1)
    return sum(
        _subspaces(k - 1, r) * _alternating_forms(r, 2 * s) for r in range(k) for s in range(r // 2 + 1) if r - s <= n
    )


def _subspaces(n: int, r: int) -> int:
    """Subspaces of dimension r of binary vectors of length n."""
    value = Fraction(1)
    for i in range(r):
        value *= Fraction((1 << (n - i)) - 1, (1 << (i + 1)) - 1)
    return int(value)


def _alternating_forms(r: int, rank: int) -> int:
    """Alternating bilinear forms of a rank on binary vectors of length r (MacWilliams, 1969; from memory)."""
    value = Fraction(1)
    for i in range(1, rank // 2 + 1):
        value *= Fraction(4 ** (i - 1), 4**i - 1)
    for i in range(rank):
        value *= (1 << (r - i)) - 1
    return int(value)


def haar_estimator_variance(k: int, dimension: int, instances: int) -> float:
    """Variance of the unbiased estimator of the k-th frame potential from independent Haar unitaries.

    2 / (N (N - 1)) (F(2k) - F(k)^2): pairs behave as independent although they share unitaries. Holds for Haar draws
    only: an ensemble that is not invariant has a further term of the order of 1 / N.

    Args:
        k: 1 or more. dimension: d, 1 or more. instances: N unitaries, all pairs i != j in the mean.
    Raises:
        InputError: values outside these; 2k above 40 where it is larger than the dimension.

    Source: U-statistic with a degenerate kernel; checked by sampling.
    """
    k, n = whole("k", k, 1), whole("instances", instances, 2)
    return 2 * (unitary(2 * k, dimension) - unitary(k, dimension) ** 2) / (n * (n - 1))


def instances_needed(k: int, dimension: int, relative_error: float) -> int:
    """Haar unitaries that give the k-th frame potential within a relative standard error; at least 2.

    Raises:
        InputError: relative_error not above 0; others as `haar_estimator_variance`.

    Source: as `haar_estimator_variance`.
    """
    if not relative_error > 0:
        raise InputError("relative_error", relative_error, "a number above 0")
    value = unitary(whole("k", k, 1), dimension)
    pairs = (unitary(2 * k, dimension) / value**2 - 1) / relative_error**2
    return max(2, ceil((1 + sqrt(1 + 8 * pairs)) / 2))


def with_diagonal(frame_potential: float, k: int, dimension: int, instances: int) -> float:
    """Mean of the estimator that wrongly keeps the pairs i = j: F (N - 1) / N + d^(2k) / N.

    Raises:
        InputError: k or dimension or instances below 1.

    Source: elementary.
    """
    n = whole("instances", instances, 1)
    diagonal: int = whole("dimension", dimension, 1) ** (2 * whole("k", k, 1))
    return (frame_potential * (n - 1) + diagonal) / n

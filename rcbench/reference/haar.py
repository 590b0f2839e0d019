"""Haar-random states and unitaries: what a perfect scrambler shows on average.

States: `purity`, `purity_variance`, `vonneumann_entropy`, `renyi2_entropy`, `tmi_vonneumann`, `tmi_renyi2`.
Unitaries, as Choi states with n input and n output qubits: `operator_purity`, `operator_tmi_renyi2`,
`operator_tmi_halves`, `operator_tmi_bound`. Correlators and operators: `otoc`, `otoc_of`, `otoc_spread`,
`average_otoc`, `operator_size`, `operator_size_distribution`.

Entropies are in nats. Sizes are numbers of qubits; whole numbers are exact inside, so 1000 qubits are served. Every
call costs microseconds.
"""

from __future__ import annotations

from math import comb, log, sqrt

import numpy as np
from scipy.special import digamma

from rcbench.arrays import ComplexArray, FloatArray
from rcbench.errors import InputError
from rcbench.reference.sizes import MOST_QUBITS, between, whole


def _dimensions(n_region: int, n_qubits: int) -> tuple[int, int]:
    """Dimensions of the smaller and of the larger part of n_qubits cut in two."""
    n_qubits = whole("n_qubits", n_qubits, 1, MOST_QUBITS)
    n_region = whole("n_region", n_region, 0, n_qubits)
    return 1 << min(n_region, n_qubits - n_region), 1 << max(n_region, n_qubits - n_region)


def purity(n_region: int, n_qubits: int) -> float:
    """Mean of tr rho_A^2 over pure Haar states of n_qubits, A holding n_region of them.

    (d_A + d_B) / (d_A d_B + 1), with the dimensions d of A and of the rest.

    Raises:
        InputError: n_qubits outside 1 to 1000, or n_region outside 0 to n_qubits.

    Source: Lubkin, J. Math. Phys. 19, 1028 (1978) (from memory).
    """
    a, b = _dimensions(n_region, n_qubits)
    return (a + b) / (a * b + 1)


def purity_variance(n_region: int, n_qubits: int) -> float:
    """Variance of tr rho_A^2 over pure Haar states of n_qubits, A holding n_region of them.

    2 (d_A^2 - 1) (d_B^2 - 1) / ((D + 1)^2 (D + 2) (D + 3)), D = d_A d_B.

    Raises:
        InputError: as `purity`.

    Source: Scott and Caves, J. Phys. A 36, 9553 (2003) (from memory).
    """
    a, b = _dimensions(n_region, n_qubits)
    d = a * b
    return 2 * (a * a - 1) * (b * b - 1) / ((d + 1) ** 2 * (d + 2) * (d + 3))


def vonneumann_entropy(n_region: int, n_qubits: int) -> float:
    """Mean von Neumann entropy of a region of a pure Haar state, in nats: Page's value.

    The sum of 1/k over k from d_B + 1 to D, less (d_A - 1) / (2 d_B), for d_A <= d_B; about ln d_A - d_A / (2 d_B).

    Raises:
        InputError: as `purity`.

    Source: Page, Phys. Rev. Lett. 71, 1291 (1993), gr-qc/9305007; proved in Sen, Phys. Rev. Lett. 77, 1 (1996).
    """
    a, b = _dimensions(n_region, n_qubits)
    harmonic = digamma(float(a * b) + 1) - digamma(float(b) + 1)
    return float(harmonic) - (a - 1) / (2 * b)


def renyi2_entropy(n_region: int, n_qubits: int, *, annealed: bool = False) -> float:
    """Renyi-2 entropy of a region of a pure Haar state, in nats.

    Annealed: -ln of the mean purity P, exact. Otherwise the mean of -ln purity to second order, P's variance over
    2 P^2 more, within 0.002 nats from four qubits up. Equal halves lack ln 2 of the maximum, not Page's 1/2.

    Raises:
        InputError: as `purity`.

    Source: Lubkin, J. Math. Phys. 19, 1028 (1978); Scott and Caves, J. Phys. A 36, 9553 (2003) (both from memory); the
    expansion is elementary.
    """
    a, b = _dimensions(n_region, n_qubits)
    d = a * b
    value = log(d + 1) - log(a + b)
    if annealed:
        return value
    return value + (a * a - 1) * (b * b - 1) / ((d + 2) * (d + 3) * (a + b) ** 2)


def _tmi(entropies: list[float], n_a: int, n_b: int, n_c: int) -> float:
    """Tripartite mutual information from the entropy of a region by its size."""
    one = entropies[n_a] + entropies[n_b] + entropies[n_c]
    return one - entropies[n_a + n_b] - entropies[n_b + n_c] - entropies[n_a + n_c] + entropies[n_a + n_b + n_c]


def _check_three(n_a: int, n_b: int, n_c: int, n_qubits: int) -> None:
    n_qubits = whole("n_qubits", n_qubits, 1, MOST_QUBITS)
    sizes = [whole(key, size, 1, n_qubits) for key, size in (("n_a", n_a), ("n_b", n_b), ("n_c", n_c))]
    if sum(sizes) > n_qubits:
        raise InputError("n_a + n_b + n_c", sum(sizes), f"at most n_qubits = {n_qubits}")


def tmi_vonneumann(n_a: int, n_b: int, n_c: int, n_qubits: int) -> float:
    """Mean tripartite mutual information of three disjoint regions of a pure Haar state, von Neumann, in nats.

    I3 = S_A + S_B + S_C - S_AB - S_BC - S_AC + S_ABC with Page's means: exact. Four equal quarters tend to
    -(n/2) ln 2 + 3/2; the offset matters at every size in use.

    Args:
        n_a, n_b, n_c: qubits of each region, 1 or more. n_qubits: of the state; together at most n_qubits.
    Raises:
        InputError: sizes outside these.

    Source: Page, Phys. Rev. Lett. 71, 1291 (1993); I3 as in Hosur, Qi, Roberts and Yoshida, arXiv:1511.04021.
    """
    _check_three(n_a, n_b, n_c, n_qubits)
    return _tmi([vonneumann_entropy(size, n_qubits) for size in range(n_qubits + 1)], n_a, n_b, n_c)


def tmi_renyi2(n_a: int, n_b: int, n_c: int, n_qubits: int, *, annealed: bool = False) -> float:
    """Tripartite mutual information of three disjoint regions of a pure Haar state, Renyi-2, in nats.

    Combines `renyi2_entropy`, annealed or to second order. Four equal quarters tend to -(n/2) ln 2 + 3 ln 2.

    Args, errors: as `tmi_vonneumann`.

    Source: as `renyi2_entropy` and `tmi_vonneumann`.
    """
    _check_three(n_a, n_b, n_c, n_qubits)
    sizes = range(n_qubits + 1)
    return _tmi([renyi2_entropy(size, n_qubits, annealed=annealed) for size in sizes], n_a, n_b, n_c)


def operator_purity(n_in: int, n_out: int, n_qubits: int) -> float:
    """Mean of tr rho_AC^2 of the Choi state of a Haar unitary: A holds n_in inputs, C holds n_out outputs.

    [d_B d_D + d_A d_C - (d_A d_D + d_B d_C) / d] / (d^2 - 1), B and D the other inputs and outputs, d = 2^n.

    Raises:
        InputError: n_qubits outside 1 to 1000, n_in or n_out outside 0 to n_qubits.

    Source: Hosur, Qi, Roberts and Yoshida, JHEP 02 (2016) 004, arXiv:1511.04021.
    """
    n_qubits = whole("n_qubits", n_qubits, 1, MOST_QUBITS)
    a, c = (1 << whole(key, size, 0, n_qubits) for key, size in (("n_in", n_in), ("n_out", n_out)))
    d = 1 << n_qubits
    b, e = d // a, d // c
    return ((b * e + a * c) * d - (a * e + b * c)) / (d * (d * d - 1))


def operator_tmi_renyi2(n_in: int, n_out: int, n_qubits: int) -> float:
    """Annealed Renyi-2 tripartite mutual information I3(A:C:D) of the Choi state of a Haar unitary, in nats.

    n ln 2 + ln P_AC + ln P_AD with mean purities P: n_in inputs A, n_out outputs C, the other outputs D. Equal halves
    tend to (2 - n) ln 2, one against one to ln(7/16); both stay above `operator_tmi_bound`.

    Raises:
        InputError: as `operator_purity`.

    Source: Hosur, Qi, Roberts and Yoshida, JHEP 02 (2016) 004, arXiv:1511.04021.
    """
    both = operator_purity(n_in, n_out, n_qubits), operator_purity(n_in, n_qubits - n_out, n_qubits)
    return n_qubits * log(2) + log(both[0]) + log(both[1])


def operator_tmi_halves(n_qubits: int) -> float:
    """Large-n von Neumann I3(A:C:D) of the Choi state of a Haar unitary at equal halves, in nats: 1 - n ln 2.

    Each of the two half-and-half cuts lacks Page's 1/2. At 6 qubits the mean lies 0.02 nats below.

    Raises:
        InputError: n_qubits odd or outside 2 to 1000.

    Source: Page, Phys. Rev. Lett. 71, 1291 (1993), applied to both cuts.
    """
    if whole("n_qubits", n_qubits, 2, MOST_QUBITS) % 2:
        raise InputError("n_qubits", n_qubits, "an even number, for equal halves")
    return 1 - n_qubits * log(2)


def operator_tmi_bound(n_in: int, n_out: int, n_qubits: int) -> float:
    """Least I3(A:C:D) that any unitary can have, in nats: -2 ln 2 times the size of the smallest of A, B, C, D.

    Raises:
        InputError: as `operator_purity`.

    Source: Hosur, Qi, Roberts and Yoshida, JHEP 02 (2016) 004, arXiv:1511.04021.
    """
    n_qubits = whole("n_qubits", n_qubits, 1, MOST_QUBITS)
    n_in, n_out = whole("n_in", n_in, 0, n_qubits), whole("n_out", n_out, 0, n_qubits)
    return -2 * log(2) * min(n_in, n_qubits - n_in, n_out, n_qubits - n_out)


def average_otoc(operator_purity_ac: float, n_in: int, n_out: int, n_qubits: int) -> float:
    """OTOC averaged over all Paulis on the inputs A and all on the outputs D, identities included, of any unitary.

    d / (d_A d_D) tr rho_AC^2, where C holds n_out outputs and D the others; so that the Renyi-2 I3(A:C:D) is
    2 ln d_A + ln Delta(A, C) + ln Delta(A, D). Equals the projection probability of `recovery`.

    Raises:
        InputError: sizes as `operator_purity`, or a purity outside 0 to 1.

    Source: Hosur, Qi, Roberts and Yoshida, arXiv:1511.04021; Yoshida and Kitaev, arXiv:1710.03363.
    """
    n_qubits = whole("n_qubits", n_qubits, 1, MOST_QUBITS)
    n_in, n_out = whole("n_in", n_in, 0, n_qubits), whole("n_out", n_out, 0, n_qubits)
    return between("operator_purity_ac", operator_purity_ac, 0, 1) * 2.0 ** (n_out - n_in)


def otoc(n_qubits: int) -> float:
    """Mean of (1/d) tr(W(t) V W(t) V) over Haar unitaries, W and V traceless and squaring to 1: -1 / (d^2 - 1).

    The mean over the Clifford group is the same, although each of its values is +1 or -1.

    Raises:
        InputError: n_qubits outside 1 to 1000.

    Source: Roberts and Yoshida, JHEP 04 (2017) 121, arXiv:1610.04903.
    """
    return -1 / ((1 << 2 * whole("n_qubits", n_qubits, 1, MOST_QUBITS)) - 1)


def otoc_spread(n_qubits: int) -> float:
    """Standard deviation of the OTOC over Haar unitaries for large d: sqrt(2) / d. At 2 qubits it is 10 % more.

    Raises:
        InputError: n_qubits outside 1 to 1000.

    Source: second moment of a Haar-random operator; checked by sampling.
    """
    return sqrt(2) / 2.0 ** whole("n_qubits", n_qubits, 1, MOST_QUBITS)


def otoc_of(w: ComplexArray, v: ComplexArray) -> complex:
    """Mean of (1/d) tr(U^dag W U V U^dag W U V) over Haar unitaries, for any two operators.

    Args:
        w, v: (d, d), d = 2 or more; a product of operators on two regions is its Kronecker product.
    Raises:
        InputError: shapes that differ or are not square.

    Source: Roberts and Yoshida, JHEP 04 (2017) 121, arXiv:1610.04903; Cotler et al., arXiv:1706.05400.
    """
    if w.shape != v.shape or w.ndim != 2 or w.shape[0] != w.shape[1] or len(w) < 2:
        raise InputError("w, v", (w.shape, v.shape), "two square matrices of the same size, 2 or more")
    d = len(w)
    w1, v1 = complex(np.trace(w)), complex(np.trace(v))
    w2, v2 = complex(np.sum(w * w.T)), complex(np.sum(v * v.T))
    return (w1**2 * v2 + w2 * v1**2 - (w2 * v2 + w1**2 * v1**2) / d) / (d * (d * d - 1))


def operator_size(n_qubits: int) -> float:
    """Mean number of qubits on which a fully scrambled operator differs from 1: (3n/4) 4^n / (4^n - 1).

    Raises:
        InputError: n_qubits outside 1 to 1000.

    Source: uniform over the non-identity Pauli strings; Nahum, Vijay and Haah, PRX 8, 021014 (2018).
    """
    n_qubits = whole("n_qubits", n_qubits, 1, MOST_QUBITS)
    strings = 1 << 2 * n_qubits
    return 3 * n_qubits * strings / (4 * (strings - 1))


def operator_size_distribution(n_qubits: int) -> FloatArray:
    """(n + 1,) probability of each size 0 to n of a fully scrambled operator: binomial(n, 3/4) without size 0.

    Raises:
        InputError: n_qubits outside 1 to 1000.

    Source: as `operator_size`.
    """
    n = whole("n_qubits", n_qubits, 1, MOST_QUBITS)
    return np.array([0.0, *(comb(n, k) * 3**k / (4**n - 1) for k in range(1, n + 1))])

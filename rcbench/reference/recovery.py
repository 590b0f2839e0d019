"""Hayden-Preskill recovery by a probabilistic decoder: how well a scrambled message comes back.

A message A (n_message qubits, maximally entangled with a reference) and the rest go through U; the decoder runs U* on
its own copies and projects n_read output qubits D and their copies on Bell pairs. P is the probability that the
projection succeeds, F the fidelity of the recovered Bell pairs, P F = 1 / d_A^2 for every unitary.
"""

from __future__ import annotations

from rcbench.reference.sizes import MOST_QUBITS, between, whole


def projection_probability(n_message: int, n_read: int, n_qubits: int) -> float:
    """Mean of P over Haar unitaries: [a^2 + d^2 - 1 - (a^2 - 1)(d^2 - 1) / (D^2 - 1)] / (a^2 d^2).

    a, d and D are the dimensions of the message, of the qubits read and of all.

    Raises:
        InputError: n_qubits outside 1 to 1000, the others outside 1 to n_qubits.

    Source: Yoshida and Kitaev, arXiv:1710.03363; the exact mean from Hosur et al., arXiv:1511.04021.
    """
    n = whole("n_qubits", n_qubits, 1, MOST_QUBITS)
    a, d = (1 << 2 * whole(key, size, 1, n) for key, size in (("n_message", n_message), ("n_read", n_read)))
    full = (1 << 2 * n) - 1
    return ((a + d - 1) * full - (a - 1) * (d - 1)) / (a * d * full)


def recovery_fidelity(projection: float, n_message: int) -> float:
    """F of the recovered Bell pairs for a unitary with projection probability P: 1 / (d_A^2 P), for every instance.

    Args:
        projection: P, from 1 / d_A^2 (perfect recovery, or all noise) to 1 (nothing scrambled). n_message: 1 or more.
    Raises:
        InputError: values outside these.

    Source: Yoshida and Kitaev, arXiv:1710.03363.
    """
    a = 1 << 2 * whole("n_message", n_message, 1, MOST_QUBITS // 2)
    return 1 / (a * between("projection", projection, (1 - 1e-9) / a, 1 + 1e-9))


def teleported_fidelity(recovery: float, n_message: int) -> float:
    """Mean fidelity of a pure message sent through, from F of the Bell pairs: (d_A F + 1) / (d_A + 1).

    Raises:
        InputError: recovery outside 0 to 1, n_message below 1.

    Source: M., P. and R. Horodecki, Phys. Rev. A 60, 1888 (1999) (from memory).
    """
    a = 1 << whole("n_message", n_message, 1, MOST_QUBITS)
    return (a * between("recovery", recovery, 0, 1) + 1) / (a + 1)


def noisy_projection(projection: float, survival: float, n_read: int) -> float:
    """P under white noise on all outputs and their copies: survival P + (1 - survival) / d_D^2.

    Args:
        projection: P of the unitary, 0 to 1. survival: 0 to 1. n_read: qubits projected, 1 or more.
    Raises:
        InputError: values outside these.

    Source: Yoshida and Yao, PRX 9, 011006 (2019), arXiv:1803.10772; formula re-derived for this noise.
    """
    s = between("survival", survival, 0, 1)
    return s * between("projection", projection, 0, 1) + (1 - s) / (1 << 2 * whole("n_read", n_read, 1, 500))


def noise_parameter(survival: float, n_read: int) -> float:
    """d_A^2 P F under white noise: survival + (1 - survival) / d_D^2. It is 1 for every unitary, less with noise.

    Args:
        survival: 0 to 1. n_read: qubits projected, 1 or more.
    Raises:
        InputError: values outside these.

    Source: Yoshida and Yao, PRX 9, 011006 (2019), arXiv:1803.10772 (definition from memory); formula re-derived.
    """
    return noisy_projection(1, survival, n_read)

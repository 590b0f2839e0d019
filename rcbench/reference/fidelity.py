"""Fidelities of noisy states and operations: conversions, and what white noise leaves of each.

`average` and `entanglement` turn the two fidelities of an operation into each other; `after_pauli` is what one error
leaves of a scrambled state; `white_noise_*` are exact for rho = survival |psi><psi| + (1 - survival) 1 / D.
"""

from __future__ import annotations

from rcbench.reference.sizes import between, whole


def average(entanglement_fidelity: float, dimension: int) -> float:
    """Average fidelity of an operation over Haar-random pure inputs: (d F_e + 1) / (d + 1).

    Args:
        entanglement_fidelity: 0 to 1; |tr U^dag V|^2 / d^2 where V was run in place of U. dimension: d, 2 or more.
    Raises:
        InputError: values outside these.

    Source: M., P. and R. Horodecki, Phys. Rev. A 60, 1888 (1999); Nielsen, Phys. Lett. A 303, 249 (2002) (from memory).
    """
    d = whole("dimension", dimension, 2)
    return (d * between("entanglement_fidelity", entanglement_fidelity, 0, 1) + 1) / (d + 1)


def entanglement(average_fidelity: float, dimension: int) -> float:
    """Entanglement fidelity of an operation from its average fidelity: ((d + 1) F_avg - 1) / d.

    Args:
        average_fidelity: 1 / (d + 1) to 1. dimension: d, 2 or more.
    Raises:
        InputError: values outside these.

    Source: as `average`.
    """
    d = whole("dimension", dimension, 2)
    return ((d + 1) * between("average_fidelity", average_fidelity, 1 / (d + 1), 1) - 1) / d


def after_pauli(dimension: int) -> float:
    """Mean of |<psi|P|psi>|^2 over Haar states for a Pauli P other than 1: 1 / (D + 1).

    The fidelity that a single error leaves of a scrambled state, and the variance of any Pauli's expectation.

    Raises:
        InputError: dimension below 2.

    Source: second moment of Haar states, as in Roberts and Yoshida, JHEP 04 (2017) 121, arXiv:1610.04903.
    """
    return 1 / (whole("dimension", dimension, 2) + 1)


def white_noise_fidelity(survival: float, dimension: int) -> float:
    """<psi|rho|psi> under white noise: survival + (1 - survival) / D.

    Raises:
        InputError: survival outside 0 to 1, dimension below 2.

    Source: elementary.
    """
    s, d = between("survival", survival, 0, 1), whole("dimension", dimension, 2)
    return s + (1 - s) / d


def white_noise_purity(survival: float, dimension: int) -> float:
    """Tr rho^2 under white noise: survival^2 + (1 - survival^2) / D.

    Raises:
        InputError: as `white_noise_fidelity`.

    Source: elementary.
    """
    square = between("survival", survival, 0, 1) ** 2
    return square + (1 - square) / whole("dimension", dimension, 2)


def white_noise_xeb(survival: float, dimension: int) -> float:
    """Linear cross-entropy under white noise, averaged over Haar states: survival (D - 1) / (D + 1).

    Over its own ideal value it is `survival` for every single state.

    Raises:
        InputError: as `white_noise_fidelity`.

    Source: linearity, and `porter_thomas.linear_xeb`.
    """
    d = whole("dimension", dimension, 2)
    return between("survival", survival, 0, 1) * (d - 1) / (d + 1)

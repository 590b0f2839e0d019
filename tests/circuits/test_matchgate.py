"""Matchgate circuits are free fermions: Majorana operators stay linear, Gaussian states stay Gaussian."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_cases import HEAVY_HEX, make_device, unitary
from model_cases import NATIVES, at, draw, evolved, line, mean_trace, operator

from rcbench.circuits.families.matchgate import gates
from rcbench.engine.state import final_state
from rcbench.errors import InputError
from rcbench.randomness import Draw


def majoranas(n: int) -> list[np.ndarray]:
    return [operator("Z" * site + letter + "I" * (n - site - 1)) for site in range(n) for letter in ("X", "Y")]


def covariance(state: np.ndarray) -> np.ndarray:
    """Real antisymmetric (2n, 2n): -i <gamma_a gamma_b> off the diagonal."""
    n = len(state).bit_length() - 1
    moved = np.array([one @ state for one in majoranas(n)])
    return np.imag(moved.conj() @ moved.T) * (1 - np.eye(2 * n))


@pytest.mark.parametrize("native", NATIVES)
def test_each_majorana_operator_becomes_a_sum_of_them(native):
    """Terhal and DiVincenzo, Phys. Rev. A 65, 032325 (2002): evolution by a rotation SO(2n)."""
    n = 4
    circuit, basis = draw("matchgate", line(n, native), 7), majoranas(n)
    rotation = np.array([[mean_trace(one, evolved(circuit, two)) for one in basis] for two in basis])
    assert np.abs(rotation @ rotation.T - np.eye(2 * n)).max() < 1e-12
    assert np.linalg.det(rotation) == pytest.approx(1)
    assert np.count_nonzero(np.abs(rotation) > 1e-3) > 2 * n * n  # and not a trivial one


def test_a_gate_turns_its_four_majorana_operators_by_a_haar_random_rotation():
    """Entries of Haar SO(4): mean square 1/4, mean fourth power 3/(4 * 6), from the sphere S^3."""
    basis = majoranas(2)
    unitaries = gates(Draw(5, "gates"), 1500)
    moved = np.einsum("mji,ajk,mkl->mail", unitaries.conj(), np.array(basis), unitaries)
    rotation = np.real(np.einsum("mail,bil->mab", moved, np.conj(basis))) / 4
    for power, expected, variance in ((2, 1 / 4, 1 / 8 - 1 / 16), (4, 1 / 8, 105 / 1920 - 1 / 64)):
        deviation = (rotation**power).mean(axis=0) - expected
        assert np.abs(deviation).max() < 4.5 * np.sqrt(variance / 1500)  # 4.5 sigma, 16 entries
    assert np.abs(np.linalg.det(rotation) - 1).max() < 1e-12


@pytest.mark.parametrize("one_qubit", ["none", "alternating"])
def test_gaussian_states_stay_gaussian(one_qubit):
    """A pure state is Gaussian exactly where its covariance matrix squares to -1."""
    for family, depth, gaussian in (("matchgate", 9, True), ("charge-conserving", 9, False)):
        start = "alternating" if family == "charge-conserving" else one_qubit
        matrix = covariance(final_state(draw(family, line(6), depth, one_qubit=start), "complex128", threads=1))
        departure = np.abs(matrix @ matrix + np.eye(12)).max()
        assert departure < 1e-12 if gaussian else departure > 0.1


def test_parity_is_kept_to_rounding():
    u = unitary(draw("matchgate", line(4), 8))
    parity = operator("ZZZZ")
    assert np.abs(u @ parity - parity @ u).max() < 1e-12
    charge = sum(at("Z", site, 4) for site in range(4))
    assert np.abs(u @ charge - charge @ u).max() > 0.1


@pytest.mark.parametrize(
    ("device", "found"),
    [
        (line(5, layout="ring"), "a ring of invented"),
        (make_device("grid", 4, columns=2), "a ring of invented"),
        (make_device("grid", 6, columns=3), "qubits with more than two couplers (1,4)"),
        (make_device("edges", 15, edges=HEAVY_HEX), "qubits with more than two couplers (2,5,8)"),
    ],
)
def test_couplings_other_than_lines_are_refused_by_name(device, found):
    with pytest.raises(InputError) as error:
        draw("matchgate", device, 2)
    assert str(error.value) == (
        f"qubits: found {found!r}; allowed: qubits that are coupled along a line, since elsewhere matchgates are not "
        "free fermions"
    )
    for family in ("product", "dimers"):
        draw("matchgate", device, 2, family=family)


def test_a_line_inside_another_layout_serves():
    broken = make_device("ring", 5, broken_couplers=((1, 2),), gates=(NATIVES["cz"],))
    assert draw("matchgate", broken, 4).two_qubit_gates == 2 * 2 * 4

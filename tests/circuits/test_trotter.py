"""Trotter steps against the exponentials of their definition, and their error against exact diagonalisation."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_cases import make_device, phase_distance, unitary
from model_cases import NATIVES, at, draw, line, made, operator
from scipy.linalg import expm

from rcbench.circuits.families.trotter import terms
from rcbench.engine.state import final_state
from rcbench.reference.hamiltonian import diagonalise, hamiltonian

ISING = {"hamiltonian": "mixed-field-ising", "disorder": 0.5}
XXZ = {"hamiltonian": "xxz", "anisotropy": 0.6, "coupling": 0.8, "disorder": 1.0}


def bond(a, b, n, exact):
    return sum(
        strength * at(letter, a, n) @ at(letter, b, n)
        for letter, strength in (("X", exact.xx), ("Y", exact.yy), ("Z", exact.zz))
    )


def fields(n, exact):
    return sum(exact.x[j] * at("X", j, n) + exact.z[j] * at("Z", j, n) for j in range(n))


@pytest.mark.parametrize("native", NATIVES)
@pytest.mark.parametrize("model", [ISING, XXZ, XXZ | {"field_x": 0.3}], ids=["ising", "xxz", "xxz with field"])
@pytest.mark.parametrize("order", [1, 2])
def test_two_steps_are_the_product_of_their_exponentials(order, model, native):
    n, dt, device = 4, 0.3, line(4, native)
    model = model | {"order": order, "step": dt}
    exact = terms(made("trotter", device, 0, **model))
    odd, even = (sum(bond(a, a + 1, n, exact) for a in range(start, n - 1, 2)) for start in (0, 1))
    h = fields(n, exact)
    if order == 1:
        step = expm(-1j * dt * h) @ expm(-1j * dt * even) @ expm(-1j * dt * odd)
    else:
        half, ends = expm(-0.5j * dt * odd), expm(-0.5j * dt * h)
        step = ends @ half @ expm(-1j * dt * even) @ half @ ends
    layers = 3 if order == 2 and model["hamiltonian"] == "xxz" else 2
    circuit = draw("trotter", device, 2 * layers, one_qubit="none", **model)
    assert phase_distance(unitary(circuit), step @ step) < 1e-10


@pytest.mark.parametrize("layout", ["line", "grid"])
@pytest.mark.parametrize("model", [ISING, XXZ], ids=["ising", "xxz"])
@pytest.mark.parametrize("order", [1, 2])
def test_the_error_at_a_time_falls_as_the_step_to_the_power_of_the_order(order, model, layout):
    """Suzuki, Commun. Math. Phys. 51, 183 (1976): halving the step divides the error by 2 to the order."""
    device = line(6) if layout == "line" else make_device("grid", 6, columns=3)
    exact = terms(made("trotter", device, 0, **model))
    spectrum = diagonalise(hamiltonian(6, exact.couplers, xx=exact.xx, yy=exact.yy, zz=exact.zz, x=exact.x, z=exact.z))
    begin = final_state(draw("trotter", device, 0, one_qubit="haar", **model), "complex128", threads=1)
    expected = spectrum.evolved(begin, [0.0, 0.5])
    assert np.abs(expected[0] - begin).max() < 1e-12
    errors = []
    for dt in (0.05, 0.025, 0.0125):
        facts = model | {"order": order, "step": dt}
        patterns = 2 if layout == "line" else 4
        layers = 2 * patterns - 1 if order == 2 and model["hamiltonian"] == "xxz" else patterns
        circuit = draw("trotter", device, layers * round(0.5 / dt), one_qubit="haar", **facts)
        found = final_state(circuit, "complex128", threads=1)
        overlap = np.vdot(expected[1], found)
        errors.append(np.linalg.norm(found - expected[1] * overlap / abs(overlap)))
    assert errors[0] < 0.3
    assert np.log2(np.array(errors[:-1]) / errors[1:]) == pytest.approx([order] * 2, abs=0.1)


@pytest.mark.parametrize("model", [ISING, XXZ], ids=["ising", "xxz"])
def test_the_listed_terms_are_the_same_hamiltonian(model):
    exact = terms(made("trotter", line(4), 0, **model))
    whole = sum(bond(a, b, 4, exact) for a, b in exact.couplers) + fields(4, exact)
    found = np.zeros((16, 16), dtype=complex)
    for value, text in exact.listed():
        letters = {int(factor[1:]): factor[0] for factor in text.split()}
        found += value * operator("".join(letters.get(site, "I") for site in range(4)))
    assert np.abs(found - whole).max() < 1e-14


def test_xxz_keeps_the_number_of_ones_to_rounding():
    device = line(6, "sqrt-iswap")
    for order, depth in ((1, 20), (2, 30)):
        circuit = draw("trotter", device, depth, hamiltonian="xxz", order=order, step=0.7, disorder=2.0)
        state = final_state(circuit, "complex128", threads=1)
        ones = np.array([bin(index).count("1") for index in range(64)])
        assert float((np.abs(state) ** 2)[ones != 3].sum()) < 1e-13
        assert np.count_nonzero(np.abs(state) ** 2 > 1e-6) > 10

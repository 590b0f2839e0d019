"""Dual-unitary circuits gate by gate; their correlations and OTOC are in tests/published."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_cases import phase_distance, unitary
from model_cases import NATIVES, draw, line, operator
from scipy.linalg import expm

from rcbench.circuits.families.dual_unitary import gate

COUPLINGS = [0.0, 0.2, -0.5, np.pi / 4]


def space_departure(u: np.ndarray) -> float:
    """How far the gate, read from left to right, is from unitary."""
    sideways = u.reshape(2, 2, 2, 2).transpose(0, 2, 1, 3).reshape(4, 4)  # (out a, in a) by (out b, in b)
    return float(np.abs(sideways @ sideways.conj().T - np.eye(4)).max())


@pytest.mark.parametrize("coupling", COUPLINGS)
def test_the_gate_is_the_exponential_of_its_definition(coupling):
    generator = np.pi / 4 * (operator("XX") + operator("YY")) + coupling * operator("ZZ")
    assert np.abs(gate(coupling) - expm(-1j * generator)).max() < 1e-14


@pytest.mark.parametrize("native", NATIVES)
@pytest.mark.parametrize("coupling", COUPLINGS)
@pytest.mark.parametrize("one_qubit", ["haar", "quarter-turns"])
def test_compiled_gates_with_their_locals_are_dual_unitary(coupling, native, one_qubit):
    """Bertini, Kos and Prosen, PRL 123, 210601 (2019), arXiv:1904.02140."""
    u = unitary(draw("dual-unitary", line(2, native), 1, one_qubit=one_qubit, coupling=coupling))
    assert space_departure(u) < 1e-10
    assert space_departure(unitary(draw("dual-unitary", line(2), 2, coupling=0.0))) > 0.1  # two layers are not one gate


def test_the_gate_itself_stands_between_layers_that_are_not_haar():
    device = line(2, "cz")
    product = unitary(draw("dual-unitary", device, 0, one_qubit="azimuth", coupling=0.3))
    circuit = unitary(draw("dual-unitary", device, 1, one_qubit="azimuth", coupling=0.3))
    closing = circuit @ product.conj().T @ gate(0.3).conj().T
    rest = closing.reshape(2, 2, 2, 2).transpose(0, 2, 1, 3).reshape(4, 4)
    assert np.linalg.svd(rest, compute_uv=False)[1] < 1e-10  # a product of one-qubit gates
    haar = draw("dual-unitary", device, 4)
    assert len(haar) < len(draw("dual-unitary", device, 4, one_qubit="azimuth"))
    assert phase_distance(product, np.eye(4)) > 0.1

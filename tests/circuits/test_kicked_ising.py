"""The kicked Ising circuits against the matrices of their definition; their entanglement is in tests/published."""

from __future__ import annotations

import numpy as np
import pytest
from circuit_cases import phase_distance, unitary
from model_cases import NATIVES, at, draw, line, made
from scipy.linalg import expm

from rcbench.circuits.families.kicked_ising import fields
from rcbench.circuits.gates import KINDS


def floquet(n, bonds, h, coupling=np.pi / 4, kick=np.pi / 4):
    zz = sum(at("Z", a, n) @ at("Z", b, n) for a, b in bonds)
    longitudinal = sum(value * at("Z", site, n) for site, value in enumerate(h))
    transverse = sum(at("X", site, n) for site in range(n))
    return expm(-1j * kick * transverse) @ expm(-1j * (coupling * zz + longitudinal))


@pytest.mark.parametrize("layout", ["line", "ring"])
@pytest.mark.parametrize("native", NATIVES)
@pytest.mark.parametrize(
    "model", [{}, {"coupling_detuning": 0.1, "kick_detuning": -0.2, "field": 0.7, "disorder": 0.3}]
)
def test_three_kicks_are_the_third_power_of_the_floquet_operator(layout, native, model):
    n, device = 4, line(4, native, layout=layout)
    h = fields(made("kicked-ising", device, 6, one_qubit="none", **model))
    step = floquet(
        n,
        device.couplers,
        h,
        np.pi / 4 + model.get("coupling_detuning", 0),
        np.pi / 4 + model.get("kick_detuning", 0),
    )
    circuit = draw("kicked-ising", device, 6, one_qubit="none", **model)
    assert phase_distance(unitary(circuit), np.linalg.matrix_power(step, 3)) < 1e-10


def test_fields_are_uniform_within_their_width_and_new_in_each_instance():
    h = np.array([fields(made("kicked-ising", line(8), 2, instance=k, field=0.5, disorder=0.4)) for k in range(200)])
    assert h.min() > 0.1
    assert h.max() < 0.9
    assert abs(h.mean() - 0.5) < 4 * 0.4 / np.sqrt(3 * h.size)  # 4 sigma
    assert len(np.unique(h)) == h.size


@pytest.mark.parametrize(("native", "count"), [("cz", 1), ("zz", 1), ("zz-half", 1), ("iswap", 2)])
def test_a_self_dual_bond_takes_as_few_native_gates_as_can_be(native, count):
    circuit = draw("kicked-ising", line(4, native), 4)
    assert circuit.two_qubit_gates == 2 * 3 * count
    detuned = draw("kicked-ising", line(4, native), 4, coupling_detuning=0.1)
    assert detuned.two_qubit_gates == 2 * 3 * (1 if native == "zz" else 2)


@pytest.mark.parametrize("native", ["cz", "zz", "zz-half"])
def test_a_self_dual_bond_needs_no_pulse_beyond_its_native_gate(native):
    circuit = draw("kicked-ising", line(4, native, one_qubit="r+rz"), 4)
    names = [KINDS[kind].name for kind in circuit.kind]
    assert names.count("r") == 4 + 2 * 4  # the start and two kicks


def test_any_zz_angle_runs_as_one_native_gate_with_that_angle():
    circuit = draw("kicked-ising", line(4, "zz"), 2, coupling_detuning=0.05)
    angles = [circuit.row_parameters(row)[0] for row in range(len(circuit)) if KINDS[circuit.kind[row]].name == "zz"]
    assert angles == pytest.approx([np.pi / 2 + 0.1] * 3, abs=1e-15)

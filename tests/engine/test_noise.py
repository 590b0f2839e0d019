"""Stated rates as error probabilities, and the places where errors strike."""

from __future__ import annotations

import numpy as np
import pytest
from engine_cases import noise_model

from rcbench.circuits.circuit import CircuitBuilder
from rcbench.device import Device, ErrorBudget, Rate, Times, Timings
from rcbench.engine.noise import NoiseModel, error_places, idle_twirl, pauli_probability
from rcbench.engine.program import gate_rows
from rcbench.errors import InputError


@pytest.mark.parametrize(("n", "p", "pauli", "average"), [(1, 0.04, 0.03, 0.02), (2, 0.04, 0.0375, 0.03)])
def test_rates_of_one_channel_convert_into_each_other(n, p, pauli, average):
    """A depolarising channel with p = 0.04: Nielsen, Phys. Lett. A 303, 249 (2002), in numbers (from memory)."""
    assert pauli_probability(p, "depolarising", n) == pytest.approx(pauli, rel=1e-12)
    assert pauli_probability(average, "average-infidelity", n) == pytest.approx(pauli, rel=1e-12)
    assert pauli_probability(pauli, "pauli", n) == pauli


def test_a_rate_that_no_channel_has_is_refused():
    with pytest.raises(InputError, match=r"from 0 to 0\.6667 for 1-qubit gates"):
        pauli_probability(0.7, "average-infidelity", 1)


def test_idle_twirl_keeps_the_entanglement_fidelity_of_relaxation():
    """F_e = (1 + exp(-t/T1) + 2 exp(-t/T2)) / 4 of damping and dephasing; t, T1, T2 = 0.5, 50, 30 give 0.98925."""
    flip, dephase = idle_twirl(np.array(0.5), np.array(50.0), np.array(30.0))
    assert 1 - 2 * flip - dephase == pytest.approx((1 + np.exp(-0.01) + 2 * np.exp(-1 / 60)) / 4, abs=1e-15)
    assert 1 - 2 * flip - dephase == pytest.approx(0.98925, abs=5e-6)


def device(**errors) -> Device:
    return Device(
        name="invented",
        n_qubits=4,
        layout="line",
        couplers=((0, 1), (1, 2), (2, 3)),
        timings=Timings(one_qubit=20, two_qubit=50),
        errors=ErrorBudget(**errors),
    )


def test_model_looks_rates_up_by_device_qubit():
    budget = {
        "one_qubit": Rate(default=0.001, values={(3,): 0.004}, kind="pauli", uncertainty=0.1),
        "two_qubit": Rate(default=0.01, values={(2, 3): 0.03}, kind="average-infidelity"),
        "readout_1to0": Rate(default=0.02, values={(2,): 0.05}, kind="pauli"),
        "idle": Times(t1=50, t2=60, t1_values={2: 40}, uncertainty=0.2),
    }
    noise = NoiseModel.from_device(device(**budget), (3, 2))
    np.testing.assert_allclose(noise.one_qubit, [0.004, 0.001])
    assert noise.two_qubit[0, 1] == noise.two_qubit[1, 0] == pytest.approx(0.03 * 1.25)
    np.testing.assert_allclose(noise.read_0_of_1, [0.02, 0.05])
    np.testing.assert_allclose(noise.read_1_of_0, 0)
    np.testing.assert_allclose(noise.t1, [50e3, 40e3])
    assert noise.gate_times == (20, 50)
    assert noise.uncertainty == {"one_qubit": 0.1, "two_qubit": 0.0, "readout_1to0": 0.0, "idle": 0.2}


def test_a_device_without_a_budget_has_no_model():
    bare = Device(name="bare", n_qubits=2, layout="line", couplers=((0, 1),))
    with pytest.raises(InputError, match="bare states none"):
        NoiseModel.from_device(bare, (0, 1))


def test_t2_above_twice_t1_is_refused():
    with pytest.raises(InputError, match="at most twice t1"):
        NoiseModel.from_device(device(idle=Times(t1=10, t2=21)), (0, 1))


def test_confusion_columns_are_distributions_and_grow_with_the_uncertainty():
    noise = noise_model(3)
    stated, worse = noise.confusion([2, 0]), noise.confusion([2, 0], sigmas=1)
    np.testing.assert_allclose(stated.sum(axis=1), 1)
    assert stated[0, 1, 0] == noise.read_1_of_0[2]
    assert worse[1, 0, 1] == pytest.approx(1.2 * noise.read_0_of_1[0])


def test_errors_strike_after_real_gates_and_on_idle_qubits_only():
    """Two layers: rz and sx side by side (30 ns), then cz (60 ns) beside an idle qubit."""
    builder = CircuitBuilder(3)
    builder.add("rz", [0], [0.3])
    builder.add("sx", [1])
    builder.next_layer()
    builder.add("cz", [1, 2])
    builder.measure(range(3))
    noise = noise_model(3)
    places = error_places(gate_rows(builder.build()), noise)
    gates = places.source < 2
    np.testing.assert_allclose(places.probability[gates], [noise.one_qubit[1], noise.two_qubit[1, 2]])
    idle = {
        (int(q), int(row)): p
        for q, row, p in zip(*(a[~gates] for a in (places.qubits[:, 0], places.row, places.probability)), strict=True)
    }
    # the virtual rz takes no time: qubit 0 idles for 30 and then 60 ns, after its row 0; qubit 2 before its first row
    expected = {
        (q, row): 2 * f + z
        for q, row, t in ((2, -1, 30.0), (0, 0, 30.0), (0, 0, 60.0))
        for f, z in [idle_twirl(t, noise.t1[q], noise.t2[q])]
    }
    assert idle == pytest.approx(expected)
    assert np.count_nonzero(~gates) == 3

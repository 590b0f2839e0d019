"""The coupler that the reference echoes point to, against echoes sampled by stim."""

from __future__ import annotations

from dataclasses import replace

import compared_folder
import numpy as np
import pandas as pd
import pytest
import stim

from rcbench.campaign import Circuits
from rcbench.report.locate import suspects
from rcbench.report.source import Source
from rcbench.report.strings import gates_met

N, DEPTHS, RATE = 8, (1, 2, 3, 4, 6), 0.004
COUPLERS = tuple((q, q + 1) for q in range(N - 1))
LAYERS = [[pair for pair in COUPLERS if pair[0] % 2 == layer % 2] for layer in range(max(DEPTHS))]


def one_qubit_cliffords() -> list[tuple[stim.Tableau, stim.Tableau]]:
    """All 24 with their inverses."""
    return [(tableau, tableau.inverse()) for tableau in stim.Tableau.iter_all(1)]


def echo(depth: int, rates: dict[tuple[int, int], float], draw: np.random.Generator) -> stim.Circuit:
    """U and its inverse in random Clifford layers and CZ, two-qubit depolarising after each CZ, then all measured."""
    table = one_qubit_cliffords()
    gates = [[table[k] for k in draw.integers(24, size=N)] for _ in range(depth)]
    circuit = stim.Circuit()

    def turn(layer: int, which: int) -> None:
        for qubit, pair in enumerate(gates[layer]):
            for instruction in pair[which].to_circuit():
                circuit.append(instruction.name, [qubit] * len(instruction.targets_copy()))

    def entangle(layer: int) -> None:
        for pair in LAYERS[layer]:
            circuit.append("CZ", pair)
            circuit.append("DEPOLARIZE2", pair, rates[pair])

    for layer in range(depth):
        turn(layer, 0)
        entangle(layer)
    for layer in reversed(range(depth)):
        entangle(layer)
        turn(layer, 1)
    circuit.append("M", range(N))
    return circuit


def averages(rates: dict[tuple[int, int], float], instances: int, shots: int, seed: int) -> np.ndarray:
    """(depths, instances, qubits) mean Z of every probe."""
    draw = np.random.default_rng(seed)
    return np.array([
        [
            1 - 2 * echo(depth, rates, draw).compile_sampler(seed=seed * 1000 + 50 * d + i).sample(shots).mean(axis=0)
            for i in range(instances)
        ]
        for d, depth in enumerate(DEPTHS)
    ])  # fmt: skip


def compared(measured: np.ndarray, model: np.ndarray) -> Source:
    source = compared_folder.source()
    device = replace(compared_folder.device(), n_qubits=N, couplers=COUPLERS)
    experiment = replace(
        source.campaign.experiment("butterfly"),
        circuits=Circuits(two_qubit="cz", one_qubit="clifford"),
        depths=DEPTHS,
        qubits=tuple(range(N)),
        sites={},
        same_circuits_as="",
    )
    rows = [
        {
            "experiment": "butterfly", "signature": "reference_echo", "region": f"probe={qubit}", "depth": float(depth),
            "measured": measured[d, :, qubit].mean(), "noise_model": model[d, :, qubit].mean(),
            "std_error": measured[d, :, qubit].std(ddof=1) / measured.shape[1] ** 0.5 + 1e-4,
        }
        for d, depth in enumerate(DEPTHS) for qubit in range(N)
    ]  # fmt: skip
    frame = pd.DataFrame(rows, columns=source.comparison.columns)
    return replace(
        source,
        campaign=replace(source.campaign, device=device, experiments=(experiment,)),
        comparison=frame,
    )


@pytest.fixture(scope="module")
def model() -> np.ndarray:
    return averages(dict.fromkeys(COUPLERS, RATE), instances=12, shots=3000, seed=1)


@pytest.mark.parametrize("bad", [(3, 4), (0, 1)])
def test_the_coupler_with_more_loss_than_the_budget_is_named(model, bad):
    """Excess Pauli probability 0.026 is 4/5 of that in average infidelity; 4 sigma and a tenth for the model."""
    rates = dict.fromkeys(COUPLERS, RATE) | {bad: 0.03}
    found = suspects(compared(averages(rates, instances=12, shots=3000, seed=2), model))
    assert found
    assert found[0].coupler == bad
    assert abs(found[0].excess - 0.8 * 0.026) < 4 * found[0].std_error + 0.1 * 0.8 * 0.026


def test_a_device_on_budget_has_no_suspect(model):
    same = averages(dict.fromkeys(COUPLERS, RATE), instances=12, shots=3000, seed=3)
    assert suspects(compared(same, model)) == []


@pytest.mark.parametrize("two_qubit", ["haar", "clifford"])
def test_strings_meet_gates_as_the_published_rule_says(two_qubit):
    """Nahum, Vijay, Haah: each end of a string stays with 1/5, so the front is reached with (4/5)^depth; 4 sigma of
    1500 samples is 0.05, times two passes."""
    source = compared(np.ones((5, 2, N)), np.ones((5, 2, N)))
    experiment = replace(source.campaign.experiments[0], circuits=Circuits(two_qubit=two_qubit, one_qubit="none"))
    met = gates_met(source.campaign, experiment, 0, COUPLERS)
    assert met[1] == pytest.approx([2, 0, 0, 0, 0, 0, 0])
    assert met[2][1] == pytest.approx(2 * 4 / 5, abs=0.1)
    assert met[3][2] == pytest.approx(2 * (4 / 5) ** 2, abs=0.1)
    assert met[4][3] == pytest.approx(2 * (4 / 5) ** 3, abs=0.1)


def test_a_cz_spreads_what_does_not_commute_with_it():
    """X on one qubit becomes XZ, Z stays: after a random Clifford two of three Paulis spread."""
    source = compared(np.ones((5, 2, N)), np.ones((5, 2, N)))
    met = gates_met(source.campaign, source.campaign.experiments[0], 0, COUPLERS)
    assert met[2][1] == pytest.approx(2 * 2 / 3, abs=0.1)

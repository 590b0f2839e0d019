"""The coupler that the reference echoes point to, against echoes sampled by stim."""

from __future__ import annotations

from dataclasses import replace

import compared_folder
import numpy as np
import pandas as pd
import pytest
import stim

from rcbench.report.locate import gates_in_cone, suspects
from rcbench.report.source import Source

N, DEPTHS, RATE = 8, (1, 2, 3, 4, 6), 0.004
COUPLERS = tuple((q, q + 1) for q in range(N - 1))
LAYERS = [[pair for pair in COUPLERS if pair[0] % 2 == layer % 2] for layer in range(max(DEPTHS))]
ONE_QUBIT = ("H", "S", "SQRT_X", "C_XYZ", "C_ZYX", "I")
INVERSE = {"H": "H", "S": "S_DAG", "SQRT_X": "SQRT_X_DAG", "C_XYZ": "C_ZYX", "C_ZYX": "C_XYZ", "I": "I"}


def echo(depth: int, rates: dict[tuple[int, int], float], draw: np.random.Generator) -> stim.Circuit:
    """U and its inverse in random Clifford layers and CZ, two-qubit depolarising after each CZ, then all measured."""
    gates = [[ONE_QUBIT[k] for k in draw.integers(len(ONE_QUBIT), size=N)] for _ in range(depth)]
    circuit = stim.Circuit()

    def entangle(layer: int) -> None:
        for pair in LAYERS[layer]:
            circuit.append("CZ", pair)
            circuit.append("DEPOLARIZE2", pair, rates[pair])

    for layer in range(depth):
        for qubit, gate in enumerate(gates[layer]):
            circuit.append(gate, [qubit])
        entangle(layer)
    for layer in reversed(range(depth)):
        entangle(layer)
        for qubit, gate in enumerate(gates[layer]):
            circuit.append(INVERSE[gate], [qubit])
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
        source.campaign.experiment("butterfly"), depths=DEPTHS, qubits=tuple(range(N)), sites={}, same_circuits_as=""
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
    rates = dict.fromkeys(COUPLERS, RATE) | {bad: 0.03}
    found = suspects(compared(averages(rates, instances=12, shots=3000, seed=2), model))
    assert found
    assert found[0].coupler == bad
    assert 0.005 < found[0].excess < 0.04  # of the order of the excess error 0.026; not every error flips a probe


def test_a_device_on_budget_has_no_suspect(model):
    same = averages(dict.fromkeys(COUPLERS, RATE), instances=12, shots=3000, seed=3)
    assert suspects(compared(same, model)) == []


def test_only_gates_in_the_light_cone_count():
    """Depth 2 on a line: the cone of qubit 0 takes (0, 1), then (1, 2); each there and back."""
    counts = gates_in_cone([tuple(LAYERS[0]), tuple(LAYERS[1])], 0, COUPLERS)
    assert dict(zip(COUPLERS, counts, strict=True)) == dict.fromkeys(COUPLERS, 0) | {(0, 1): 2, (1, 2): 2}

"""A small campaign of all four protocols, and bitstrings for it drawn by Cirq."""

from __future__ import annotations

import csv
from pathlib import Path

import cirq
import numpy as np

from rcbench.circuits.export import to_cirq
from rcbench.kit import Kit

CAMPAIGN = """\
[campaign]
title = "A small job"
seed = 11

[device]
name = "Brindle-5"
invented = true
layout = "line"
qubits = 5
one_qubit = "r+rz"
[device.two_qubit.cz]
[device.errors.two_qubit]
rate = 0.004
kind = "pauli"
uncertainty = 0.1
date = "2026-02-01"
[device.errors.readout_0to1]
rate = 0.01
[device.errors.readout_1to0]
rate = 0.01

[[experiment]]
name = "sampling"
protocol = "direct-sampling"
depths = [2, 4, 6, 8]
instances = 8
shots = 800

[[experiment]]
name = "dimers"
protocol = "direct-sampling"
same_circuits_as = "sampling"
control_for = "sampling"
family = "dimers"

[[experiment]]
name = "echo"
protocol = "loschmidt-echo"
same_circuits_as = "sampling"

[[experiment]]
name = "mirror"
protocol = "mirror-echo"
same_circuits_as = "sampling"

[[experiment]]
name = "butterfly"
protocol = "butterfly-echo"
same_circuits_as = "sampling"
sites = { butterfly = [4], probe = [0, 2] }

[[experiment]]
name = "entropies"
signatures = ["renyi2_entropy", "purity", "vonneumann_entropy"]
same_circuits_as = "sampling"
regions = ["0-1", "0-4"]
"""


def write_campaign(folder: Path, text: str = CAMPAIGN) -> Path:
    """The campaign as a file."""
    folder.mkdir(parents=True, exist_ok=True)
    path = folder / "campaign.toml"
    path.write_text(text)
    return path


def cirq_probabilities(kit: Kit, row) -> np.ndarray:
    """Ideal probabilities of a row's outcomes by Cirq's state-vector simulator, complex128."""
    circuit = to_cirq(kit.circuit(row))
    gates = cirq.Circuit(op for op in circuit.all_operations() if not cirq.is_measurement(op))
    qubits = cirq.LineQubit.range(row.n_qubits if row.n_qubits > max(row.measured_qubits) else 5)
    state = cirq.Simulator(dtype=np.complex128).simulate(gates, qubit_order=qubits).final_state_vector
    whole = (np.abs(state) ** 2).reshape((2,) * len(qubits))
    kept = row.measured_qubits
    out = whole.sum(axis=tuple(q for q in range(len(qubits)) if q not in kept))
    order = np.argsort(np.argsort(kept))
    return out.transpose(order).reshape(-1)


def write_shots(kit: Kit, folder: Path, *, fidelity: float = 1.0, seed: int = 5, uniform: bool = False) -> Path:
    """Shots of every row: the ideal distribution with white noise mixed in, or uniform bitstrings."""
    folder.mkdir(parents=True, exist_ok=True)
    rng = np.random.default_rng(seed)
    with (folder / "shots.csv").open("w", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(["circuit_id", "repeat", "bitstring", "count"])
        for row in kit.rows:
            p = cirq_probabilities(kit, row)
            f = 0.0 if uniform else fidelity
            mixed = f * p / p.sum() + (1 - f) / len(p)
            counts = rng.multinomial(row.shots, mixed)
            width = len(row.measured_qubits)
            for index in np.flatnonzero(counts):
                writer.writerow([row.circuit_id, row.repeat, format(index, f"0{width}b"), counts[index]])
    (folder / "shots.toml").write_text('bit_order = "q0-first"\n')
    return folder

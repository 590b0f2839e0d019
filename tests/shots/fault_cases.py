"""Kits with shots drawn by Cirq, and the faults that can befall them on their way back."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path

import cirq
import numpy as np

from rcbench.campaign import load_campaign
from rcbench.circuits.export import to_cirq
from rcbench.kit import Kit, build_kit
from rcbench.shots.outcomes import Outcomes
from rcbench.shots.shots import ShotFile, Shots

CAMPAIGN = """\
[campaign]
title = "Planted faults"
seed = {seed}

[device]
name = "Larch"
invented = true
layout = "line"
qubits = {n}
one_qubit = "u"

[device.two_qubit.cz]
{limits}
[[experiment]]
name = "sampling"
protocol = "direct-sampling"
two_qubit = "cz"
one_qubit = "haar"
depths = {depths}
instances = {instances}
shots = {shots}
{more}
"""
MIRROR = """
[[experiment]]
name = "mirror"
protocol = "mirror-echo"
same_circuits_as = "sampling"
"""


@dataclass(eq=False)
class World:
    """A kit and the ideal probabilities of its circuits by Cirq, by circuit_id over the measured bits."""

    kit: Kit
    ideal: dict[str, np.ndarray]
    rng: np.random.Generator = field(default_factory=lambda: np.random.default_rng(1))
    fidelity: float = 1.0
    other: World | None = None

    def probabilities(self, circuit_id: str) -> np.ndarray | None:
        return self.ideal.get(circuit_id)


def make_world(
    folder: Path, n: int, *, seed: int = 5, depths=(2, 6, 10), instances: int = 6, shots: int = 2000, more="", limits=""
) -> World:
    path = folder / "campaign.toml"
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(
        CAMPAIGN.format(seed=seed, n=n, depths=list(depths), instances=instances, shots=shots, more=more, limits=limits)
    )
    kit = build_kit(load_campaign(path), folder / "kit")
    return World(
        kit,
        {
            row.base_id: cirq_probabilities(to_cirq(kit.circuit(row)), row)
            for row in kit.rows
            if row.base_id == row.circuit_id
        },
    )


def without_measurements(circuit: cirq.Circuit) -> cirq.Circuit:
    return cirq.Circuit(cirq.Moment(op for op in moment if not cirq.is_measurement(op)) for moment in circuit)


def cirq_probabilities(circuit: cirq.Circuit, row) -> np.ndarray:
    qubits = cirq.LineQubit.range(row.n_qubits)
    state = cirq.Simulator(dtype=np.complex64).simulate(without_measurements(circuit), qubit_order=qubits)
    p = np.abs(state.final_state_vector.astype(np.complex128)) ** 2
    return marginal(p / p.sum(), row)


def cirq_noisy(circuit: cirq.Circuit, row, gate: float, decay: float) -> np.ndarray:
    """Measured distribution with depolarising after two-qubit gates and amplitude damping of all after each moment."""
    qubits = cirq.LineQubit.range(row.n_qubits)
    out = cirq.Circuit()
    for moment in without_measurements(circuit):
        out.append(moment)
        out.append(cirq.depolarize(gate, n_qubits=2)(*op.qubits) for op in moment if len(op.qubits) == 2)
        if any(len(op.qubits) == 2 for op in moment):
            out.append(cirq.amplitude_damp(decay).on_each(*qubits))
    rho = cirq.DensityMatrixSimulator(dtype=np.complex64).simulate(out, qubit_order=qubits).final_density_matrix
    p = np.clip(np.real(np.diagonal(rho)).astype(np.float64), 0, None)
    return marginal(p / p.sum(), row)


def marginal(p: np.ndarray, row) -> np.ndarray:
    n, kept = row.n_qubits, row.measured_qubits
    if tuple(kept) == tuple(range(n)):
        return p
    out = p.reshape((2,) * n).sum(axis=tuple(q for q in range(n) if q not in kept))
    order = [sorted(kept).index(q) for q in kept]
    return out.transpose(order).reshape(-1)


def read_with_flips(p: np.ndarray, up: float, down: float) -> np.ndarray:
    """Readout that takes 0 for 1 with chance up, and 1 for 0 with chance down."""
    n = len(p).bit_length() - 1
    table = np.array([[1 - up, down], [up, 1 - down]])
    out = p.reshape((2,) * n)
    for bit in range(n):
        out = np.moveaxis(np.tensordot(table, out, axes=(1, bit)), 0, bit)
    return out.reshape(-1)


def draw(world: World, fidelity: float | Callable, shots: int, *, up=0.0, down=0.0, real=None) -> dict:
    """Shots of every run of a kit: (circuit_id, repeat) to (shots,) indices in the order they were taken."""
    out = {}
    for row in world.kit.rows:
        p = (real or world.ideal)[row.base_id]
        f = fidelity(row) if callable(fidelity) else fidelity
        f = np.clip(f * p + (1 - f) / len(p), 0, None)
        if up or down:
            f = read_with_flips(f, up, down)
        counts = world.rng.multinomial(shots, f / f.sum())
        index = np.repeat(np.arange(len(p)), counts)
        out[row.circuit_id, row.repeat] = world.rng.permutation(index)
    return out


def as_shots(world: World, drawn: dict, **more) -> Shots:
    n_bits = {row.circuit_id: len(row.measured_qubits) for row in world.kit.rows}
    outcomes = {key: Outcomes.from_index(index, n_bits[key[0]]) for key, index in drawn.items() if len(index)}
    return Shots(outcomes=outcomes, bit_order="q0-first", files=(ShotFile("shots.csv", "0" * 64, 1),), **more)


def permuted(index: np.ndarray, n: int, source) -> np.ndarray:
    """Indices as they come when true bit j is delivered at place source[j]."""
    out = np.zeros_like(index)
    for bit, place in enumerate(source):
        out |= (index >> (n - 1 - bit) & 1) << (n - 1 - place)
    return out


def exchange(drawn: dict, a, b) -> dict:
    return drawn | {a: drawn[b], b: drawn[a]}


__all__ = ["MIRROR", "World", "as_shots", "cirq_noisy", "draw", "exchange", "make_world", "permuted", "replace"]

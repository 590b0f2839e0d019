"""What the timed comparisons share: circuits in both forms, taking turns, one table.

Ours and the peer take turns, so that what disturbs the machine disturbs all, and medians are compared. Processor time
of all threads is noted beside wall time: on a machine that does other work it is the steadier of the two.
RCBENCH_BENCHMARK_FOLDER names a folder for the table as CSV.
"""

from __future__ import annotations

import os
import statistics
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import cirq
import numpy as np
import pytest

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.engine.threads import available_threads

ROWS: list[dict[str, object]] = []


def haar_brickwork(n: int, depth: int) -> tuple[Circuit, cirq.Circuit]:
    rng = np.random.default_rng(n)
    builder, qubits, layers = CircuitBuilder(n), cirq.LineQubit.range(n), []
    for layer in range(depth):
        for a in range(layer % 2, n - 1, 2):
            gate = cirq.testing.random_unitary(4, random_state=int(rng.integers(2**31)))
            builder.add("matrix2", [a, a + 1], np.ascontiguousarray(gate).reshape(-1).view(np.float64))
            layers.append(cirq.MatrixGate(gate).on(qubits[a], qubits[a + 1]))
        builder.next_layer()
    return builder.build(), cirq.Circuit(layers)


def turns_brickwork(n: int, depth: int, seed: int | None = None) -> tuple[Circuit, cirq.Circuit]:
    """Quarter turns about X, Y or X + Y, then CZ gates; a last layer of turns."""
    rng = np.random.default_rng(n if seed is None else seed)
    builder, qubits, layers = CircuitBuilder(n), cirq.LineQubit.range(n), []
    for layer in range(depth + 1):
        for a in range(n):
            axis = rng.integers(3) / 4
            builder.add("r", [a], [np.pi / 2, axis * np.pi])
            layers.append(cirq.PhasedXPowGate(phase_exponent=axis, exponent=0.5).on(qubits[a]))
        builder.next_layer()
        for a in range(layer % 2, n - 1, 2) if layer < depth else ():
            builder.add("cz", [a, a + 1])
            layers.append(cirq.CZ(qubits[a], qubits[a + 1]))
        builder.next_layer()
    builder.measure(range(n))
    return builder.build(), cirq.Circuit(layers)


@dataclass(frozen=True)
class Seconds:
    """Medians of wall time and of processor time of all threads."""

    wall: float
    processor: float

    def times(self, factor: float) -> Seconds:
        """Of so many times the work."""
        return Seconds(self.wall * factor, self.processor * factor)


def medians(rounds: int, *runs: Callable[[], object]) -> list[Seconds]:
    """Median times of each; they take turns after one run each that is not counted."""
    times: list[list[tuple[float, float]]] = [[] for _ in runs]
    for run in runs:
        run()
    for _ in range(rounds):
        for place, run in enumerate(runs):
            wall, processor = time.perf_counter(), time.process_time()
            run()
            times[place].append((time.perf_counter() - wall, time.process_time() - processor))
    return [Seconds(*(statistics.median(column) for column in zip(*part, strict=True))) for part in times]


def record(work: str, ours: Seconds, peer: Seconds, wanted: float, peer_name: str) -> float:
    """One row of the table against a peer; gives the ratio of wall times."""
    ratio = peer.wall / ours.wall
    ROWS.append(
        {
            "work": work, "ours_s": ours.wall, "peer": peer_name, "peer_s": peer.wall, "ratio": ratio, "wanted": wanted,
            "ours_processor_s": ours.processor, "peer_processor_s": peer.processor,
            "processor_ratio": peer.processor / ours.processor,
        }
    )  # fmt: skip
    return ratio


def note(work: str, seconds: float, **more: object) -> None:
    """One row of the table without a peer."""
    ROWS.append({"work": work, "ours_s": seconds, **more})


def table() -> str:
    """All rows, as text."""
    lines = [f"{'work':66s} {'ours s':>9s} {'peer s':>9s} {'ratio':>6s} {'proc.':>6s} {'wanted':>6s}  peer"]
    for row in ROWS:
        cells = [
            f"{row[key]:{form}}" if key in row else ""
            for key, form in (
                ("ours_s", ".4g"), ("peer_s", ".4g"), ("ratio", ".2f"), ("processor_ratio", ".2f"), ("wanted", ".3g")
            )
        ]  # fmt: skip
        ours, peer, ratio, processor, wanted = cells
        lines.append(
            f"{row['work']:66s} {ours:>9s} {peer:>9s} {ratio:>6s} {processor:>6s} {wanted:>6s}  {row.get('peer', '')}"
        )
    return "\n".join(lines)


def write_table() -> None:
    """The rows as CSV into the folder that RCBENCH_BENCHMARK_FOLDER names."""
    folder = os.environ.get("RCBENCH_BENCHMARK_FOLDER")
    if folder and ROWS:
        import pandas as pd

        Path(folder).mkdir(parents=True, exist_ok=True)
        pd.DataFrame(ROWS).to_csv(Path(folder) / "engine.csv", index=False)


def qsim_runs(circuit: cirq.Circuit, fusions: tuple[int, ...] = (2, 3, 4)) -> list[Callable[[], object]]:
    qsimcirq = pytest.importorskip("qsimcirq")
    out = []
    for fusion in fusions:
        options = qsimcirq.QSimOptions(max_fused_gate_size=fusion, cpu_threads=available_threads())
        simulator = qsimcirq.QSimSimulator(options)
        out.append(lambda simulator=simulator: simulator.simulate(circuit))
    return out


def fastest(circuit: cirq.Circuit, fusions: tuple[int, ...] = (2, 3, 4)) -> Callable[[cirq.Circuit], np.ndarray]:
    """Final state by qsimcirq with the fusion that is fastest on one circuit of the kind."""
    qsimcirq = pytest.importorskip("qsimcirq")
    runs = qsim_runs(circuit, fusions)
    times = [seconds.wall for seconds in medians(2, *runs)]
    options = qsimcirq.QSimOptions(max_fused_gate_size=fusions[int(np.argmin(times))], cpu_threads=available_threads())
    simulator = qsimcirq.QSimSimulator(options)
    return lambda chosen: simulator.simulate(chosen).final_state_vector

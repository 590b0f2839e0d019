"""Make the shots that the demo ships: the demo's kit run on an invented device by Cirq's density-matrix simulator.

The device is like its stated budget but for one coupler, which is much worse; its idle qubits relax by amplitude and
phase damping, which the noise model of rcbench only approximates by Pauli errors. Nothing of rcbench's engine is used.

    python tests/demo/make_shots.py          # about half an hour on two cores; writes rcbench/demo/shots
"""

from __future__ import annotations

import multiprocessing
import sys
import tempfile
import tomllib
from pathlib import Path

import cirq
import numpy as np

TOP = Path(__file__).resolve().parents[2]
DEMO = TOP / "rcbench" / "demo"
BAD_COUPLER, BAD_INFIDELITY = (2, 7), 0.06
VIRTUAL = (cirq.ZPowGate, cirq.Rz)
SEED = 4127


class Depolarize(cirq.Gate):
    """cirq.depolarize with the channel applied at once instead of Pauli by Pauli, which takes a tenth of the time."""

    def __init__(self, p: float, n_qubits: int) -> None:
        self.p, self.n = p, n_qubits

    def _num_qubits_(self) -> int:
        return self.n

    def _mixture_(self) -> list[tuple[float, np.ndarray]]:
        return cirq.mixture(cirq.depolarize(self.p, n_qubits=self.n))  # type: ignore[return-value]

    def _apply_channel_(self, args: cirq.ApplyChannelArgs) -> np.ndarray:
        d = 2**self.n
        mix = self.p * d * d / (d * d - 1)
        rho = args.target_tensor
        axes = (*args.left_axes, *args.right_axes)
        moved = np.moveaxis(rho, axes, range(2 * self.n))
        flat = moved.reshape(d, d, *moved.shape[2 * self.n :])
        mean = np.einsum("aa...->...", flat) * (mix / d)
        rho *= 1 - mix
        for state in range(d):
            bits = tuple(state >> (self.n - 1 - bit) & 1 for bit in range(self.n))
            moved[(*bits, *bits)] += mean
        return rho


class NoisyOneQubit(cirq.Gate):
    """A one-qubit gate followed by cirq.depolarize(p), as one matrix on both sides of the state."""

    def __init__(self, unitary: np.ndarray, p: float) -> None:
        self.unitary, self.p = unitary, p

    def _num_qubits_(self) -> int:
        return 1

    def _kraus_(self) -> list[np.ndarray]:
        return [k @ self.unitary for k in cirq.kraus(cirq.depolarize(self.p))]

    def _apply_channel_(self, args: cirq.ApplyChannelArgs) -> np.ndarray:
        rho = args.target_tensor
        moved = np.moveaxis(rho, (*args.left_axes, *args.right_axes), (0, 1))
        both = np.kron(self.unitary, self.unitary.conj())
        even = np.eye(2).reshape(4)
        matrix = (1 - 4 * self.p / 3) * both + (4 * self.p / 3) * np.outer(even, even) / 2
        moved[...] = (matrix.astype(rho.dtype) @ moved.reshape(4, -1)).reshape(moved.shape)
        return rho


class Wait(cirq.Gate):
    """Amplitude and phase damping of one qubit that waits, in one pass: populations fall by T1, coherences by T2."""

    def __init__(self, time: float, t1: float, t2: float) -> None:
        self.down, self.dephase = 1 - np.exp(-time / t1), 1 - np.exp(-2 * time * (1 / t2 - 0.5 / t1))

    def _num_qubits_(self) -> int:
        return 1

    def _kraus_(self) -> list[np.ndarray]:
        first, second = cirq.kraus(cirq.amplitude_damp(self.down)), cirq.kraus(cirq.phase_damp(self.dephase))
        return [b @ a for a in first for b in second]

    def _apply_channel_(self, args: cirq.ApplyChannelArgs) -> np.ndarray:
        rho = args.target_tensor
        moved = np.moveaxis(rho, (*args.left_axes, *args.right_axes), (0, 1))
        moved[0, 0] += self.down * moved[1, 1]
        moved[1, 1] *= 1 - self.down
        coherence = np.sqrt((1 - self.down) * (1 - self.dephase))
        moved[0, 1] *= coherence
        moved[1, 0] *= coherence
        return rho


def noisy(circuit: cirq.Circuit, device: dict, qubits: list[cirq.Qid]) -> cirq.Circuit:
    """The circuit with a channel after every gate and damping of the qubits that wait."""
    errors, times = device["errors"], device["timings"]
    by_coupler = errors["two_qubit"].get("by_coupler", {})
    out = []
    for moment in circuit:
        real = [op for op in moment if not isinstance(op.gate, (*VIRTUAL, cirq.MeasurementGate))]
        virtual = [op for op in moment if isinstance(op.gate, VIRTUAL)]
        out += virtual
        length = {1: times["one_qubit_ns"], 2: times["two_qubit_ns"]}
        longest = max((length[len(op.qubits)] for op in real), default=0.0)
        waits = dict.fromkeys(qubits, longest)
        for op in real:
            waits |= {qubit: longest - length[len(op.qubits)] for qubit in op.qubits}
            if len(op.qubits) == 1:
                out.append(NoisyOneQubit(cirq.unitary(op), 1.5 * errors["one_qubit"]["rate"])(*op.qubits))
            else:
                pair = tuple(sorted(qubit.x for qubit in op.qubits))
                rate = by_coupler.get(f"{pair[0]}-{pair[1]}", errors["two_qubit"]["rate"])
                infidelity = BAD_INFIDELITY if pair == BAD_COUPLER else rate
                out += [op, Depolarize(1.25 * infidelity, 2)(*op.qubits)]
        t1, t2 = errors["idle"]["t1_us"] * 1e3, errors["idle"]["t2_us"] * 1e3
        for qubit, wait in waits.items():
            if wait > 0:
                out.append(Wait(wait, t1, t2)(qubit))
    return cirq.Circuit(out)


def measured_index(job: tuple) -> tuple[str, int, np.ndarray]:
    """(circuit_id, repeat, state index of each shot) of one roster row."""
    circuit_id, repeat, shots, circuit, measured, device, seed = job
    qubits = cirq.LineQubit.range(device["qubits"])
    up, down = device["errors"]["readout_0to1"]["rate"], device["errors"]["readout_1to0"]["rate"]
    confusion = np.array([[1 - up, up], [down, 1 - down]])
    wanted = [qubits[q] for q in measured]
    # measurements last: with noise after them Cirq would run shot by shot
    full = noisy(without_measurements(circuit), device, qubits)
    full.append(cirq.measure(*wanted, key="m", confusion_map={(k,): confusion for k in range(len(wanted))}))
    bits = cirq.DensityMatrixSimulator(dtype=np.complex64, seed=seed).run(full, repetitions=shots).measurements["m"]
    return circuit_id, repeat, bits @ (1 << np.arange(bits.shape[1] - 1, -1, -1))


def without_measurements(circuit: cirq.Circuit) -> cirq.Circuit:
    """The gates, moment by moment."""
    return cirq.Circuit(cirq.Moment(op for op in moment if not cirq.is_measurement(op)) for moment in circuit)


def main() -> None:
    import pyarrow as pa
    import pyarrow.parquet as pq

    from rcbench.campaign import load_campaign
    from rcbench.circuits.export import to_cirq
    from rcbench.kit import build_kit

    with tempfile.TemporaryDirectory() as folder:
        kit = build_kit(load_campaign(DEMO / "campaign.toml"), Path(folder) / "kit")
        device = tomllib.loads((kit.folder / "campaign.toml").read_text())["device"]
        seeds = np.random.SeedSequence(SEED).generate_state(len(kit.rows))
        jobs = [
            (row.circuit_id, row.repeat, row.shots, to_cirq(kit.circuit(row)), row.measured_qubits, device, int(seed))
            for row, seed in zip(kit.rows, seeds, strict=True)
        ]
        columns: dict[str, list] = {"circuit_id": [], "repeat": [], "bitstring": [], "count": []}
        with multiprocessing.get_context("spawn").Pool(2) as pool:
            for done, (circuit_id, repeat, index) in enumerate(pool.imap(measured_index, jobs), start=1):
                width = len(jobs[done - 1][4])
                for value, count in zip(*np.unique(index, return_counts=True), strict=True):
                    columns["circuit_id"].append(circuit_id)
                    columns["repeat"].append(repeat)
                    columns["bitstring"].append(format(value, f"0{width}b"))
                    columns["count"].append(int(count))
                print(f"\r{done} of {len(jobs)}", end="", file=sys.stderr, flush=True)
        (DEMO / "shots").mkdir(exist_ok=True)
        table = pa.table(columns)
        pq.write_table(table, DEMO / "shots" / "shots.parquet", compression="zstd", compression_level=19)
        (DEMO / "shots" / "shots.toml").write_text('bit_order = "q0-first"\n')
        (DEMO / "shots" / "execution.toml").write_text(EXECUTION.format(kit_hash=kit.hash))


EXECUTION = """\
# Invented, like the device: the shots were made by a simulator.
kit_hash = "{kit_hash}"
device = "Tarn-10 (invented)"
started = "2026-03-04T08:12:00Z"
ended = "2026-03-04T08:31:00Z"
calibration = "invented-0311"
calibrated = "2026-03-02T21:40:00Z"
compiler = "none: run verbatim"
decoupling = "none"
twirling = "none"
post_selection = "none"
readout_correction = "none"
software = "Cirq density-matrix simulator"
"""


if __name__ == "__main__":
    main()

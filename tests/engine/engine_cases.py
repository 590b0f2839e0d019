"""Random circuits and noise models that the tests of the engine share; all numbers are invented."""

from __future__ import annotations

import numpy as np

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.engine.noise import NoiseModel, idle_twirl
from rcbench.engine.program import gate_rows
from rcbench.engine.reference import apply_reference

ANGLES = {"rz": 1, "r": 2, "u": 3, "fsim": 2, "zz": 1}
ONE_QUBIT = ("x", "y", "z", "h", "s", "sdg", "sx", "sxdg", "rz", "r", "u")
TWO_QUBIT = ("cz", "cx", "iswap", "sqrt_iswap", "fsim", "zz")
PAULIS = np.array([[[1, 0], [0, 1]], [[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])


def haar_unitary(size: int, rng: np.random.Generator) -> np.ndarray:
    """A (size, size) unitary; the phases of its columns are not quite Haar, which no test here needs."""
    return np.linalg.qr(rng.normal(size=(size, size)) + 1j * rng.normal(size=(size, size)))[0]


def random_circuit(
    n_qubits: int,
    layers: int,
    seed: int,
    *,
    one_qubit: tuple[str, ...] = ONE_QUBIT,
    two_qubit: tuple[str, ...] = TWO_QUBIT,
    share: float = 0.8,
    measure: bool = True,
) -> Circuit:
    """Layers of one-qubit gates on some of the qubits, then two-qubit gates on random pairs in any order."""
    rng = np.random.default_rng(seed)
    builder = CircuitBuilder(n_qubits)

    def add(name: str, qubits: list[int]) -> None:
        if name == "matrix2":
            builder.add(name, qubits, haar_unitary(4, rng).reshape(-1).view(np.float64))
        else:
            builder.add(name, qubits, rng.uniform(-3, 3, size=ANGLES.get(name, 0)))

    for _ in range(layers):
        for qubit in range(n_qubits):
            if rng.random() < share:
                add(str(rng.choice(one_qubit)), [qubit])
        builder.barrier()
        order = rng.permutation(n_qubits).tolist()
        for pair in zip(order[::2], order[1::2], strict=False):
            if rng.random() < share:
                add(str(rng.choice(two_qubit)), list(pair))
        builder.barrier()
    for qubit in range(n_qubits):
        add("u", [qubit])
    if measure:
        builder.measure(range(n_qubits))
    return builder.build()


def turns_circuit(n_qubits: int, layers: int, seed: int, names: tuple[str, ...] = ("cz", "zz")) -> Circuit:
    """Quarter turns and Hadamards between brickwork layers of diagonal gates."""
    rng = np.random.default_rng(seed)
    builder = CircuitBuilder(n_qubits)
    for layer in range(layers + 1):
        for qubit in range(n_qubits):
            if rng.random() < 0.2:
                builder.add("h", [qubit])
            else:
                builder.add("r", [qubit], [np.pi / 2, rng.choice([0, np.pi / 2, np.pi / 4])])
        builder.barrier()
        for qubit in range(layer % 2, n_qubits - 1, 2) if layer < layers else ():
            name = str(rng.choice(names))
            builder.add(name, [qubit, qubit + 1], [0.7] if name == "zz" else [])
        builder.barrier()
    builder.measure(range(n_qubits))
    return builder.build()


def noise_model(n_qubits: int, scale: float = 1.0, seed: int = 3) -> NoiseModel:
    """Different rates everywhere, every source present, each with an uncertainty."""
    rng = np.random.default_rng(seed)
    two = rng.uniform(0.01, 0.04, (n_qubits, n_qubits)) * scale
    t1 = rng.uniform(4e3, 8e3, n_qubits) / scale
    return NoiseModel(
        one_qubit=rng.uniform(0.002, 0.01, n_qubits) * scale,
        two_qubit=(two + two.T) / 2,
        t1=t1,
        t2=t1 * rng.uniform(0.5, 1.8, n_qubits),
        gate_times=(30.0, 60.0),
        read_1_of_0=rng.uniform(0.01, 0.03, n_qubits),
        read_0_of_1=rng.uniform(0.02, 0.06, n_qubits),
        uncertainty={"one_qubit": 0.1, "two_qubit": 0.2, "idle": 0.3, "readout_0to1": 0.1, "readout_1to0": 0.2},
    )


def density_probabilities(circuit: Circuit, noise: NoiseModel, virtual: tuple[int, ...]) -> np.ndarray:
    """(2**n,) exact probabilities under the model before readout, by a density matrix that shares no kernel.

    virtual: codes of the gate kinds that take no time and make no error.
    """
    n = circuit.n_qubits
    rho = np.zeros((1, 4**n), dtype=np.complex128)
    rho[0, 0] = 1

    def both_sides(rho: np.ndarray, gate: np.ndarray, qubits: list[int]) -> np.ndarray:
        rho = apply_reference(rho, gate, qubits)
        return apply_reference(rho, gate.conj(), [n + q for q in qubits])

    rows = gate_rows(circuit)
    for layer in np.unique(rows.layer):
        busy = np.zeros(n)
        for row in np.flatnonzero(rows.layer == layer):
            qubits = [q for q in rows.qubits[row].tolist() if q >= 0]
            size = 2 ** len(qubits)
            rho = both_sides(rho, rows.matrices[row][:size, :size], qubits)
            if rows.kind[row] in virtual:
                continue
            busy[qubits] = noise.gate_times[len(qubits) - 1]
            p = noise.one_qubit[qubits[0]] if len(qubits) == 1 else noise.two_qubit[tuple(qubits)]
            struck = [rho]
            for qubit in qubits:
                struck = [both_sides(part, pauli, [qubit]) for part in struck for pauli in PAULIS]
            rho = (1 - p) * rho + p / (len(struck) - 1) * sum(struck[1:])
        flip, dephase = idle_twirl(busy.max() - busy, noise.t1, noise.t2)
        for q in range(n):
            turned = both_sides(rho, PAULIS[1], [q]) + both_sides(rho, PAULIS[2], [q])
            kept = 1 - 2 * flip[q] - dephase[q]
            rho = kept * rho + flip[q] * turned + dephase[q] * both_sides(rho, PAULIS[3], [q])
    return rho.reshape(2**n, 2**n).diagonal().real

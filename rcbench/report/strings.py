"""How a Pauli string grows through the layers of an experiment, on average over its one-qubit gates, by sampling.

A gate takes a Pauli to a mixture of Paulis, each with the squared weight of its part. Following one Pauli drawn from it
drops interference between paths, which the average over one-qubit gates removes for Haar and Clifford layers and
nearly so for the others (Nahum, Vijay, Haah, Phys. Rev. X 8, 021014 (2018), arXiv:1705.08975).
"""

from __future__ import annotations

from itertools import product

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.campaign import Campaign, Experiment
from rcbench.circuits.ensembles import one_qubit_layer
from rcbench.circuits.gates import gate_matrix
from rcbench.circuits.schedule import layers
from rcbench.device import Pair
from rcbench.randomness import Draw

SAMPLES = 1500
_PAULIS = np.array([[[1, 0], [0, 1]], [[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
_PAIRS = np.array([np.kron(a, b) for a, b in product(_PAULIS, repeat=2)])
_Z = 3


def gates_met(
    campaign: Campaign, experiment: Experiment, probe: int, couplers: tuple[Pair, ...]
) -> dict[int, FloatArray]:
    """By depth, (couplers,) expected gates of an echo, both ways, that meet the string grown from a probe's Z."""
    n = experiment.n_qubits
    draw = Draw(campaign.seed, "report", "strings", experiment.name, probe)
    schedule = layers(campaign.device, experiment.qubits, max(experiment.depths), draw)
    turn = _one_qubit(experiment.circuits.one_qubit, campaign.seed)
    place = {pair: at for at, pair in enumerate(couplers)}
    string: IntArray = np.zeros((SAMPLES, n), dtype=np.int64)
    string[:, probe] = _Z
    met = np.zeros(len(couplers))
    out: dict[int, FloatArray] = {0: met.copy()}
    for depth, layer in enumerate(schedule, start=1):
        if turn is not None:
            string = _follow(turn, string, draw)
        for a, b in layer:
            both: IntArray = 4 * string[:, a] + string[:, b]
            met[place[a, b]] += 2 * float((both > 0).mean())
            both = _follow(two_qubit_steps(campaign, experiment, (a, b)), both, draw)
            string[:, a], string[:, b] = both // 4, both % 4
        out[depth] = met.copy()
    return out


def _follow(steps: FloatArray, state: IntArray, draw: Draw) -> IntArray:
    """One step of a Markov chain for every element. steps: (k, k), from row to column."""
    chance = draw.uniform(state.size).reshape(state.shape)
    reached = np.cumsum(steps, axis=1)[:, :-1]
    return np.asarray((chance[..., None] >= reached[state]).sum(axis=-1), dtype=np.int64)


def _steps(gates: ComplexArray, basis: ComplexArray) -> FloatArray:
    """(k, k) squared weights of U P U^dagger, averaged over gates (m, d, d); basis: (k, d, d)."""
    turned = np.einsum("mab,kbc,mdc->mkad", gates, basis, gates.conj())
    weights = np.einsum("mkad,qda->mkq", turned, basis).real / basis.shape[-1]
    return np.asarray((weights**2).mean(axis=0))


def _one_qubit(name: str, seed: int) -> FloatArray | None:
    """Steps of a one-qubit layer; None where the two-qubit gates hold the one-qubit ones."""
    if name == "none":
        return None
    matrices, _ = one_qubit_layer(name, 500, Draw(seed, "report", "one-qubit steps"), None)
    return _steps(matrices, _PAULIS)


def two_qubit_steps(campaign: Campaign, experiment: Experiment, pair: Pair) -> FloatArray:
    """(16, 16) steps of the two-qubit gate of a coupler, in the experiment's labels."""
    name = experiment.circuits.two_qubit
    if name in ("haar", "clifford"):  # two-designs: any string that is not the identity goes to any other alike
        steps = np.full((16, 16), 1 / 15)
        steps[0], steps[:, 0] = 0.0, 0.0
        steps[0, 0] = 1.0
        return steps
    native = campaign.device.native(name)
    parameters = native.at((experiment.qubits[pair[0]], experiment.qubits[pair[1]]))
    if name == "zz" and experiment.circuits.angle is not None:
        parameters = (experiment.circuits.angle,)
    return _steps(gate_matrix(name.replace("-", "_"), *parameters)[None], _PAIRS)

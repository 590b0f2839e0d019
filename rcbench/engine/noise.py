"""The stated error budget as a noise model: Pauli errors after gates, idle errors, readout flips."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from rcbench.arrays import FloatArray, IntArray
from rcbench.circuits.gates import N_QUBITS, VIRTUAL
from rcbench.device import Device, Rate
from rcbench.engine.program import GateRows
from rcbench.errors import InputError

SOURCES = ("one_qubit", "two_qubit", "idle")  # the sources that trajectories sample; readout is applied exactly


def pauli_probability(rate: float, kind: str, n_qubits: int) -> float:
    """Total probability of the non-identity Paulis that a stated rate means.

    With d = 2**n_qubits: an average infidelity r gives r (d + 1) / d, a depolarising probability p gives
    p (1 - 1/d**2), a Pauli rate is the probability itself.

    Raises:
        InputError: a rate that no channel has.

    Source: Nielsen, Phys. Lett. A 303, 249 (2002) (from memory).
    """
    d = 2.0**n_qubits
    factor = {"pauli": 1.0, "average-infidelity": (d + 1) / d, "depolarising": 1 - 1 / d**2}[kind]
    if not 0 <= rate * factor <= 1:
        raise InputError("rate", rate, f"from 0 to {1 / factor:.4g} for {n_qubits}-qubit gates and kind {kind!r}")
    return rate * factor


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class NoiseModel:
    """Error probabilities of an experiment's qubits 0 to n - 1.

    Args:
        one_qubit: (n,) Pauli error probability of each one-qubit gate that is not virtual, X, Y and Z equally likely.
        two_qubit: (n, n) symmetric; of each two-qubit gate, the 15 non-identity Paulis equally likely.
        t1, t2: (n,) nanoseconds, infinite where not stated.
        gate_times: nanoseconds of a one-qubit and of a two-qubit gate.
        read_1_of_0, read_0_of_1: (n,) readout flip probabilities p(1|0) and p(0|1).
        uncertainty: relative standard uncertainty of "one_qubit", "two_qubit", "idle", "readout_0to1", "readout_1to0",
            each common to all places.
        layer_times: (layers,) how long each native layer of the one circuit lasts that this model is for, by its
            number, where gates of that circuit are left out; None: as long as the layer's longest gate.
    """

    one_qubit: FloatArray
    two_qubit: FloatArray
    t1: FloatArray
    t2: FloatArray
    gate_times: tuple[float, float]
    read_1_of_0: FloatArray
    read_0_of_1: FloatArray
    uncertainty: Mapping[str, float] = field(default_factory=dict)
    layer_times: FloatArray | None = None

    def on(self, qubits: Sequence[int], layer_times: FloatArray) -> NoiseModel:
        """The model of some of the qubits, for a circuit whose gates on the others are left out."""
        chosen = list(qubits)
        return replace(
            self,
            one_qubit=self.one_qubit[chosen],
            two_qubit=self.two_qubit[np.ix_(chosen, chosen)],
            t1=self.t1[chosen],
            t2=self.t2[chosen],
            read_1_of_0=self.read_1_of_0[chosen],
            read_0_of_1=self.read_0_of_1[chosen],
            layer_times=layer_times,
        )

    @property
    def n_qubits(self) -> int:
        """Number of qubits."""
        return len(self.one_qubit)

    @classmethod
    def from_device(cls, device: Device, qubits: Sequence[int]) -> NoiseModel:
        """The model of an experiment whose qubit j is device qubit qubits[j]; what is not stated is not modelled."""
        errors = device.errors
        if errors is None:
            raise InputError("device.errors", None, f"an error budget; {device.name} states none")
        n = len(qubits)
        two_qubit = np.zeros((n, n))
        if errors.two_qubit is not None:
            for a in range(n):
                for b in range(a):
                    rate = errors.two_qubit.at(qubits[a], qubits[b])
                    two_qubit[a, b] = two_qubit[b, a] = pauli_probability(rate, errors.two_qubit.kind, 2)
        t1, t2 = np.full(n, np.inf), np.full(n, np.inf)
        if errors.idle is not None:
            t1, t2 = 1e3 * np.array([errors.idle.at(q) for q in qubits]).reshape(n, 2).T
            if np.any(t2 > 2 * t1):
                raise InputError("t2", float(t2[t2 > 2 * t1][0] / 1e3), "at most twice t1")
        stated = {
            "one_qubit": errors.one_qubit,
            "two_qubit": errors.two_qubit,
            "readout_0to1": errors.readout_0to1,
            "readout_1to0": errors.readout_1to0,
            "idle": errors.idle,
        }
        return cls(
            one_qubit=_by_qubit(errors.one_qubit, qubits, 1),
            two_qubit=two_qubit,
            t1=t1,
            t2=t2,
            gate_times=(device.timings.one_qubit, device.timings.two_qubit),
            read_1_of_0=_by_qubit(errors.readout_0to1, qubits, None),
            read_0_of_1=_by_qubit(errors.readout_1to0, qubits, None),
            uncertainty={name: rate.uncertainty for name, rate in stated.items() if rate is not None},
        )

    def confusion(self, qubits: Sequence[int], sigmas: float = 0.0) -> FloatArray:
        """(k, 2, 2) probability [q, read, true] of each qubit, its flips so many standard uncertainties up."""
        up = np.minimum(1.0, self.read_1_of_0[list(qubits)] * (1 + sigmas * self.uncertainty.get("readout_0to1", 0.0)))
        down = np.minimum(
            1.0, self.read_0_of_1[list(qubits)] * (1 + sigmas * self.uncertainty.get("readout_1to0", 0.0))
        )
        return np.array([[1 - up, down], [up, 1 - down]]).transpose(2, 0, 1)


def _by_qubit(rate: Rate | None, qubits: Sequence[int], gate_size: int | None) -> FloatArray:
    """(n,) the probability at each qubit; a readout rate (no gate size) is a probability as it stands."""
    if rate is None:
        return np.zeros(len(qubits))
    if gate_size is None:
        return np.array([rate.at(q) for q in qubits], dtype=np.float64)
    return np.array([pauli_probability(rate.at(q), rate.kind, gate_size) for q in qubits], dtype=np.float64)


def idle_twirl(time: FloatArray, t1: FloatArray, t2: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Pauli-twirled relaxation: (p_x = p_y, p_z) after a time, all in the same unit.

    The twirl keeps the channel's entanglement fidelity (1 + exp(-t/T1) + 2 exp(-t/T2)) / 4 and loses its drift
    towards |0>.
    """
    flip = -np.expm1(-time / t1) / 4
    return flip, -np.expm1(-time / t2) / 2 - flip


@dataclass(frozen=True, slots=True, eq=False)
class ErrorPlaces:
    """Where the errors of one circuit can strike, in the order of the gates they follow.

    Args:
        row: (m,) gate after which it strikes, -1 before the first gate of the qubit.
        qubits: (m, 2) int32; the second -1 for an error on one qubit.
        source: (m,) index into SOURCES.
        probability: (m,) that any error strikes here.
        share_z: (m,) share of Z among the errors of one qubit, X and Y share the rest.
        slope: (m,) derivative of the probability with respect to ln(rate of the source).
        score_xy, score_z: (m,) derivative of ln(probability of that Pauli); those of two qubits are in score_xy.
    """

    row: IntArray
    qubits: IntArray
    source: IntArray
    probability: FloatArray
    share_z: FloatArray
    slope: FloatArray
    score_xy: FloatArray
    score_z: FloatArray

    def __len__(self) -> int:
        return len(self.row)

    def take(self, where: IntArray) -> ErrorPlaces:
        """Some of the places, in the order given."""
        return ErrorPlaces(*(getattr(self, name)[where] for name in self.__slots__))


def error_places(rows: GateRows, noise: NoiseModel) -> ErrorPlaces:
    """All places where the model lets an error strike with a probability above 0."""
    parts = [_gate_places(rows, noise), _idle_places(rows, noise)]
    return ErrorPlaces(*(np.concatenate([getattr(part, name) for part in parts]) for name in ErrorPlaces.__slots__))


def _gate_places(rows: GateRows, noise: NoiseModel) -> ErrorPlaces:
    a, b = rows.qubits.T
    probability = np.where(b < 0, noise.one_qubit[a], noise.two_qubit[a, b])
    real = np.flatnonzero(~VIRTUAL[rows.kind] & (probability > 0))
    ones = np.ones(len(real))
    p = probability[real]
    return ErrorPlaces(real, rows.qubits[real], (b[real] >= 0).astype(np.int64), p, ones / 3, p, ones, ones)


def _idle_places(rows: GateRows, noise: NoiseModel) -> ErrorPlaces:
    n = noise.n_qubits
    real = np.flatnonzero(~VIRTUAL[rows.kind])
    layers, where = np.unique(rows.layer[real], return_inverse=True)
    if noise.layer_times is not None:
        layers = np.flatnonzero(noise.layer_times)
        where = np.searchsorted(layers, rows.layer[real])
    busy = np.zeros((len(layers), n))
    times = np.array([0.0, *noise.gate_times])[N_QUBITS[rows.kind[real]]]
    for column in range(2):
        qubit = rows.qubits[real, column]
        busy[where[qubit >= 0], qubit[qubit >= 0]] = times[qubit >= 0]
    longest = busy.max(axis=1, initial=0.0) if noise.layer_times is None else noise.layer_times[layers]
    idle = longest[:, None] - busy
    flip, dephase = idle_twirl(idle, noise.t1, noise.t2)
    x1, x2 = idle / noise.t1, idle / noise.t2
    slope_flip = x1 * np.exp(-x1) / 4
    slope_dephase = x2 * np.exp(-x2) / 2 - slope_flip
    layer, qubit = np.nonzero(2 * flip + dephase > 0)
    at = (layer, qubit)
    total = (2 * flip + dephase)[at]
    row = np.full(len(layer), -1)
    for q in range(n):
        mine = np.flatnonzero(np.any(rows.qubits == q, axis=1))
        here = qubit == q
        if len(mine):
            before = np.searchsorted(rows.layer[mine], layers[layer[here]], side="right")
            row[here] = np.where(before > 0, mine[before - 1], -1)
    zero = np.zeros(len(layer))
    return ErrorPlaces(
        row,
        np.column_stack([qubit, np.full(len(qubit), -1)]).astype(np.int32),
        np.full(len(qubit), 2),
        total,
        dephase[at] / total,
        (2 * slope_flip + slope_dephase)[at],
        np.divide(slope_flip[at], flip[at], out=zero.copy(), where=flip[at] > 0),
        np.divide(slope_dephase[at], dephase[at], out=zero.copy(), where=dephase[at] > 0),
    )

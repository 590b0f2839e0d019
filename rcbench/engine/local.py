"""Circuits of which only a light cone is simulated: averages of single qubits, few measured qubits, echoes.

A register of 100 qubits is served as long as the cones are small enough for the memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, FloatArray
from rcbench.circuits.circuit import Circuit
from rcbench.engine import memory, tree
from rcbench.engine.cones import clusters, cone, cone_rows, layer_times, simplified
from rcbench.engine.distribution import Distribution
from rcbench.engine.noise import NoiseModel
from rcbench.engine.parts import Parts, Prediction
from rcbench.engine.register import How, needed_bytes, probability_blocks, whole_distributions
from rcbench.engine.work import Work
from rcbench.errors import InputError

REDUCED_FROM = 18  # qubits; below, looking for a cone costs as much as it saves
WORTH = 4  # a cone must have so many qubits less: circuits on their own registers share no beginnings
MOST_JOINT_BITS = 26  # of one distribution


def z_averages(
    circuit: Circuit,
    qubits: Sequence[int],
    *,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
    work: Work | None = None,
) -> FloatArray:
    """<Z> of single qubits in the final state of a circuit, each from its own light cone.

    Args:
        circuit: of any number of qubits; gates that cancel, as in echoes, are taken out first.
        qubits: whose averages are wanted.
        dtype, memory_limit, threads, work: as in `tree.walk`.
    Returns:
        (len(qubits),) from -1 to 1.
    Raises:
        InputError: a cone that does not fit the memory, a qubit outside, a reset or a gate after a measurement.
    """
    outside = [qubit for qubit in qubits if not 0 <= qubit < circuit.n_qubits]
    if outside:
        raise InputError("qubits", outside[0], f"qubits from 0 to {circuit.n_qubits - 1}")
    small, places = simplified(circuit), {qubit: place for place, qubit in enumerate(qubits)}
    groups = shared_cones(small, list(places))
    members = [cone(small, group)[0] for group in groups]
    out = np.zeros(circuit.n_qubits)
    for index, state in tree.walk(members, dtype=dtype, memory_limit=memory_limit, threads=threads, work=work):
        averages = z_of_all(state)
        out[list(groups[index])] = averages[list(members[index].measured_qubits)]
    return out[list(qubits)]


def z_of_all(state: ComplexArray) -> FloatArray:
    """(n,) <Z> of every qubit in a state (2**n,), in one pass over it, a block at a time."""
    n = len(state).bit_length() - 1
    out = np.zeros(n)
    for start, block in probability_blocks(state):
        outer = n - (len(block).bit_length() - 1)
        for qubit in range(outer, n):
            zero, one = block.reshape(2, -1)
            # sums in double precision also where probabilities are single
            out[qubit] += float(zero.sum(dtype=np.float64) - one.sum(dtype=np.float64))
            block = zero + one
        signs = 1.0 - 2.0 * (start >> np.arange(n - 1, n - 1 - outer, -1) & 1)
        out[:outer] += float(block[0]) * signs
    return out


def shared_cones(circuit: Circuit, qubits: Sequence[int]) -> list[tuple[int, ...]]:
    """The qubits in groups that are worked out from one cone: a qubit joins one that holds its own cone."""
    cones = {qubit: cone_rows(circuit, [qubit]) for qubit in qubits}
    groups: list[tuple[BoolArray, frozenset[int], list[int]]] = []
    for qubit in sorted(qubits, key=lambda qubit: -len(cones[qubit][1])):
        rows, used = cones[qubit]
        for kept, inside, members in groups:
            if inside.issuperset(used) and not np.any(rows & ~kept):
                members.append(qubit)
                break
        else:
            groups.append((rows, frozenset(used), [qubit]))
    return [tuple(sorted(members)) for _, _, members in groups]


@dataclass(frozen=True, slots=True, eq=False)
class Piece:
    """A cone to simulate. circuit: it, measuring its bits in order; qubits: behind its own; bits: classical bits."""

    circuit: Circuit
    qubits: tuple[int, ...]
    bits: tuple[int, ...]

    @classmethod
    def of(cls, circuit: Circuit, bits: Sequence[int]) -> Piece:
        """The cone of some classical bits of a circuit."""
        measured = circuit.measured_qubits
        part, qubits = cone(circuit, [measured[bit] for bit in bits])
        return cls(part, qubits, tuple(bits))

    def fits(self, noisy: bool, how: How) -> bool:
        """Whether it can be simulated within the memory."""
        limit = memory.available_memory() if how.memory_limit is None else how.memory_limit
        return len(self.bits) <= MOST_JOINT_BITS and (
            needed_bytes(self.circuit.n_qubits, len(self.bits), noisy, how.dtype) <= limit
        )


def reduces(circuit: Circuit, noise: NoiseModel | None, how: How) -> bool:
    """Whether to simulate cones instead of the whole register."""
    n = circuit.n_qubits
    if n < REDUCED_FROM:
        return False
    bits = range(len(circuit.measured_qubits))
    whole = Piece(circuit, tuple(range(n)), tuple(bits))
    if not whole.fits(noise is not None, how):
        return True
    return len(Piece.of(simplified(circuit) if noise is None else circuit, bits).qubits) <= n - WORTH


def on_cones(circuit: Circuit, noise: NoiseModel | None, how: How, work: Work) -> tuple[Prediction, Prediction | None]:
    """Ideal and noisy prediction from light cones; noisy is None where only the ideal one fits.

    Raises:
        InputError: a cone that does not fit the memory.
    """
    pieces, independent = _ideal_pieces(circuit, how)
    ideal = _predicted(circuit, [(piece, None) for piece in pieces], independent, how, work)
    noisy = _noisy_pieces(circuit, noise, how) if noise is not None else None
    return ideal, _predicted(circuit, noisy, False, how, work) if noisy else None


def cone_pieces(circuit: Circuit, noise: NoiseModel | None, how: How) -> list[tuple[Piece, NoiseModel | None]]:
    """Everything that `on_cones` simulates."""
    pieces: list[tuple[Piece, NoiseModel | None]] = [(piece, None) for piece in _ideal_pieces(circuit, how)[0]]
    return pieces + ((_noisy_pieces(circuit, noise, how) or []) if noise is not None else [])


def _ideal_pieces(circuit: Circuit, how: How) -> tuple[list[Piece], bool]:
    small = simplified(circuit)
    pieces, independent = _pieces(small, False, how)
    if pieces is None:
        worst = max(len(Piece.of(small, [bit]).qubits) for bit in range(len(circuit.measured_qubits)))
        raise InputError(
            "memory",
            f"{needed_bytes(worst, 1, False, how.dtype)} bytes for the light cone of one qubit, {worst} of "
            f"{circuit.n_qubits} qubits",
            "fewer qubits, a lower depth, or more memory",
        )
    return pieces, independent


def _noisy_pieces(circuit: Circuit, noise: NoiseModel, how: How) -> list[tuple[Piece, NoiseModel | None]] | None:
    """Cones of the circuit as it is, with their models: errors strike between gates, which then no longer cancel."""
    pieces, _ = _pieces(circuit, True, how)
    times = layer_times(circuit, noise.gate_times)
    return None if pieces is None else [(piece, noise.on(piece.qubits, times)) for piece in pieces]


def _pieces(circuit: Circuit, noisy: bool, how: How) -> tuple[list[Piece] | None, bool]:
    """Cones that hold all measured bits, and whether they are independent; None where they do not fit.

    One joint cone if it fits, else one for each set of qubits that gates connect, else one for each qubit.
    """
    measured = circuit.measured_qubits
    if len(measured) <= MOST_JOINT_BITS:
        joint = Piece.of(circuit, range(len(measured)))
        if joint.fits(noisy, how):
            return [joint], True
    bit_of = {qubit: bit for bit, qubit in enumerate(measured)}
    parted = [[bit_of[q] for q in group if q in bit_of] for group in clusters(circuit)]
    pieces = [Piece.of(circuit, bits) for bits in parted if bits]
    if not noisy and all(piece.fits(noisy, how) for piece in pieces):
        return pieces, True
    single = [Piece.of(circuit, [bit_of[q] for q in group]) for group in shared_cones(circuit, measured)]
    if all(piece.fits(noisy, how) for piece in single):
        return single, False
    return None, False


def _predicted(
    circuit: Circuit, pieces: list[tuple[Piece, NoiseModel | None]], independent: bool, how: How, work: Work
) -> Prediction:
    found: list[Distribution] = []
    for piece, model in pieces:
        ((_, ideal, noisy),) = whole_distributions([piece.circuit], model, how, work)
        found.append(ideal if noisy is None else noisy)
    if len(pieces) == 1:
        return found[0]
    return Parts(len(circuit.measured_qubits), tuple(piece.bits for piece, _ in pieces), tuple(found), independent)

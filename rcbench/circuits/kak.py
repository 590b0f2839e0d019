"""The canonical form of two-qubit gates, many at once.

Every U in U(4) is, up to phase, (A1 x B1) exp(i (x XX + y YY + z ZZ)) (A2 x B2), with coordinates that can be brought
to the Weyl chamber pi/4 >= x >= y >= |z| (and z >= 0 where x = pi/4).

Source: Zhang, Vala, Sastry and Whaley, Phys. Rev. A 67, 042313 (2003).
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import permutations, product

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.circuits.gates import gate_matrix
from rcbench.errors import InputError

UNITARY_TOLERANCE = 1e-8
# the real and imaginary parts are diagonalised by one mix of both; where its eigenvalues nearly meet, by another
_MIXES = (0.613, 1.217, 2.171, 2.749, 0.259, 1.847)
_GOOD = 2e-14
_ENOUGH = 1e-6  # inputs may be unitary to UNITARY_TOLERANCE only

PAULIS = np.array([gate_matrix(name) for name in "xyz"])
# columns: four Bell states with the phases that make local gates real
_MAGIC = np.array([[1, 0, 0, 1j], [0, 1j, 1, 0], [0, 1j, -1, 0], [1, 0, 0, -1j]]) / np.sqrt(2)
# eigenvalues of XX, YY and ZZ on those columns
_SIGNS = np.array([[1, 1, -1, -1], [-1, 1, -1, 1], [1, -1, -1, 1]])


@dataclass(frozen=True, slots=True)
class Canonical:
    """Gates as local gates around canonical ones, up to phase.

    Args:
        before: (m, 2, 2, 2) one-qubit unitaries that act first, [gate, qubit].
        coordinates: (m, 3) the angles x, y, z of exp(i (x XX + y YY + z ZZ)).
        after: (m, 2, 2, 2) one-qubit unitaries that act last.
    """

    before: ComplexArray
    coordinates: FloatArray
    after: ComplexArray

    def __len__(self) -> int:
        return len(self.coordinates)

    def __getitem__(self, rows: IntArray | slice | np.ndarray) -> Canonical:
        return Canonical(self.before[rows], self.coordinates[rows], self.after[rows])

    def matrices(self) -> ComplexArray:
        """(m, 4, 4) the gates, up to phase."""
        return kron(self.after) @ interaction(self.coordinates) @ kron(self.before)


def interaction(coordinates: FloatArray) -> ComplexArray:
    """(m, 4, 4) the gates exp(i (x XX + y YY + z ZZ)) of (m, 3) coordinates."""
    phases = np.exp(1j * (np.asarray(coordinates) @ _SIGNS))
    return np.asarray((_MAGIC * phases[..., None, :]) @ _MAGIC.conj().T)


def kron(locals_: ComplexArray) -> ComplexArray:
    """(..., 4, 4) products of one-qubit gates (..., 2, 2, 2), the first qubit the most significant."""
    first, second = locals_[..., 0, :, :], locals_[..., 1, :, :]
    out = first[..., :, None, :, None] * second[..., None, :, None, :]
    return out.reshape(*out.shape[:-4], 4, 4)


def split_kron(matrices: ComplexArray) -> ComplexArray:
    """(m, 2, 2, 2) the one-qubit gates of (m, 4, 4) local gates, each of determinant 1."""
    m = len(matrices)
    blocks = (
        matrices.reshape(m, 2, 2, 2, 2).transpose(0, 1, 3, 2, 4).reshape(m, 4, 2, 2)
    )  # [row and column of the first]
    largest = np.argmax(np.einsum("mbij,mbij->mb", blocks, blocks.conj()).real, axis=1)
    second = _special(blocks[np.arange(m), largest])
    first = np.einsum("mbij,mij->mb", blocks, second.conj()).reshape(m, 2, 2)
    return np.stack([_special(first), second], axis=1)


def canonical(unitaries: ComplexArray) -> Canonical:
    """The canonical form of (m, 4, 4) unitaries, coordinates in the Weyl chamber.

    Raises:
        InputError: a matrix that is not unitary to 1e-8.
    """
    gates = _special(_check(unitaries))
    magic = _MAGIC.conj().T @ gates @ _MAGIC
    square = magic.swapaxes(1, 2) @ magic
    frame = _eigenframe(square)
    phases = np.einsum("mji,mjk,mki->mi", frame, square, frame)
    theta = np.angle(phases) / 2
    odd = np.round(theta.sum(axis=1) / np.pi).astype(int) % 2 != 0
    theta[odd, 0] += np.pi
    turned = (magic @ frame * np.exp(-1j * theta)[:, None, :]).real
    after = split_kron(_MAGIC @ turned @ _MAGIC.conj().T)
    before = split_kron(_MAGIC @ frame.swapaxes(1, 2) @ _MAGIC.conj().T)
    return to_chamber(Canonical(before, theta @ _SIGNS.T / 4, after))


def to_chamber(form: Canonical) -> Canonical:
    """The same gates with their coordinates moved into the Weyl chamber by local gates."""
    before, xyz, after = form.before, form.coordinates.copy(), form.after
    # exp(i pi/2 PP) is P x P up to phase
    turns = np.round(xyz / (np.pi / 2)).astype(int)
    xyz -= turns * (np.pi / 2)
    for axis, pauli in enumerate(PAULIS):
        odd = turns[:, axis] % 2 != 0
        after = np.where(odd[:, None, None, None], after @ pauli, after)
    order = np.argsort(-np.abs(xyz), axis=1, kind="stable")
    frames = _FRAMES[order[:, 0], order[:, 1]][:, None]
    before, after = frames @ before, after @ frames.conj().swapaxes(2, 3)
    xyz = np.take_along_axis(xyz, order, axis=1)
    # a Pauli on one qubit, on both sides, turns the signs of the two other coordinates
    negative = xyz < 0
    before, xyz, after = _turn_signs(before, xyz, after, np.array([[0, 1], [2, 3]])[*negative[:, :2].T.astype(int)])
    edge = (xyz[:, 0] > np.pi / 4 - 1e-11) & (xyz[:, 2] < -1e-11)
    xyz[edge, 0] -= np.pi / 2
    after = np.where(edge[:, None, None, None], after @ PAULIS[0], after)
    return Canonical(*_turn_signs(before, xyz, after, np.where(edge, 2, 0)))


def _turn_signs(
    before: ComplexArray, xyz: FloatArray, after: ComplexArray, which: IntArray
) -> tuple[ComplexArray, FloatArray, ComplexArray]:
    """which: (m,) the Pauli: 0 none, 1 X (turns the signs of y and z), 2 Y (of x and z), 3 Z (of x and y)."""
    pauli = np.concatenate([np.eye(2)[None], PAULIS])[which]
    signs = np.array([[1, 1, 1], [1, -1, -1], [-1, 1, -1], [-1, -1, 1]])[which]
    before, after = before.copy(), after.copy()
    before[:, 0] = pauli @ before[:, 0]
    after[:, 0] = after[:, 0] @ pauli
    return before, xyz * signs, after


def _check(unitaries: ComplexArray) -> ComplexArray:
    matrices = np.asarray(unitaries, dtype=np.complex128)
    if matrices.ndim != 3 or matrices.shape[1:] != (4, 4):
        raise InputError("unitaries", matrices.shape, "an array of shape (gates, 4, 4)")
    error = np.abs(matrices @ matrices.conj().swapaxes(1, 2) - np.eye(4)).max(initial=0.0)
    if not error < UNITARY_TOLERANCE:
        raise InputError("unitaries", f"a matrix {error:.1g} from unitary", "unitary matrices, to 1e-8")
    return matrices


def _special(matrices: ComplexArray) -> ComplexArray:
    """The matrices over a root of their determinant."""
    side = matrices.shape[-1]
    return np.asarray(matrices / (np.linalg.det(matrices) ** (1 / side))[..., None, None])


def _eigenframe(square: ComplexArray) -> FloatArray:
    """(m, 4, 4) rotations whose columns are the common eigenvectors of the real and imaginary parts."""
    best = np.empty(square.shape)
    worst = np.full(len(square), np.inf)
    left = np.arange(len(square))
    for mix in _MIXES:
        part = square[left]
        _, frame = np.linalg.eigh(np.cos(mix) * part.real + np.sin(mix) * part.imag)
        rest = frame.swapaxes(1, 2) @ part @ frame
        error = np.abs(rest * (1 - np.eye(4))).max(axis=(1, 2))
        better = error < worst[left]
        best[left[better]], worst[left[better]] = frame[better], error[better]
        left = left[worst[left] > _GOOD]
        if not len(left):
            break
    assert worst.max(initial=0.0) < _ENOUGH, "no mix of the real and imaginary parts separates the eigenvalues"
    best[:, :, 0] *= np.where(np.linalg.det(best) < 0, -1, 1)[:, None]
    return best


def _axis_frames() -> ComplexArray:
    """(3, 3, 2, 2) by [i, j]: the Clifford that takes Pauli i to +-X and Pauli j to +-Y, so the third one to +-Z."""
    out = np.zeros((3, 3, 2, 2), dtype=np.complex128)
    gates = [np.eye(2), gate_matrix("s"), gate_matrix("h"), gate_matrix("sx")]
    for i, j, _ in permutations(range(3)):
        for one, two in product(gates, gates):
            clifford = two @ one
            moved = clifford @ PAULIS[[i, j]] @ clifford.conj().T
            if np.allclose(np.abs(np.einsum("kab,kba->k", moved, PAULIS[:2])), 2):
                out[i, j] = clifford
                break
    return out


_FRAMES = _axis_frames()

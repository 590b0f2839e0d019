"""What a unitary of one or two qubits is called: the gate kind and angles that equal it up to a global phase."""

from __future__ import annotations

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from rcbench.circuits.gates import CODE, KINDS, N_PARAMETERS, gate_matrix
from rcbench.circuits.native import euler_angles, snap
from rcbench.circuits.qasm_expressions import ExpressionError

TOLERANCE = 1e-9  # far above rounding in a gate's body, far below any angle that a control system sets
MAX_EXPONENT = 1_000_000
_EXCHANGE = [0, 2, 1, 3]


def kind_matrices(name: str, parameters: FloatArray) -> ComplexArray:
    """(m, d, d) matrices of one of our kinds from its (m, k) parameters; k may be 0."""
    matrices = KINDS[CODE[name]].matrices
    assert matrices is not None
    return matrices(parameters)


def same_up_to_phase(first: ComplexArray, second: ComplexArray) -> BoolArray:
    """(m,) true where two stacks of (m, d, d) unitaries agree up to a phase each."""
    d = first.shape[-1]
    overlap = np.einsum("mij,mij->m", first.conj(), second)
    phase = overlap / np.where(np.abs(overlap) > 0, np.abs(overlap), 1)
    return np.asarray(np.abs(first * phase[:, None, None] - second).max(axis=(1, 2), initial=0) < TOLERANCE * d)


def recognise(matrices: ComplexArray) -> tuple[IntArray, FloatArray]:
    """Gate kinds and angles of (m, 2, 2) or (m, 4, 4) unitaries.

    Returns:
        (m,) index into `gates.KINDS` and (m, p) parameters, each row filled as far as its kind asks: rz for a diagonal
        one-qubit gate, u for any other; cz, cx, iswap, sqrt_iswap, zz and fsim where they fit, else matrix2.
    """
    return _one_qubit(matrices) if matrices.shape[-1] == 2 else _two_qubit(matrices)


def fixed_kind(matrix: ComplexArray) -> str:
    """The name of the gate kind without parameters that a (d, d) unitary equals up to a phase; empty if none."""
    for kind in KINDS:
        candidate = kind.matrices is not None and not kind.n_parameters and 2**kind.n_qubits == len(matrix)
        if candidate and same_up_to_phase(matrix[None], gate_matrix(kind.name)[None])[0]:
            return kind.name
    return ""


def row_parameters(code: int, parameters: FloatArray) -> tuple[float, ...]:
    """The parameters of one row that `recognise` returned."""
    return tuple(parameters[: N_PARAMETERS[code]].tolist())


def _one_qubit(matrices: ComplexArray) -> tuple[IntArray, FloatArray]:
    angles = euler_angles(matrices)
    diagonal = np.abs(matrices[:, 0, 1]) < TOLERANCE
    turn = snap(np.angle(matrices[:, 1, 1] * matrices[:, 0, 0].conj()))
    parameters = np.where(diagonal[:, None], np.stack([turn, 0 * turn, 0 * turn], axis=1), angles)
    return np.where(diagonal, CODE["rz"], CODE["u"]), parameters


def _two_qubit(matrices: ComplexArray) -> tuple[IntArray, FloatArray]:
    m = len(matrices)
    code = np.full(m, CODE["matrix2"])
    parameters = np.stack([matrices.real, matrices.imag], axis=-1).reshape(m, 32)
    corner = matrices[:, 0, 0]
    unit = np.where(np.abs(corner) > 0.5, corner / np.maximum(np.abs(corner), 0.5), 1)
    scaled = matrices * unit.conj()[:, None, None]
    a, b, last = scaled[:, 1, 1], scaled[:, 1, 2], scaled[:, 3, 3]
    guesses = (  # the first that fits: fixed gates before families, so that a named gate keeps its name
        ("cz", np.zeros((m, 0))),
        ("cx", np.zeros((m, 0))),
        ("iswap", np.zeros((m, 0))),
        ("sqrt_iswap", np.zeros((m, 0))),
        ("zz", np.angle(a)[:, None]),
        ("fsim", np.stack([np.arctan2(-b.imag, a.real), -np.angle(last)], axis=1)),
    )
    open_rows = np.ones(m, dtype=bool)
    for name, guess in guesses:
        angles = snap(guess)
        fits = open_rows & same_up_to_phase(matrices, kind_matrices(name, angles))
        code[fits] = CODE[name]
        parameters[fits, : angles.shape[1]] = angles[fits]
        open_rows &= ~fits
    return code, parameters


def controlled(matrices: ComplexArray, on: bool) -> ComplexArray:
    """(m, 2d, 2d) unitaries with a control qubit in front, acting where the control is 1 (or 0 where not `on`)."""
    m, d, _ = matrices.shape
    out = np.zeros((m, 2 * d, 2 * d), dtype=np.complex128)
    acts, rests = (slice(d, None), slice(0, d)) if on else (slice(0, d), slice(d, None))
    out[:, acts, acts] = matrices
    out[:, rests, rests] = np.eye(d)
    return out


def power(matrices: ComplexArray, exponents: FloatArray) -> ComplexArray:
    """(m, d, d) powers of unitaries, the principal ones: eigenphases from -pi (excluded) to pi are multiplied.

    Raises:
        ExpressionError: an exponent so large that rounding decides.
    """
    from scipy.linalg import schur

    far = np.flatnonzero(np.abs(exponents) > MAX_EXPONENT)
    if len(far):
        raise ExpressionError(str(exponents[far[0]]), f"powers from -{MAX_EXPONENT} to {MAX_EXPONENT}", int(far[0]))
    stacked = np.broadcast_to(matrices, (len(exponents), *matrices.shape[1:]))
    out = np.empty_like(stacked)
    for place, (matrix, exponent) in enumerate(zip(stacked, exponents.tolist(), strict=True)):
        if exponent == int(exponent) and abs(exponent) <= 64:
            out[place] = np.linalg.matrix_power(matrix if exponent >= 0 else matrix.conj().T, abs(int(exponent)))
            continue
        # the Schur form of a normal matrix is diagonal, and its vectors stay orthogonal where eigenvalues meet
        triangle, vectors = schur(matrix, output="complex")
        phases = np.angle(np.diag(triangle))
        phases[phases < -np.pi + TOLERANCE] = np.pi  # -1 with rounding has the same root as -1 without
        out[place] = (vectors * np.exp(1j * phases * exponent)) @ vectors.conj().T
    return out


def apply_on(gate: ComplexArray, places: tuple[int, ...], state: ComplexArray) -> ComplexArray:
    """A gate on some of the qubits of a body, after what `state` holds.

    Args:
        gate: (m or 1, d, d). places: which qubit of the body each of its qubits is. state: (m or 1, D, D), D 2 or 4.
    Returns:
        (m, D, D) the product.
    """
    if gate.shape[-1] == 1 or gate.shape[-1] == state.shape[-1]:
        if places == (1, 0):
            gate = gate[:, _EXCHANGE][:, :, _EXCHANGE]
        return gate * state if gate.shape[-1] == 1 else gate @ state
    eye = np.zeros((len(gate), 4, 4), dtype=np.complex128)
    grid = eye.reshape(-1, 2, 2, 2, 2)  # a view: [m, out 0, out 1, in 0, in 1]
    for spectator in range(2):
        if places == (0,):
            grid[:, :, spectator, :, spectator] = gate
        else:
            grid[:, spectator, :, spectator, :] = gate
    return eye @ state

"""The Clifford groups of one and two qubits, by number, up to phase; exact in every native gate they are served on.

A two-qubit Clifford is one-qubit Cliffords around one of four interactions, so it needs no numerical decomposition: its
native gates and their angles come from tables, the same on every machine.
"""

from __future__ import annotations

import numpy as np

from rcbench.arrays import ComplexArray, IntArray
from rcbench.circuits import compile as compiler
from rcbench.circuits import native
from rcbench.circuits.gates import gate_matrix
from rcbench.circuits.kak import Canonical
from rcbench.device import NativeGate
from rcbench.errors import InputError

# two-qubit Cliffords by class: local, CNOT-like, iSWAP-like, SWAP-like
# (Corcoles et al., Phys. Rev. A 87, 030301 (2013))
CLASSES = (576, 5184, 5184, 576)
ORDER = sum(CLASSES)


def two_qubit_cliffords(index: IntArray) -> Canonical:
    """Two-qubit Cliffords by number, in canonical form: one-qubit Cliffords around an interaction of the Weyl chamber.

    The group is the local gates, 24 x 24, times one of four interactions. In the CNOT-like and iSWAP-like classes the
    gates that act first need only be one of three on each qubit, the turns that carry X to Y to Z: all others can be
    moved through the interaction. So the 576 + 9 x 576 + 9 x 576 + 576 = 11520 elements are met once each.

    Args:
        index: (m,) whole numbers from 0 to 11519: local gates, then CNOT-like, iSWAP-like, SWAP-like ones.
    Raises:
        InputError: a number outside the group.
    """
    index, kind = _classes(index)
    local, turn = np.divmod(index, np.array(CLASSES)[kind] // CLASSES[0])
    before = CLIFFORD1[_CYCLIC[np.stack([turn // 3, turn % 3], axis=-1)]]
    after = CLIFFORD1[np.stack(np.divmod(local, len(CLIFFORD1)), axis=-1)]
    return Canonical(before, _INTERACTIONS[kind], after)


def decompose_cliffords(index: IntArray, gate: NativeGate) -> compiler.Decomposition:
    """Two-qubit Cliffords by number, in native gates: 0, 1, 2 and 3 by class for CZ, 0, 2, 1 and 3 for iSWAP.

    Raises:
        InputError: a number outside the group, or a native gate on which two-qubit unitaries are not served.
    """
    form = two_qubit_cliffords(index)
    if gate.name != "sqrt-iswap":
        return compiler.decompose_canonical(form, gate.name, native.served_parameters(gate))
    _, kind = _classes(index)
    count = np.array([0, 2, 2, 3])[kind]
    steps = _SQRT_ISWAP_STEPS[kind]
    rows = np.arange(len(count))
    steps[rows, 0] = steps[rows, 0] @ form.before
    steps[rows, count] = form.after @ steps[rows, count]
    return compiler.Decomposition(gate.name, count, native.euler_angles(steps), np.zeros((len(count), compiler.MOST)))


def _classes(index: IntArray) -> tuple[IntArray, IntArray]:
    """(m,) number inside the class, (m,) class."""
    index = np.asarray(index)
    outside = index[(index < 0) | (index >= ORDER)]
    if outside.size:
        raise InputError("clifford", int(outside[0]), f"0 to {ORDER - 1}")
    start = np.cumsum((0, *CLASSES))
    kind = np.searchsorted(start, index, side="right") - 1
    return index - start[kind], kind


def _clifford_table() -> ComplexArray:
    """(24, 2, 2) the rotations of a cube, each as w - i (x X + y Y + z Z).

    1 identity, 3 half turns and 6 quarter turns about its axes, 6 half turns about its edges, 8 third turns about its
    diagonals.
    """
    h, axes = np.sqrt(0.5), np.eye(3)
    quaternions: list[tuple[float, ...]] = [(1, 0, 0, 0), (0, 1, 0, 0), (0, 0, 1, 0), (0, 0, 0, 1)]
    quaternions += [(h, *(sign * h * axis)) for axis in axes for sign in (1, -1)]
    quaternions += [(0, *(h * axes[a] + sign * h * axes[b])) for a, b in ((0, 1), (0, 2), (1, 2)) for sign in (1, -1)]
    quaternions += [(0.5, x / 2, y / 2, z / 2) for x in (1, -1) for y in (1, -1) for z in (1, -1)]
    basis = np.array([np.eye(2), *(-1j * gate_matrix(name) for name in "xyz")])
    return np.asarray(np.einsum("mk,kij->mij", np.array(quaternions), basis))


def _sqrt_iswap_steps() -> ComplexArray:
    """(4, 4, 2, 2, 2) by [class, step, qubit]: local gates around sqrt-iSWAP that make the four interactions.

    sqrt-iSWAP is exp(i pi/8 (XX + YY)). Two of them with X on one qubit around the second leave XX, two are iSWAP, and
    the three forms turned to XX + YY, YY + ZZ and ZZ + XX together are SWAP.
    """
    steps = np.broadcast_to(np.eye(2, dtype=np.complex128), (4, 4, 2, 2, 2)).copy()
    steps[1, 1:3, 0] = gate_matrix("x")
    turn = CLIFFORD1[_CYCLIC[1]]
    steps[3, :3] = turn
    return steps


CLIFFORD1 = _clifford_table()
CLIFFORD1.flags.writeable = False
_CYCLIC = np.array([0, 16, 23])  # identity and the third turns either way about (1, 1, 1)
_INTERACTIONS = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [1, 1, 1]]) * (np.pi / 4)
_SQRT_ISWAP_STEPS = _sqrt_iswap_steps()

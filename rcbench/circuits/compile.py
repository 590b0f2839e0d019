"""Two-qubit unitaries as native gates: `decompose` works out many at once, `add_two_qubit` adds one logical layer.

The number of native gates is the least there is (for cz, iswap, sqrt-iswap; zz at any angle takes one a coordinate).
Everything holds up to a global phase.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import ComplexArray, FloatArray, IntArray
from rcbench.circuits import forms, kak, native as native_gates
from rcbench.circuits.circuit import CircuitBuilder
from rcbench.circuits.sqrt_iswap import sqrt_iswap_count, sqrt_iswap_locals
from rcbench.circuits.gates import KINDS, CODE, gate_matrix
from rcbench.device import NATIVE_TWO_QUBIT, Device, Pair
from rcbench.errors import InputError, suggest

MOST = 3  # native gates that any two-qubit unitary needs at most
ANGLE_TOLERANCE = 1e-7


@dataclass(frozen=True, slots=True)
class Decomposition:
    """Two-qubit unitaries as native gates with local gates between, sliceable as decomposition[rows].

    Args:
        native: one of `device.NATIVE_TWO_QUBIT`.
        count: (m,) native gates of each, 0 to 3.
        euler: (m, 4, 2, 3) angles (t, p, l) of the gate u by [gate, step, qubit]: step 0 before the first native gate,
            step `count` after the last one; zero beyond.
        angles: (m, 3) angle of each native zz gate; zero for the other native gates.
    """

    native: str
    count: IntArray
    euler: FloatArray
    angles: FloatArray

    def __len__(self) -> int:
        return len(self.count)

    def __getitem__(self, rows: IntArray | slice) -> Decomposition:
        return Decomposition(self.native, self.count[rows], self.euler[rows], self.angles[rows])

    @property
    def locals(self) -> ComplexArray:
        """(m, 4, 2, 2, 2) the local gates as matrices."""
        matrices = KINDS[CODE["u"]].matrices
        assert matrices is not None
        return matrices(self.euler.reshape(-1, 3)).reshape(*self.euler.shape[:-1], 2, 2)


def decompose(unitaries: ComplexArray, native: str, parameters: Sequence[float] = ()) -> Decomposition:
    """Decompose (m, 4, 4) unitaries, the first qubit the most significant, into a native gate.

    Args:
        unitaries: (m, 4, 4).
        native: one of `device.NATIVE_TWO_QUBIT`.
        parameters: the native gate's angles: fsim (pi/2, 0) or (-pi/2, 0); zz (pi/2,), (-pi/2,) or () for any angle.
    Raises:
        InputError: not unitary, an unknown native gate, or one at angles that do not serve every unitary.
    """
    return decompose_canonical(kak.canonical(unitaries), native, parameters)


def decompose_canonical(form: kak.Canonical, native: str, parameters: Sequence[float] = ()) -> Decomposition:
    """The same for gates in canonical form, with coordinates in the Weyl chamber."""
    class_, before, after = _native_class(native, parameters)
    count_of, locals_of = _FORMS[class_]
    coordinates = forms.clean(form.coordinates)
    count = count_of(coordinates)
    m = len(count)
    euler, angles = np.zeros((m, MOST + 1, 2, 3)), np.zeros((m, MOST))
    for n in np.unique(count):
        rows = np.flatnonzero(count == n)
        steps = locals_of(coordinates[rows], int(n))
        steps = forms.dress(steps, before, after)
        steps[:, 0] = steps[:, 0] @ form.before[rows]
        steps[:, -1] = form.after[rows] @ steps[:, -1]
        euler[rows, : n + 1] = native_gates.euler_angles(steps)
    if class_ == "any-zz":
        angles = 2 * np.abs(coordinates)
    return Decomposition(native, count, euler, angles)


def add_two_qubit(
    builder: CircuitBuilder,
    device: Device,
    qubits: Sequence[int],
    pairs: Sequence[Pair],
    unitaries: ComplexArray | Decomposition,
    native: str,
) -> None:
    """Add one logical layer of two-qubit unitaries as native rows, its gates in aligned native layers.

    Args:
        builder: the circuit so far; the rows start in its current layer and a new layer follows them.
        device: gives the native gates, their angles and the limits on what runs at once.
        qubits: device qubit of each label of the circuit.
        pairs: m pairs of labels, no label twice.
        unitaries: (m, 4, 4), the first label of each pair the most significant; or their decomposition.
        native: native two-qubit gate.
    Raises:
        InputError: a native gate that the device lacks or that does not serve every unitary.
    """
    if not len(pairs):
        return
    if not isinstance(unitaries, Decomposition):
        unitaries = decompose(unitaries, native, native_gates.served_parameters(device.native(native)))
    place = np.asarray(pairs)
    count = unitaries.count
    for step in range(int(count.max()) + 1):
        here = count >= step
        native_gates.add_euler(builder, device.one_qubit, place[here].ravel(), unitaries.euler[here, step].reshape(-1, 3))
        gates = [pair for pair, n in zip(pairs, count.tolist(), strict=True) if n > step]
        if gates:
            angles = unitaries.angles[count > step, step] if native == "zz" else None
            _add_gates(builder, device, qubits, gates, native, angles)


def add_native(
    builder: CircuitBuilder,
    device: Device,
    qubits: Sequence[int],
    pairs: Sequence[Pair],
    name: str,
    angle: float | None = None,
    negative: bool = False,
) -> None:
    """Add one logical layer of the device's own two-qubit gate, with the angles of each coupler.

    Args:
        name: native gate, one of `device.NATIVE_TWO_QUBIT`.
        angle: of zz, where the device offers any angle.
        negative: all angles negated (fsim and zz).
    Raises:
        InputError: a gate that the device lacks, an angle that it does not offer, or a missing angle.
    """
    gate = device.native(name)
    any_angle = name == "zz" and not gate.parameters and not gate.by_coupler
    if any_angle and angle is None:
        raise InputError("angle", None, f"an angle for zz, since {device.name} offers any")
    if not any_angle and angle is not None:
        raise InputError("angle", angle, f"no angle: {name} of {device.name} has its own")
    angles = np.full(len(pairs), -angle if negative else angle) if angle is not None else None
    _add_gates(builder, device, qubits, pairs, name, angles, negative)


def _add_gates(
    builder: CircuitBuilder,
    device: Device,
    qubits: Sequence[int],
    pairs: Sequence[Pair],
    name: str,
    angles: FloatArray | None = None,
    negative: bool = False,
) -> None:
    from rcbench.circuits.schedule import native_slots

    gate = device.native(name)
    kind = name.replace("-", "_")
    own = dict(zip(pairs, angles.tolist(), strict=True)) if angles is not None else {}
    for slot in native_slots(pairs, device, qubits):
        if not KINDS[CODE[kind]].n_parameters:
            parameters = None
        elif own:
            parameters = np.array([[own[pair]] for pair in slot])
        else:
            values = np.array([gate.at((qubits[a], qubits[b])) for a, b in slot])
            parameters = -values if negative else values
        builder.add_rows(kind, np.array(slot), parameters)
        builder.next_layer()


def _native_class(native: str, parameters: Sequence[float]) -> tuple[str, ComplexArray, ComplexArray]:
    """The form that serves a native gate, and the local gates before and after it that make it the form's own gate."""
    one = np.broadcast_to(np.eye(2), (2, 2, 2))
    z_first = np.stack([gate_matrix("z"), np.eye(2)])
    if native not in NATIVE_TWO_QUBIT:
        raise InputError("native", native, suggest(native, NATIVE_TWO_QUBIT))
    if native == "zz" and not parameters:
        return "any-zz", one, one
    if native == "zz" and abs(abs(parameters[0]) - np.pi / 2) < ANGLE_TOLERANCE:
        # CZ is exp(i pi/4 ZZ), which is zz(-pi/2), and a quarter turn about Z on each qubit
        turn = gate_matrix("s" if parameters[0] < 0 else "sdg")
        return "cz", np.stack([turn, turn]), one
    if native == "zz":
        raise InputError("zz", parameters[0], "pi/2, -pi/2 or any angle, where two-qubit unitaries are compiled to it")
    if native == "fsim":
        if len(parameters) != 2 or abs(abs(parameters[0]) - np.pi / 2) > ANGLE_TOLERANCE or abs(parameters[1]) > ANGLE_TOLERANCE:
            raise InputError("fsim", tuple(parameters), "(pi/2, 0) or (-pi/2, 0), where two-qubit unitaries are compiled to it")
        return ("iswap", z_first, z_first) if parameters[0] > 0 else ("iswap", one, one)
    return native, one, one


_FORMS = {
    "cz": (forms.cz_count, forms.cz_locals),
    "iswap": (forms.iswap_count, forms.iswap_locals),
    "sqrt-iswap": (sqrt_iswap_count, sqrt_iswap_locals),
    "any-zz": (forms.zz_count, forms.zz_locals),
}

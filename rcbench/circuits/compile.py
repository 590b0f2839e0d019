"""Two-qubit unitaries as native gates: `decompose` works out many at once, `add_two_qubit` adds one logical layer.

The number of native gates is the least there is (for cz, iswap, sqrt-iswap; zz at any angle takes one a coordinate).
Everything holds up to a global phase.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from rcbench.circuits import forms, kak
from rcbench.circuits import native as native_gates
from rcbench.circuits.circuit import CircuitBuilder
from rcbench.circuits.gates import CODE, KINDS, gate_matrices, gate_matrix
from rcbench.circuits.native import ANGLE_TOLERANCE, Pulse
from rcbench.circuits.schedule import native_slots
from rcbench.circuits.sqrt_iswap import sqrt_iswap_count, sqrt_iswap_locals
from rcbench.device import NATIVE_TWO_QUBIT, Device, NativeGate, Pair
from rcbench.errors import InputError, suggest

MOST = 3  # native gates that any two-qubit unitary needs at most


class Decomposition:
    """Two-qubit unitaries as native gates with local gates between, sliceable as decomposition[rows].

    Slices share what was worked out for the whole: decompose the gates of many layers at once, then add slices.

    Args:
        native: one of `device.NATIVE_TWO_QUBIT`.
        count: (m,) native gates of each, 0 to 3.
        euler: (m, 4, 2, 3) angles (t, p, l) of the gate u by [gate, step, qubit]: step 0 before the first native gate,
            step `count` after the last one; zero beyond.
        angles: (m, 3) angle of each native zz gate where any angle is native; zero otherwise.
    """

    def __init__(self, native: str, count: IntArray, euler: FloatArray, angles: FloatArray) -> None:
        self.native, self.count, self.euler, self.angles = native, count, euler, angles
        self._whole: Decomposition = self
        self._rows: IntArray = np.arange(len(count))
        self._pulses: dict[str, tuple[Pulse, ...]] = {}

    def __len__(self) -> int:
        return len(self.count)

    def __getitem__(self, rows: IntArray | BoolArray | slice) -> Decomposition:
        part = Decomposition(self.native, self.count[rows], self.euler[rows], self.angles[rows])
        part._whole, part._rows = self._whole, self._rows[rows]
        return part

    @property
    def locals(self) -> ComplexArray:
        """(m, 4, 2, 2, 2) the local gates as matrices."""
        return gate_matrices("u", self.euler)

    def pulses(self, one_qubit: str) -> tuple[Pulse, ...]:
        """The native layers of the local gates, each (m, 4, 2), in one of `device.NATIVE_ONE_QUBIT`."""
        known = self._whole._pulses
        if one_qubit not in known:
            known[one_qubit] = native_gates.pulses(one_qubit, self._whole.euler)
        return tuple(pulse[self._rows] for pulse in known[one_qubit])


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
    form_name, before, after = _native_form(native, parameters)
    count_of, locals_of = _FORMS[form_name]
    coordinates = forms.clean(form.coordinates)
    count = count_of(coordinates)
    m = len(count)
    euler, angles = np.zeros((m, MOST + 1, 2, 3)), np.zeros((m, MOST))
    for n in np.unique(count):
        rows = np.flatnonzero(count == n)
        steps = forms.dress(locals_of(coordinates[rows], int(n)), before, after)
        steps[:, 0] = steps[:, 0] @ form.before[rows]
        steps[:, -1] = form.after[rows] @ steps[:, -1]
        euler[rows, : n + 1] = native_gates.euler_angles(steps)
    if form_name == "any-zz":
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
    if not pairs:
        return
    if not isinstance(unitaries, Decomposition):
        unitaries = decompose(unitaries, native, native_gates.served_parameters(device.native(native)))
    place = np.asarray(pairs)
    pulses = unitaries.pulses(device.one_qubit)
    counts = unitaries.count.tolist()
    any_angle = native == "zz" and not native_gates.served_parameters(device.native(native))
    for step in range(max(counts) + 1):
        native_gates.add_pulses(builder, place, (pulse[:, step] for pulse in pulses))  # none beyond a gate's own steps
        gates = [pair for pair, count in zip(pairs, counts, strict=True) if count > step]
        if gates:
            angles = unitaries.angles[unitaries.count > step, step] if any_angle else None
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
    if negative and not (any_angle or (gate.negative and name in ("fsim", "zz"))):
        raise InputError("negative", name, f"fsim or zz, where {device.name} offers the negative angles")
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
    gate = device.native(name)
    kind = name.replace("-", "_")
    own = dict(zip(pairs, angles.tolist(), strict=True)) if angles is not None else {}
    for slot in native_slots(pairs, device, qubits):
        if not KINDS[CODE[kind]].n_parameters:
            parameters = None
        elif own:
            parameters = np.array([[own[pair]] for pair in slot])
        else:
            values = np.array([_calibrated(gate, (qubits[a], qubits[b])) for a, b in slot])
            parameters = -values if negative else values
        builder.add_rows(kind, np.array(slot), parameters)
        builder.next_layer()


def _calibrated(gate: NativeGate, coupler: Pair) -> tuple[float, ...]:
    """The angles of a gate on one coupler of the device."""
    values, needed = gate.at(coupler), KINDS[CODE[gate.name]].n_parameters
    if len(values) != needed:
        raise InputError(gate.name, values, f"{needed} angles for coupler {coupler}")
    return values


def _native_form(native: str, parameters: Sequence[float]) -> tuple[str, ComplexArray, ComplexArray]:
    """The form that serves a native gate, and the local gates before and after it that make it the form's own gate."""
    one: ComplexArray = np.broadcast_to(np.eye(2, dtype=np.complex128), (2, 2, 2))
    z_first: ComplexArray = np.stack([gate_matrix("z"), one[1]])
    if native not in NATIVE_TWO_QUBIT:
        raise InputError("native", native, suggest(native, NATIVE_TWO_QUBIT))
    if native not in ("zz", "fsim"):
        return native, one, one
    if native == "zz" and not parameters:
        return "any-zz", one, one
    wanted = (np.pi / 2,) if native == "zz" else (np.pi / 2, 0.0)
    size = np.abs(parameters)
    if size.shape != np.shape(wanted) or not np.allclose(size, wanted, rtol=0, atol=ANGLE_TOLERANCE):
        allowed = "pi/2, -pi/2 or any angle" if native == "zz" else "(pi/2, 0) or (-pi/2, 0)"
        raise InputError(native, tuple(parameters), f"{allowed}, where two-qubit unitaries are compiled to it")
    if native == "fsim":  # at (-pi/2, 0) it is iSWAP
        return "iswap", *((z_first, z_first) if parameters[0] > 0 else (one, one))
    # CZ is exp(i pi/4 ZZ), which is zz(-pi/2), and a quarter turn about Z on each qubit
    turn = gate_matrix("s" if parameters[0] < 0 else "sdg")
    return "cz", np.stack([turn, turn]), one


_FORMS = {
    "cz": (forms.cz_count, forms.cz_locals),
    "iswap": (forms.iswap_count, forms.iswap_locals),
    "sqrt-iswap": (sqrt_iswap_count, sqrt_iswap_locals),
    "any-zz": (forms.zz_count, forms.zz_locals),
}

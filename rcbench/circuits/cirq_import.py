"""Circuits from Cirq's JSON: its moments are our layers, an empty moment is a barrier, measurements come last."""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from typing import Any

import cirq
import numpy as np

from rcbench.circuits.circuit import Circuit, CircuitBuilder
from rcbench.circuits.gates import KINDS
from rcbench.circuits.qasm_matrices import recognise, row_parameters
from rcbench.circuits.qasm_registers import MAX_QUBITS
from rcbench.errors import InputError

_INDEXED = re.compile(r"(.*)\[(\d{1,9})\]")
_POWERS: dict[type[cirq.Gate], dict[float, str]] = {
    cirq.XPowGate: {1: "x", 0.5: "sx", -0.5: "sxdg"},
    cirq.YPowGate: {1: "y"},
    cirq.ZPowGate: {1: "z", 0.5: "s", -0.5: "sdg"},
    cirq.HPowGate: {1: "h"},
    cirq.CZPowGate: {1: "cz"},
    cirq.CXPowGate: {1: "cx"},
    cirq.ISwapPowGate: {1: "iswap", 0.5: "sqrt_iswap"},
}
# kind and angles of gates with parameters, by type; turns are half turns in Cirq
_FAMILIES: dict[type[cirq.Gate], Callable[[Any], tuple[str, Sequence[float]]]] = {
    cirq.Rz: lambda gate: ("rz", (gate._json_dict_()["rads"],)),
    cirq.Rx: lambda gate: ("r", (gate._json_dict_()["rads"], 0.0)),
    cirq.Ry: lambda gate: ("r", (gate._json_dict_()["rads"], np.pi / 2)),
    cirq.XPowGate: lambda gate: ("r", (np.pi * gate.exponent, 0.0)),
    cirq.YPowGate: lambda gate: ("r", (np.pi * gate.exponent, np.pi / 2)),
    cirq.ZPowGate: lambda gate: ("rz", (np.pi * gate.exponent,)),
    cirq.PhasedXPowGate: lambda gate: ("r", (np.pi * gate.exponent, np.pi * gate.phase_exponent)),
    cirq.PhasedXZGate: lambda gate: ("u", _u_angles(gate)),
    cirq.FSimGate: lambda gate: ("fsim", (gate.theta, gate.phi)),
    cirq.ZZPowGate: lambda gate: ("zz", (np.pi * gate.exponent,)),
}


def from_cirq_json(text: str, name: str) -> Circuit:
    """The circuit of a JSON text that Cirq wrote.

    LineQubits keep their numbers; other qubits are numbered in Cirq's order. Classical bits come in the order of the
    measurements, keys such as c[0], c[1] in the order of their numbers.

    Raises:
        InputError: no circuit of Cirq's; a gate without a matrix, on more than two qubits, or controlled by outcomes;
            anything on a qubit after its measurement.
    """
    try:
        found = cirq.read_json(json_text=text)
    except Exception as error:  # the resolvers of Cirq raise whatever their classes raise
        raise InputError("circuit", str(error)[:100], "a circuit in Cirq's JSON", f"{name}: ") from None
    if not isinstance(found, cirq.AbstractCircuit):
        raise InputError("circuit", type(found).__name__, "a circuit in Cirq's JSON", f"{name}: ")
    return from_cirq(found, name)


def from_cirq(circuit: cirq.AbstractCircuit, name: str = "circuit") -> Circuit:
    """The same from the circuit itself."""
    label = _labels(circuit, name)
    builder = CircuitBuilder(max(label.values(), default=-1) + 1)
    measured: dict[str, tuple[int, ...]] = {}
    ended: set[int] = set()
    used: set[int] = set()
    for place, moment in enumerate(circuit):
        try:
            if not moment.operations:
                builder.barrier()
            for operation in moment.operations:
                qubits = [label[qubit] for qubit in operation.qubits]
                if ended.intersection(qubits):
                    raise InputError("operation", str(operation)[:80], "nothing on a qubit after its measurement")
                _add(builder, operation.untagged, qubits, measured, used)
                if isinstance(operation.gate, cirq.MeasurementGate):
                    ended.update(qubits)
                used.update(qubits)
        except InputError as error:
            raise error.at(f"{name}: moment {place}: ") from None
        builder.next_layer()
    if measured:
        builder.measure(qubit for key in _in_order(list(measured)) for qubit in measured[key])
    return builder.build()


def _labels(circuit: cirq.AbstractCircuit, name: str) -> dict[cirq.Qid, int]:
    qubits = sorted(circuit.all_qubits())
    for qubit in qubits:
        if qubit.dimension != 2:
            raise InputError("qubit", str(qubit), "qubits, not qudits", f"{name}: ")
    if all(isinstance(qubit, cirq.LineQubit) and 0 <= qubit.x < MAX_QUBITS for qubit in qubits):
        return {qubit: qubit.x for qubit in qubits if isinstance(qubit, cirq.LineQubit)}
    if len(qubits) > MAX_QUBITS:
        raise InputError("qubits", len(qubits), f"at most {MAX_QUBITS}", f"{name}: ")
    return {qubit: label for label, qubit in enumerate(qubits)}


def _add(
    builder: CircuitBuilder,
    operation: cirq.Operation,
    qubits: list[int],
    measured: dict[str, tuple[int, ...]],
    used: set[int],
) -> None:
    gate = operation.gate
    if isinstance(gate, cirq.MeasurementGate):
        if any(gate.full_invert_mask()) or gate.confusion_map:
            raise InputError("measurement", str(operation)[:80], "no inverted or confused outcomes")
        if gate.key in measured:
            raise InputError("measurement", gate.key, "each key once")
        measured[gate.key] = tuple(qubits)
    elif isinstance(gate, cirq.ResetChannel):
        if used.intersection(qubits):
            raise InputError("operation", str(operation)[:80], "resets before the first gate only")
        builder.add("reset", qubits)
    elif not isinstance(gate, (cirq.GlobalPhaseGate, cirq.IdentityGate)):
        kind, parameters = _kind(operation)
        builder.add(kind, qubits, parameters)


def _kind(operation: cirq.Operation) -> tuple[str, Sequence[float]]:
    """Kind and parameters of a gate that has a matrix."""
    gate = operation.gate
    if gate is None or cirq.is_parameterized(operation):
        raise InputError("operation", str(operation)[:80], "gates with numbers, not controlled by outcomes")
    for class_ in type(gate).__mro__:  # the nearest first: Rz is a ZPowGate that keeps its angle
        name = _POWERS.get(class_, {}).get(getattr(gate, "exponent", np.nan), "")
        if name:
            return name, ()
        if class_ in _FAMILIES:
            kind, parameters = _FAMILIES[class_](gate)
            return kind, [float(value) for value in parameters]
    if len(operation.qubits) not in (1, 2) or not cirq.has_unitary(operation):
        raise InputError("operation", str(operation)[:80], "gates with a matrix on one or two qubits")
    codes, rows = recognise(cirq.unitary(operation)[None].astype(np.complex128))
    return KINDS[int(codes[0])].name, row_parameters(int(codes[0]), rows[0])


def _u_angles(gate: cirq.PhasedXZGate) -> tuple[float, float, float]:
    """Z^z after a turn about an axis of the equator, as the three angles of u."""
    last = np.pi * (0.5 - float(gate.axis_phase_exponent))
    return np.pi * float(gate.x_exponent), np.pi * float(gate.z_exponent) - last, last


def _in_order(keys: list[str]) -> list[str]:
    """Keys of one name with numbers in brackets by number; any others as they came."""
    matches = [_INDEXED.fullmatch(key) for key in keys]
    if len({match and match.group(1) for match in matches}) == 1 and all(matches):
        return sorted(keys, key=lambda key: int(key[key.rindex("[") + 1 : -1]))
    return keys

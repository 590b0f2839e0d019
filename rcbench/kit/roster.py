"""The roster: one row a circuit and repeat, in the order in which they are to be run."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, fields
from pathlib import Path
from typing import Any

import numpy as np

from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import CODE, N_QUBITS, UNITARY, VIRTUAL
from rcbench.device import Timings
from rcbench.errors import InputError
from rcbench.files import format_number, read_text
from rcbench.tables import ROSTER

_WHOLE = (
    "n_qubits", "depth", "instance", "repeat", "shots", "run_order", "batch", "two_qubit_gates", "native_layers",
)  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class RosterRow:
    """One circuit to run.

    Args:
        circuit_id: unique in the kit, also between repeats; the circuit's file has this name.
        experiment, protocol, role, family, gates, patch: where it comes from; protocol by name.
        n_qubits: qubits of the experiment. measured_qubits: experiment qubit behind each classical bit.
        physical_qubits: the device's own label of each experiment qubit.
        depth, instance, setting, repeat: which one it is. shots: asked for. run_order: from 0. batch: from 0.
        target: the outcome that is certain, bit 0 first, or empty. params: what the estimators need to know.
        two_qubit_gates, native_layers: of the circuit as compiled. duration_ns: of one shot, measurement included.
        sha256: of the circuit's text.
    """

    circuit_id: str
    experiment: str
    protocol: str
    role: str
    family: str
    gates: str
    n_qubits: int
    measured_qubits: tuple[int, ...]
    physical_qubits: tuple[str, ...]
    patch: str
    depth: int
    instance: int
    setting: str
    repeat: int
    shots: int
    run_order: int
    batch: int
    target: str
    params: Mapping[str, Any] = field(default_factory=dict)
    two_qubit_gates: int
    native_layers: int
    duration_ns: float
    sha256: str

    @property
    def base_id(self) -> str:
        """The circuit_id of the first run of the same circuit: without the repeat."""
        return self.circuit_id.removesuffix(f"-r{self.repeat}") if self.repeat else self.circuit_id


assert tuple(entry.name for entry in fields(RosterRow)) == ROSTER


def write_roster(rows: Sequence[RosterRow]) -> str:
    """The text of roster.csv."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(ROSTER)
    writer.writerows([_cell(getattr(row, column)) for column in ROSTER] for row in rows)
    return out.getvalue()


def _cell(value: object) -> str:
    if isinstance(value, tuple):
        return " ".join(str(item) for item in value)
    if isinstance(value, Mapping):
        return params_text(value) if value else ""
    return value if isinstance(value, str) else format_number(value)


def params_text(params: Mapping[str, Any]) -> str:
    """Parameters as compact JSON with sorted keys."""
    return json.dumps(dict(params), sort_keys=True, separators=(",", ":"))


def read_roster(path: Path) -> tuple[RosterRow, ...]:
    """The rows of roster.csv; InputError names the file and line where it is not as rcbench wrote it."""
    reader = csv.reader(io.StringIO(read_text(path, "roster")))
    if tuple(next(reader, ())) != ROSTER:
        raise InputError("columns", "others", ", ".join(ROSTER), f"{path.name}:1: ")
    rows = []
    for cells in reader:
        try:
            rows.append(_row(cells))
        except (ValueError, KeyError, TypeError) as error:
            where = f"{path.name}:{reader.line_num}: "
            raise InputError("row", ",".join(cells), f"a row as rcbench wrote it ({error})", where) from None
    return tuple(rows)


def _row(cells: Sequence[str]) -> RosterRow:
    facts: dict[str, Any] = dict(zip(ROSTER, cells, strict=True))
    for key in _WHOLE:
        facts[key] = int(facts[key])
    facts["duration_ns"] = float(facts["duration_ns"] or "nan")
    facts["measured_qubits"] = tuple(int(qubit) for qubit in facts["measured_qubits"].split())
    facts["physical_qubits"] = tuple(facts["physical_qubits"].split(" ")) if facts["physical_qubits"] else ()
    facts["params"] = json.loads(facts["params"]) if facts["params"] else {}
    return RosterRow(**facts)


def duration_ns(circuit: Circuit, timings: Timings) -> float:
    """How long one shot takes, layer after layer, each as long as its slowest gate; virtual gates take no time.

    Preparation and the pause between shots are left out.
    """
    if not len(circuit):
        return 0.0
    takes = np.zeros(len(circuit))
    timed = UNITARY[circuit.kind] & ~VIRTUAL[circuit.kind]
    takes[timed] = np.where(N_QUBITS[circuit.kind[timed]] == 2, timings.two_qubit, timings.one_qubit)
    takes[circuit.kind == CODE["measure"]] = timings.measure
    takes[circuit.kind == CODE["reset"]] = timings.reset
    starts = np.flatnonzero(np.diff(circuit.layer, prepend=-1))
    return float(np.maximum.reduceat(takes, starts).sum())


def circuit_facts(circuit: Circuit, timings: Timings) -> dict[str, Any]:
    """What the roster says about a circuit as compiled."""
    return {
        "measured_qubits": circuit.measured_qubits,
        "two_qubit_gates": circuit.two_qubit_gates,
        "native_layers": circuit.n_layers,
        "duration_ns": duration_ns(circuit, timings),
    }

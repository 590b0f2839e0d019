"""What came back from the device, as one object: outcomes by circuit and repeat, and everything worth telling."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple, Protocol

import numpy as np

from rcbench.shots.declarations import Execution
from rcbench.shots.outcomes import Outcomes
from rcbench.shots.records import BadRow

RunKey = tuple[str, int]  # circuit_id, repeat
SEVERITIES = ("error", "warning", "note")


class RosterRow(Protocol):
    """What the shots need of one roster row; `rcbench.kit.RosterRow` has it."""

    @property
    def circuit_id(self) -> str:
        """Name of the circuit, as the shots give it."""

    @property
    def repeat(self) -> int:
        """Number of the repeat, from 0."""

    @property
    def shots(self) -> int:
        """Shots asked for."""

    @property
    def measured_qubits(self) -> Sequence[int]:
        """Experiment qubits in the order of the classical bits."""


class Roster(Protocol):
    """What the reader needs of a kit."""

    @property
    def rows(self) -> Sequence[RosterRow]:
        """One row a circuit and repeat."""


class ShotFile(NamedTuple):
    """One file that was read. rows: rows of the file, bad ones included."""

    name: str
    sha256: str
    rows: int


@dataclass(frozen=True, slots=True)
class Problem:
    """Something the user should know. severity: one of SEVERITIES; hint: what mends it, or empty."""

    severity: str
    text: str
    hint: str = ""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Shots:
    """The shots of a kit.

    Args:
        outcomes: by (circuit_id, repeat), circuits of the kit only; repeats beyond those of the roster are in.
        bit_order: `q0-first` or `q0-last` as declared, or `register map` where shots.toml holds one. Outcomes
            are always q0-first.
        files: the files read, in the order of their names.
        execution: what execution.toml states.
        problems: what the reader met and did not refuse.
        discards: shots with a symbol for a lost or leaked qubit, by (circuit_id, repeat); not in `outcomes`.
        unknown: shots by circuit_id that is not of the kit; not in `outcomes`.
        times: first and last `time_utc` by (circuit_id, repeat), where the files have that column.
        batches: labels of the `batch` column by (circuit_id, repeat), where the files have it.
        bad_rows: file name and row of everything set aside, whole bad files too; empty unless that was asked for.
    """

    outcomes: Mapping[RunKey, Outcomes]
    bit_order: str
    files: tuple[ShotFile, ...]
    execution: Execution = field(default_factory=Execution)
    problems: tuple[Problem, ...] = ()
    discards: Mapping[RunKey, int] = field(default_factory=dict)
    unknown: Mapping[str, int] = field(default_factory=dict)
    times: Mapping[RunKey, tuple[np.datetime64, np.datetime64]] = field(default_factory=dict)
    batches: Mapping[RunKey, tuple[str, ...]] = field(default_factory=dict)
    bad_rows: tuple[tuple[str, BadRow], ...] = ()

    @property
    def returned(self) -> frozenset[RunKey]:
        """Every run of the kit with at least one shot, kept or discarded."""
        return frozenset(self.outcomes) | frozenset(self.discards)

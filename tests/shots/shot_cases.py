"""A small kit that needs no circuits, and small functions that write shots for it."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from types import SimpleNamespace

import numpy as np


@dataclass(frozen=True, kw_only=True)
class Row:
    circuit_id: str
    experiment: str = "line"
    role: str = "sampling"
    depth: int = 2
    instance: int = 0
    setting: str = ""
    repeat: int = 0
    shots: int = 100
    measured_qubits: tuple[int, ...] = (0, 1, 2, 3)
    physical_qubits: tuple[str, ...] = ("A0", "A1", "A2", "A3")
    batch: int = 0
    params: dict = field(default_factory=dict)


@dataclass(frozen=True)
class FakeKit:
    rows: tuple[Row, ...]
    estimators: tuple[str, ...] = ("cross-entropy",)
    hash: str = "f" * 64

    @property
    def campaign(self) -> SimpleNamespace:
        names = dict.fromkeys(row.experiment for row in self.rows)
        return SimpleNamespace(experiments=[SimpleNamespace(name=name, protocol="any") for name in names])

    def protocol(self, name: str) -> SimpleNamespace:
        return SimpleNamespace(estimators=self.estimators)


def make_kit(*rows: Row, **more: object) -> FakeKit:
    return FakeKit(rows, **more)


def write(path: Path, content: str | bytes) -> Path:
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    return path


def two_circuits() -> FakeKit:
    """Circuit a measures four qubits, circuit b three."""
    return make_kit(Row(circuit_id="a", shots=4), Row(circuit_id="b", shots=3, measured_qubits=(0, 1, 2)))


def random_bits(seed: int, shots: int, n: int) -> np.ndarray:
    return np.random.default_rng(seed).integers(0, 2, (shots, n), dtype=np.uint8)


def strings_of(bits: np.ndarray) -> list[str]:
    return ["".join(map(str, row)) for row in bits.tolist()]

"""Region labels: qubits as ranges and lists, regions parted by bars, as ``0-3|4-7|8,10``."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from rcbench.errors import InputError


def write_regions(*regions: Iterable[int]) -> str:
    """The label of one or more regions."""
    return "|".join(_write_one(sorted(region)) for region in regions)


def _write_one(qubits: Sequence[int]) -> str:
    runs: list[list[int]] = []
    for qubit in qubits:
        if runs and qubit == runs[-1][-1] + 1:
            runs[-1].append(qubit)
        else:
            runs.append([qubit])
    return ",".join(str(run[0]) if len(run) == 1 else f"{run[0]}-{run[-1]}" for run in runs)


def read_regions(label: str) -> tuple[tuple[int, ...], ...]:
    """The regions of a label, each rising; InputError names a part that is no qubit or range."""
    return tuple(tuple(_read_one(part)) for part in label.split("|"))


def _read_one(part: str) -> list[int]:
    qubits: list[int] = []
    for piece in part.split(","):
        low, dash, high = piece.strip().partition("-")
        try:
            first = int(low)
            last = int(high) if dash else first
        except ValueError:
            raise InputError("region", piece, "a qubit as 8 or a range as 0-3") from None
        if last < first:
            raise InputError("region", piece, "a range that rises")
        qubits += range(first, last + 1)
    if len(set(qubits)) != len(qubits):
        raise InputError("region", part, "each qubit once")
    return sorted(qubits)


def write_setting(values: Mapping[str, object]) -> str:
    """The label of a row with named parts, as ``butterfly=5;probe=2;W=X;V=Z``."""
    return ";".join(f"{name}={value}" for name, value in values.items())


def read_setting(label: str) -> dict[str, str]:
    """The named parts of a label; empty for an empty label."""
    if not label:
        return {}
    parts = {}
    for piece in label.split(";"):
        name, equals, value = piece.partition("=")
        if not equals or not name:
            raise InputError("setting", piece, "name=value")
        parts[name] = value
    return parts

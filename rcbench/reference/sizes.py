"""Checks of sizes that the references share: each gives the value back or says what is allowed."""

from __future__ import annotations

from collections.abc import Iterable
from operator import index
from typing import SupportsIndex

from rcbench.errors import InputError, suggest

MOST_QUBITS = 1000  # 2**1000 still is a double; above 1023 qubits it is not


def whole(key: str, found: SupportsIndex, low: int, high: int | None = None, why: str = "") -> int:
    """A whole number from low to high (both allowed); `why` ends the message."""
    allowed = f"a whole number, {low} or more" if high is None else f"a whole number from {low} to {high}"
    try:
        value = index(found)
    except TypeError:
        raise InputError(key, found, allowed + why) from None
    if value < low or (high is not None and value > high):
        raise InputError(key, value, allowed + why)
    return value


def between(key: str, found: float, low: float, high: float) -> float:
    """A real number from low to high (both allowed)."""
    try:
        value = float(found)
    except (TypeError, ValueError):
        value = float("nan")
    if not low <= value <= high:
        raise InputError(key, found, f"a number from {low:g} to {high:g}")
    return value


def qubits_of(key: str, found: Iterable[SupportsIndex], n_qubits: int) -> tuple[int, ...]:
    """Different qubits of 0 to n_qubits - 1, rising; none at all is allowed."""
    region = sorted(whole(key, qubit, 0, n_qubits - 1) for qubit in found)
    if len(set(region)) != len(region):
        raise InputError(key, tuple(region), "each qubit once")
    return tuple(region)


def one_of(key: str, found: str, names: Iterable[str]) -> str:
    """One of some names."""
    allowed = tuple(names)
    if found not in allowed:
        raise InputError(key, found, suggest(str(found), allowed))
    return found

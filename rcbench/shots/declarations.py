"""What the sender of the shots states: how bitstrings are written (shots.toml) and taken (execution.toml)."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, fields
from datetime import UTC, date, datetime
from pathlib import Path
from typing import Any

from rcbench.errors import InputError, raise_all
from rcbench.shots.decode import BIT_ORDERS, Reading, check_symbols
from rcbench.shots.records import MAX_REPEAT
from rcbench.tomlfile import Section, TomlFile, read_toml

SHOTS_FILE = "shots.toml"
EXECUTION_FILE = "execution.toml"
NOT_STATED = "not stated"
HOW_TO_DECLARE = (
    'q0-first (the first character is classical bit 0) or q0-last, stated as bit_order = "q0-first" in a file '
    f"{SHOTS_FILE} beside the shots, or with --bit-order; nothing is guessed"
)


@dataclass(frozen=True, slots=True)
class Declared:
    """What shots.toml states. repeat: number of the repeat that a whole file holds, by file name."""

    reading: Reading = field(default_factory=Reading)
    repeat: Mapping[str, int] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Execution:
    """How the shots were taken, as execution.toml states it; empty text: not stated.

    Args:
        kit_hash: hash of the kit that was run, as its HANDOVER.md quotes it.
        started, ended: ISO 8601, UTC where no offset was given.
        device, calibration, calibrated: names or ids, and when the calibration was made.
        physical_qubits: labels of the device qubits that ran, parted by spaces.
        compiler, decoupling, twirling, post_selection, readout_correction, software, notes: in words.
    """

    kit_hash: str = ""
    started: str = ""
    ended: str = ""
    device: str = ""
    calibration: str = ""
    calibrated: str = ""
    physical_qubits: str = ""
    compiler: str = ""
    decoupling: str = ""
    twirling: str = ""
    post_selection: str = ""
    readout_correction: str = ""
    software: str = ""
    notes: str = ""

    def facts(self) -> dict[str, str]:
        """Every fact by its key, `not stated` where it is missing."""
        return {key: getattr(self, key) or NOT_STATED for key in EXECUTION_KEYS}

    def not_stated(self) -> tuple[str, ...]:
        """Keys of the facts that are missing."""
        return tuple(key for key in EXECUTION_KEYS if not getattr(self, key) and key != "notes")


EXECUTION_KEYS = tuple(f.name for f in fields(Execution))
_TIMES = ("started", "ended", "calibrated")


def read_declared(folder: Path, bit_order: str | None) -> Declared:
    """What shots.toml of a folder and the argument state together.

    Raises:
        InputError: an unknown key or value, the argument against the file, or no bit order anywhere.
    """
    if bit_order is not None and bit_order not in BIT_ORDERS:
        raise InputError("bit_order", bit_order, " or ".join(BIT_ORDERS))
    path = folder / SHOTS_FILE
    if not path.exists():
        if bit_order is None:
            raise InputError("bit_order", "nothing", HOW_TO_DECLARE)
        return Declared(Reading(bit_order=bit_order))
    file = read_toml(path)
    errors: list[InputError] = []
    section = Section(file, (), file.data, errors)
    stated = section.choice("bit_order", BIT_ORDERS, None)
    bits = _bits(section)
    symbols = "".join(_symbols(section, key) for key in ("lost", "leaked"))
    separator = _separator(section, symbols)
    repeat = _repeats(section)
    section.close()
    raise_all(errors)
    if bits is not None and (stated or bit_order):
        raise InputError(
            "bits", list(bits), "either bits or a bit order: bits says it for each character", file.where("bits")
        )
    if stated and bit_order and stated != bit_order:
        raise InputError(
            "bit_order",
            bit_order,
            f"{stated}, as {SHOTS_FILE} states, or another statement there",
            file.where("bit_order"),
        )
    order = stated or bit_order
    if order is None and bits is None:
        raise InputError("bit_order", "nothing", HOW_TO_DECLARE, file.where("bit_order"))
    return Declared(Reading(bit_order=order, bits=bits, symbols=symbols, separator=separator), repeat)


def _bits(section: Section) -> tuple[int, ...] | None:
    value = section.raw("bits")
    if value is None:
        return None
    allowed = "a list that gives each character's classical bit, every bit from 0 up once, -1 for a character to skip"
    if not isinstance(value, list) or not all(isinstance(b, int) and not isinstance(b, bool) for b in value):
        section.error("bits", value, allowed)
        return None
    used = sorted(b for b in value if b != -1)
    if not used or used != list(range(len(used))):
        section.error("bits", value, allowed)
        return None
    return tuple(value)


def _symbols(section: Section, key: str) -> str:
    value = section.raw(key, [])
    symbols = [value] if isinstance(value, str) else value
    if not isinstance(symbols, list) or not all(isinstance(s, str) for s in symbols):
        section.error(key, value, "one character, or a list of single characters")
        return ""
    try:
        return check_symbols(key, symbols)
    except InputError as error:
        section.catch(error)
        return ""


def _separator(section: Section, symbols: str) -> str:
    value = section.text("separator", "")
    if value and (len(value) != 1 or not value.isascii() or value in "01," or value in symbols):
        section.error("separator", value, "one ASCII character other than 0, 1, a comma and the symbols declared")
        return ""
    return str(value)


def _repeats(section: Section) -> dict[str, int]:
    table = section.section("repeat")
    if table is None:
        return {}
    found = {name: table.whole(name, 0, low=0, high=MAX_REPEAT) for name in table.data}
    return found


def read_execution(folder: Path) -> Execution:
    """What execution.toml of a folder states; a missing file states nothing."""
    path = folder / EXECUTION_FILE
    if not path.exists():
        return Execution()
    file = read_toml(path)
    errors: list[InputError] = []
    section = Section(file, (), file.data, errors)
    stated: dict[str, str] = {}
    for key in EXECUTION_KEYS:
        value = section.raw(key)
        if value is None:
            continue
        stated[key] = _time(section, key, value) if key in _TIMES else as_text(value)
    section.close()
    raise_all(errors)
    execution = Execution(**stated)
    _check_order(file, execution)
    return execution


def as_text(value: Any) -> str:
    """A TOML value in words: lists parted by spaces, tables as key=value."""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, list):
        return " ".join(as_text(item) for item in value)
    if isinstance(value, dict):
        return ", ".join(f"{key}={as_text(item)}" for key, item in value.items())
    return value.isoformat() if isinstance(value, date) else str(value)


def moment(text: str) -> datetime:
    """A time of an Execution as a datetime in UTC."""
    when = datetime.fromisoformat(text)
    return when.astimezone(UTC) if when.tzinfo else when.replace(tzinfo=UTC)


def _time(section: Section, key: str, value: Any) -> str:
    text = value.isoformat() if isinstance(value, date) else value
    try:
        moment(text)
    except (TypeError, ValueError):
        section.error(key, value, "a date and time, as 2026-03-04T09:30:00Z")
        return ""
    return str(text).replace("+00:00", "Z")


def _check_order(file: TomlFile, execution: Execution) -> None:
    if execution.started and execution.ended and moment(execution.ended) < moment(execution.started):
        raise InputError("ended", execution.ended, f"a time after started, {execution.started}", file.where("ended"))

"""The record of shots that were mended before: what stands in a folder that `rcbench check --apply` wrote."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rcbench.errors import InputError
from rcbench.shots.shots import Problem

MENDED_FILE = "mended.json"
_SHOWN = 3
_ALLOWED = "a record as `rcbench check --apply` writes it"
_LARGEST = 64 * 2**20


def mended_notes(folder: Path, kit_hash: str = "") -> list[Problem]:
    """What was mended in the shots of a folder, as notes for the audit; none where nothing was.

    Raises:
        InputError: a record that was not written so.
    """
    path = folder / MENDED_FILE
    if not path.is_file():
        return []
    record = _read(path)
    try:
        notes = [*_reordered(record), *_refiled(record)]
        kit = str(record["kit"])
        originals = [str(file["name"]) for file in record["originals"]]
    except (KeyError, TypeError, ValueError, AttributeError):
        raise InputError("content", "something else", _ALLOWED, f"{MENDED_FILE}: ") from None
    found = [Problem("note", f"mended before it was read: {note}", f"{MENDED_FILE} has all of it") for note in notes]
    if originals and found:
        listed = ", ".join(originals[:_SHOWN]) + (
            f" and {len(originals) - _SHOWN} more" if len(originals) > _SHOWN else ""
        )
        found.append(Problem("note", f"mended shots: the originals are {listed}"))
    if kit_hash and kit and kit != kit_hash:
        text = f"{MENDED_FILE}: shots were mended for kit {kit[:12]}; this kit is {kit_hash[:12]}"
        found.append(Problem("warning", text, "check the original shots with this kit"))
    return found


def _read(path: Path) -> Mapping[str, Any]:
    try:
        if path.stat().st_size > _LARGEST:
            raise InputError("content", f"{path.stat().st_size} bytes", _ALLOWED, f"{MENDED_FILE}: ")
        record = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError) as error:
        raise InputError("content", str(error), _ALLOWED, f"{MENDED_FILE}: ") from None
    if not isinstance(record, dict):
        raise InputError("content", "no JSON object", _ALLOWED, f"{MENDED_FILE}: ")
    return record


def _reordered(record: Mapping[str, Any]) -> list[str]:
    out = []
    for one in record["reordered"]:
        ids = list(dict.fromkeys(str(key[0]) for key in one["runs"]))
        out.append(f"bits put in order in {_some(ids)}; they came {one['order']}")
    return out


def _refiled(record: Mapping[str, Any]) -> list[str]:
    moves = [(str(one["from"][0]), str(one["to"][0])) for one in record["refiled"]]
    if not moves:
        return []
    shown = "; ".join(f"{old} to {new}" for old, new in moves[:_SHOWN])
    more = f" and {len(moves) - _SHOWN} more" if len(moves) > _SHOWN else ""
    return [f"shots filed under another circuit: {shown}{more}"]


def _some(ids: list[str]) -> str:
    rest = len(ids) - _SHOWN
    listed = ", ".join(ids[:_SHOWN]) + (f" and {rest} more" if rest > 0 else "")
    return f"{len(ids)} circuit{'' if len(ids) == 1 else 's'} ({listed})"

"""Reading the steps of a role; the language is described in `reading`."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable
from typing import Any

from rcbench.errors import suggest
from rcbench.protocol.language import (
    FORMS,
    PAULI_NAMES,
    STATES,
    Apply,
    Measure,
    Perturb,
    Prepare,
    Rotate,
    Step,
)
from rcbench.tomlfile import Section

_VERBS = ("prepare", "apply", "perturb", "rotate", "measure")


def read_names(section: Section, key: str, default: Any = ...) -> tuple[str, ...]:
    """A name or a list of names."""
    value = section.raw(key)
    if isinstance(value, str):
        return (value,)
    return section.texts(key, default) or ()


def read_steps(section: Section) -> Iterable[Step]:
    """The steps of a role; errors are kept in the section."""
    parts = section.sections("steps")
    if not parts:
        section.error("steps", "nothing", "one or more steps")
    for part in parts:
        verbs = [verb for verb in _VERBS if part.has(verb)]
        if len(verbs) != 1:
            key = next(iter(part.data), "steps")
            part.error(verbs[1] if verbs else key, verbs or list(part.data), f"one of {', '.join(_VERBS)} a step")
            continue
        made = _STEP[verbs[0]](part)
        part.close()
        yield made


def _prepare(part: Section) -> Prepare:
    given = [key for key in ("state", "draw", "bell_with") if part.has(key)]
    if len(given) > 1:
        part.error(given[1], part.raw(given[1]), "one of state, draw and bell_with")
    state = part.text("state", "zero")
    if isinstance(state, str) and not (state in STATES or state.startswith("$") or re.fullmatch("[01]+", state)):
        part.error("state", state, f'{suggest(state, STATES)}, a pattern of 0 and 1, or "$LOOP"')
    return Prepare(read_names(part, "prepare"), state, part.text("draw", ""), part.text("bell_with", ""))


def _apply(part: Section) -> Apply:
    registers, forms = read_names(part, "apply"), read_names(part, "form", ("U",))
    for form in forms:
        if form not in FORMS:
            part.error("form", form, suggest(form, FORMS))
    if len(forms) != len(registers):
        part.error("form", list(forms), f"one form a register, {len(registers)}")
    return Apply(registers, forms, part.text("pauli_layers", ""))


def _perturb(part: Section) -> Perturb:
    pauli = part.text("perturb") or ""
    if pauli not in PAULI_NAMES and not pauli.startswith("$"):
        part.error("perturb", pauli, 'X, Y, Z or "$LOOP"')
    angle = part.number("angle", None)
    controlled_by = part.text("controlled_by", "")
    if angle is not None and controlled_by:
        part.error("angle", angle, "no angle with controlled_by: only Paulis are controlled")
    return Perturb(pauli, part.text("at") or "", angle, controlled_by)


def _rotate(part: Section) -> Rotate:
    draw, basis = part.text("draw", ""), part.text("basis", "")
    if bool(draw) == bool(basis):
        part.error("rotate", part.raw("rotate"), "with one of draw and basis")
    if basis and basis not in PAULI_NAMES and not basis.startswith("$"):
        part.error("basis", basis, 'X, Y, Z or "$LOOP"')
    return Rotate(read_names(part, "rotate"), draw, basis, part.flag("inverse", False))


def _measure(part: Section) -> Measure:
    return Measure(read_names(part, "measure"), part.text("bell_with", ""))


_STEP: dict[str, Callable[[Section], Step]] = {
    "prepare": _prepare,
    "apply": _apply,
    "perturb": _perturb,
    "rotate": _rotate,
    "measure": _measure,
}

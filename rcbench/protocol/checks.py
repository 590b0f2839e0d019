"""What a protocol file must fulfil as a whole: names are known, steps stand in order, a target is really certain."""

from __future__ import annotations

from collections.abc import Iterable

from rcbench.errors import InputError, suggest
from rcbench.protocol.language import (
    LAYER_KINDS,
    PAULI_NAMES,
    SCOPES,
    STATES,
    Apply,
    Measure,
    Perturb,
    Prepare,
    Protocol,
    Role,
    Rotate,
    Step,
)
from rcbench.tomlfile import Key, Section

_UNDOES = {"U": "inverse", "inverse": "U", "conjugate": "transpose", "transpose": "conjugate"}
_COMPUTATIONAL = ("zero", "one")


class _Check:
    """Collects errors about one protocol."""

    def __init__(self, protocol: Protocol, top: Section) -> None:
        self.protocol, self.top = protocol, top

    def error(self, path: tuple[Key, ...], key: str, found: object, allowed: str) -> None:
        self.top.errors.append(InputError(key, found, allowed, self.top.file.where(*path, key)))

    def known(self, path: tuple[Key, ...], key: str, name: str, names: Iterable[str], what: str) -> bool:
        """Whether a name is one of the names; an error where it is not."""
        listed = list(names)
        if name in listed:
            return True
        self.error(path, key, name, suggest(name, listed) if listed else f"no {what}: the file has none")
        return False

    def register(self, path: tuple[Key, ...], key: str, name: str) -> bool:
        return self.known(path, key, name, self.protocol.registers, "register")

    def site_list(self, path: tuple[Key, ...], key: str, name: str) -> bool:
        return self.known(path, key, name.removeprefix("sites."), self.protocol.sites, "list of sites")


def check_protocol(protocol: Protocol, top: Section) -> None:
    """Append to the section's errors whatever does not fit together."""
    check = _Check(protocol, top)
    _check_registers(check)
    for place, role in enumerate(protocol.roles):
        path: tuple[Key, ...] = ("role", place)
        if role.name in [other.name for other in protocol.roles[:place]]:
            check.error(path, "name", role.name, "a name that no other role has")
        _check_role(check, path, role)
    _check_draws(check)
    keys = protocol.signature_keys
    for place, key in enumerate(keys):
        if key in keys[:place]:
            check.error(("measured", place), "signature", key, "each signature once")


def _check_registers(check: _Check) -> None:
    registers = check.protocol.registers
    whole = [name for name, register in registers.items() if register.take is not None]
    for name, register in registers.items():
        path: tuple[Key, ...] = ("registers", name)
        if register.take == "all" and len(whole) > 1:
            check.error(path, "take", "all", "share or a number: other registers take qubits too")
        if isinstance(register.take, str) and register.take.startswith("sites."):
            listed = register.take.removeprefix("sites.")
            if check.site_list(path, "take", register.take) and check.protocol.sites[listed].register != name:
                check.error(path, "take", register.take, f"a list of sites with in = {name!r}")
        for part in register.join:
            check.known(path, "join", part, whole, "register with take")
        parents = [other for other in registers if not registers[other].part_of]
        if register.part_of:
            check.known(path, "part_of", register.part_of, parents, "register to be a part of")
        if register.sites and check.site_list(path, "sites", register.sites):
            inside = check.protocol.sites[register.sites].register
            if inside != register.part_of:
                check.error(path, "sites", register.sites, f"a list of sites with in = {register.part_of!r}")
        if register.same_as:
            parts = [other for other in registers if registers[other].part_of and other != name]
            check.known(path, "same_as", register.same_as, parts, "other register with part_of")
        for coupling in register.coupling:
            if coupling != "circuit":
                check.register(path, "coupling", coupling.split()[-1])
    for name, sites in check.protocol.sites.items():
        parents = [other for other in registers if not registers[other].part_of]
        check.known(("sites", name), "in", sites.register, parents, "register with take or join")


def _check_draws(check: _Check) -> None:
    loops = {loop.name for role in check.protocol.roles for loop in role.for_each}
    for name, draw in check.protocol.draws.items():
        for scope in draw.fresh:
            if not check.known(("draws", name), "fresh", scope, (*SCOPES, *sorted(loops)), "scope"):
                continue
            for place, role in enumerate(check.protocol.roles):
                if scope not in (*SCOPES, *(loop.name for loop in role.for_each)) and name in _draws_of(role):
                    wanted = f"a loop {scope!r}: the draw {name!r} is fresh for each"
                    check.error(("role", place), "for_each", [loop.name for loop in role.for_each], wanted)


def _draws_of(role: Role) -> set[str]:
    """The draws that a role uses."""
    found = set()
    for step in role.steps:
        if isinstance(step, Prepare | Rotate):
            found.add(step.draw)
        elif isinstance(step, Apply):
            found.add(step.pauli_layers)
    return found - {""}


def _check_role(check: _Check, path: tuple[Key, ...], role: Role) -> None:
    for loop in role.for_each:
        if isinstance(loop.values, str) and loop.values != "settings":
            check.site_list((*path, "for_each"), loop.name, loop.values)
    for key, value in role.params.items():
        for item in value if isinstance(value, list) else [value]:
            if isinstance(item, str) and item.startswith("$"):
                _check_loop(check, (*path, "params"), key, item, role)
            if isinstance(item, str) and item.startswith("sites."):
                check.site_list((*path, "params"), key, item)
    order = [_RANK[type(step)] for step in role.steps]
    for place, step in enumerate(role.steps):
        where = (*path, "steps", place)
        if place and order[place] < order[place - 1]:
            check.error(where, type(step).__name__.lower(), f"step {place + 1}", "prepare first, measure last")
        _STEP_CHECK[type(step)](check, where, role, step)
    if Measure not in [type(step) for step in role.steps]:
        check.error(path, "steps", "no measure", "a last step that measures")
    if role.every_batch and any(isinstance(step, Apply) for step in role.steps):
        check.error(path, "every_batch", True, "no apply step: such a circuit has no depth")
    if role.target == "prepared":
        _check_undone(check, path, role)


_RANK = {Prepare: 0, Apply: 1, Perturb: 1, Rotate: 1, Measure: 2}


def _check_loop(
    check: _Check, path: tuple[Key, ...], key: str, value: str, role: Role, allowed: tuple[str, ...] | None = None
) -> None:
    """A "$NAME" must be a loop of the role, and its values, where they are written down, what the step takes."""
    loops = {loop.name: loop for loop in role.for_each}
    if not check.known(path, key, value[1:], loops, "loop") or allowed is None:
        return
    values = loops[value[1:]].values
    for item in values if isinstance(values, tuple) else ():
        if item not in allowed and not (key == "state" and isinstance(item, str) and item and not item.strip("01")):
            check.error(path, key, item, f"values of {value}: {', '.join(allowed)}")


def _check_draw(check: _Check, where: tuple[Key, ...], key: str, name: str, kinds: Iterable[str]) -> None:
    if not name or not check.known(where, key, name, check.protocol.draws, "draw"):
        return
    kind = check.protocol.draws[name].kind
    if kind not in kinds:
        check.error(where, key, name, f"a draw of kind {' or '.join(kinds)}, not {kind}")


def _check_bell(check: _Check, where: tuple[Key, ...], registers: tuple[str, ...], partner: str) -> None:
    if partner and check.register(where, "bell_with", partner) and (len(registers) != 1 or partner in registers):
        check.error(where, "bell_with", partner, "one register with one other")


def _check_prepare(check: _Check, where: tuple[Key, ...], role: Role, step: Step) -> None:
    assert isinstance(step, Prepare)
    for name in step.registers:
        check.register(where, "prepare", name)
    _check_draw(check, where, "draw", step.draw, ("bits", "haar-layer", "clifford-layer"))
    _check_bell(check, where, step.registers, step.bell_with)
    if step.state.startswith("$"):
        _check_loop(check, where, "state", step.state, role, tuple(STATES))


def _check_apply(check: _Check, where: tuple[Key, ...], role: Role, step: Step) -> None:
    assert isinstance(step, Apply)
    for name in step.registers:
        if check.register(where, "apply", name) and not check.protocol.registers[name].hosts_circuit:
            check.error(where, "apply", name, 'a register with coupling = "circuit"')
    if len(set(step.registers)) != len(step.registers):
        check.error(where, "apply", list(step.registers), "each register once")
    _check_draw(check, where, "pauli_layers", step.pauli_layers, ("pauli-layer",))


def _check_perturb(check: _Check, where: tuple[Key, ...], role: Role, step: Step) -> None:
    assert isinstance(step, Perturb)
    if step.pauli.startswith("$"):
        _check_loop(check, where, "perturb", step.pauli, role, PAULI_NAMES)
    if step.at.startswith("$"):
        _check_loop(check, where, "at", step.at, role)
    elif step.at.startswith("sites."):
        check.site_list(where, "at", step.at)
    else:
        check.register(where, "at", step.at)
    if step.controlled_by:
        check.register(where, "controlled_by", step.controlled_by)


def _check_rotate(check: _Check, where: tuple[Key, ...], role: Role, step: Step) -> None:
    assert isinstance(step, Rotate)
    for name in step.registers:
        check.register(where, "rotate", name)
    _check_draw(check, where, "draw", step.draw, LAYER_KINDS)
    if step.basis.startswith("$"):
        _check_loop(check, where, "basis", step.basis, role, PAULI_NAMES)


def _check_measure(check: _Check, where: tuple[Key, ...], role: Role, step: Step) -> None:
    assert isinstance(step, Measure)
    for name in step.registers:
        check.register(where, "measure", name)
    _check_bell(check, where, step.registers, step.bell_with)


_STEP_CHECK = {
    Prepare: _check_prepare,
    Apply: _check_apply,
    Perturb: _check_perturb,
    Rotate: _check_rotate,
    Measure: _check_measure,
}


def _check_undone(check: _Check, path: tuple[Key, ...], role: Role) -> None:
    """With target = "prepared" each step must be undone by a later one, the last first, and bits come in and go out."""
    open_steps: list[tuple[object, ...]] = []
    for step in role.steps:
        if isinstance(step, Prepare | Measure):
            continue
        if open_steps and open_steps[-1] == _token(step, undo=True):
            open_steps.pop()
        else:
            open_steps.append(_token(step))
    if open_steps:
        left = " ".join(str(part) for part in open_steps[-1])
        check.error(path, "target", "prepared", f"no such target: the steps do not undo themselves (left: {left})")
    pairs = [(step.registers, step.bell_with) for step in role.steps if isinstance(step, Prepare) and step.bell_with]
    for place, step in enumerate(role.steps):
        where = (*path, "steps", place)
        if isinstance(step, Prepare) and not step.bell_with and not _certain(check, role, step):
            check.error(where, "prepare", step.state or step.draw, 'bits, zero or one, where target = "prepared"')
        if (
            isinstance(step, Measure)
            and bool(pairs or step.bell_with)
            and (step.registers, step.bell_with) not in pairs
        ):
            check.error(where, "measure", list(step.registers), 'the Bell pairs prepared, where target = "prepared"')


def _certain(check: _Check, role: Role, step: Prepare) -> bool:
    """Whether the prepared state is one bitstring."""
    if step.draw:
        return step.draw not in check.protocol.draws or check.protocol.draws[step.draw].kind == "bits"
    if not step.state.startswith("$"):
        return step.state in _COMPUTATIONAL or not step.state.strip("01")
    values = next((loop.values for loop in role.for_each if loop.name == step.state[1:]), ())
    return all(value in _COMPUTATIONAL or not str(value).strip("01") for value in values)


def _token(step: Step, *, undo: bool = False) -> tuple[object, ...]:
    """What a step does, comparable; with undo, what undoes it."""
    if isinstance(step, Apply):
        forms = tuple(_UNDOES[form] for form in step.forms) if undo else step.forms
        return ("apply", *sorted(zip(step.registers, forms, strict=False)))
    if isinstance(step, Rotate):
        return ("rotate", *sorted(step.registers), step.draw or step.basis, step.inverse != undo)
    assert isinstance(step, Perturb)
    angle = -step.angle if undo and step.angle is not None else step.angle
    return ("perturb", step.pauli, step.at, angle, step.controlled_by)

"""Reading protocol files: the language in full, every error of a file at once, each with its place.

A protocol file is TOML. Unknown keys and names are errors. In outline:

    title = "..."              one line for lists
    summary = "..."            what it measures and what it cannot show

    [sites]                    lists of qubits that the experiment gives under [experiment.sites]
    probe = { in = "system", default = "all" }      all, or a list of qubits; without default it must be given

    [registers.system]         a group of the experiment's qubits, taken in the order of the file
    take = "all"               "all" | "share" (equal shares) | "rest" | a number of qubits | "sites.NAME"
    coupling = "circuit"       what it needs of the device, one or a list of
                                   "circuit"             the experiment's circuit runs on it
                                   "pairwise with NAME"  a coupler to each corresponding qubit
                                   "every with NAME"     a coupler from each of its qubits to each of NAME
    [registers.whole]
    join = ["a", "b"]          or: several registers, one after the other
    [registers.probe]
    part_of = "system"         or: a part of a register,
    sites = "probe"            given by a list of sites, or by
    same_as = "output"         the places that `output` has in its own register

    [draws.frame]              a random ingredient; where two steps use it they get the same gates
    kind = "clifford-layer"    pauli-layer | clifford-layer | haar-layer | bases (X, Y, Z) | bits
    fresh = ["role", "depth"]  drawn anew for each role, depth, or value of a loop by its name; else shared by all

    [[role]]                   one kind of circuit
    name = "butterfly"
    for_each = { site = "sites.butterfly", pauli = ["X", "Z"], setting = "settings" }
                               loops, the first the slowest: a list of values, a list of sites, a number (0, 1, ...), or
                               "settings", as many as the experiment says; steps and params use the value as "$site"
    target = "prepared"        where the steps undo themselves: the outcome is what was prepared (checked); "given"
                               where the outcome comes with adopted circuits
    params = { site = "$site", V = "X", probes = "sites.probe" }      what the roster says about the circuit
    every_batch = true         one circuit a setting, no instances or depths, run again in every batch
    steps = [                  one step a line; a register or a list of them; prepare first, measure last
        { prepare = "system" },                                 |0...0>
        { prepare = "system", state = "01" },                   a pattern, repeated, or one of zero one plus minus
                                                                plus-i minus-i
        { prepare = "system", draw = "frame" },                 a random product state, or random bits
        { prepare = "a", bell_with = "b" },                     Bell pairs (|00> + |11>) / sqrt(2)
        { apply = "system", form = "U" },                       U | inverse | conjugate | transpose
        { apply = ["a", "b"], form = ["U", "conjugate"] },      side by side, at the same time
        { apply = "system", form = "U", pauli_layers = "p" },   random Paulis inside (see `circuits.frames`)
        { perturb = "X", at = "$site" },                        a Pauli at a site, at "sites.NAME", or on a register
        { perturb = "Z", at = "$site", angle = 0.1 },           exp(-i angle Z / 2)
        { perturb = "X", at = "$site", controlled_by = "ancilla" },
        { rotate = "system", draw = "frame" },                  the gates of a layer; bases: from each basis to Z
        { rotate = "system", draw = "frame", inverse = true },
        { rotate = "ancilla", basis = "X" },                    from the basis of a Pauli to that of Z
        { measure = "probe" },                                  classical bits in the order of the measure steps
        { measure = "a", bell_with = "b" },                     bits of a, then of b; both 0 where the pair is Bell
    ]

    [[measured]]               what comes out
    signature = "otoc"         key of the registry, which knows the axis
    estimator = "butterfly-echo"        or "decay-fit", over all depths, for layer_loss and spam

    [example]
    campaign = '''...'''       a complete campaign, as text

Pauli layers leave a random Pauli at the end of a circuit. In a role with a target it stays and shows in the target, in
the others it is undone in the last one-qubit layer.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from rcbench.errors import InputError, raise_all, suggest
from rcbench.files import read_text, shipped
from rcbench.protocol.checks import check_protocol
from rcbench.protocol.language import (
    DRAW_KINDS,
    FITS,
    TARGETS,
    Loop,
    MeasuredSignature,
    NamedDraw,
    Protocol,
    Register,
    Role,
    SiteList,
)
from rcbench.protocol.reading_steps import read_names, read_steps
from rcbench.signatures.registry import SIGNATURES
from rcbench.tomlfile import Section, TomlFile, read_toml

NAME = re.compile(r"[A-Za-z][A-Za-z0-9_-]{0,39}")
_NAME_WORDS = "a letter, then letters, digits, '-' and '_', at most 40"
_COUPLING = re.compile(r"circuit|(?:pairwise|every) with [A-Za-z][A-Za-z0-9_-]*")
_TAKES = ("all", "share", "rest")


def shipped_protocols() -> list[str]:
    """The names of the protocols that come with rcbench."""
    return sorted(path.stem for path in shipped("protocols").glob("*.toml"))


def protocol_path(name_or_path: str) -> Path:
    """The file of a shipped protocol by name, or of a user's own by path (it ends in .toml or holds a slash)."""
    if name_or_path.endswith(".toml") or "/" in name_or_path:
        return Path(name_or_path)
    if name_or_path not in shipped_protocols():
        allowed = suggest(name_or_path, shipped_protocols())
        raise InputError("protocol", name_or_path, f"{allowed}, or the path of a file that ends in .toml")
    return shipped("protocols") / f"{name_or_path}.toml"


def protocol_text(name_or_path: str) -> str:
    """The text of a protocol file."""
    return read_text(protocol_path(name_or_path), "protocol")


def load_protocol(name_or_path: str) -> Protocol:
    """Read and check a protocol, shipped (by name) or a user's own (by path).

    Raises:
        InputError: every error of the file at once, each with file, line, key, what was found and what is allowed.
    """
    path = protocol_path(name_or_path)
    return read_protocol(path.stem, read_text(path, "protocol"), path)


def read_protocol(name: str, text: str, path: Path) -> Protocol:
    """A protocol from the text of its file; path names the file in messages."""
    file = _with_step_lines(read_toml(path, text), text)
    errors: list[InputError] = []
    top = Section(file, (), file.data, errors)
    facts: dict[str, Any] = {
        "title": top.text("title"),
        "summary": top.text("summary", ""),
        "template": _example(top),
        "sites": {str(part.path[-1]): _site_list(part) for part in _tables(top, "sites")},
        "registers": {str(part.path[-1]): _register(part) for part in _tables(top, "registers")},
        "draws": {str(part.path[-1]): _named_draw(part) for part in _tables(top, "draws")},
        "roles": tuple(_role(section) for section in top.sections("role")),
        "results": tuple(_measured(section) for section in top.sections("measured")),
    }
    for key in ("registers", "role", "measured"):
        if not file.data.get(key):
            top.error(
                key, "nothing", f"one or more tables headed [[{key}]]" if key != "registers" else "[registers.NAME]"
            )
    top.close()
    if not errors:
        protocol = Protocol(name=name, text=text, **facts)
        check_protocol(protocol, top)
    raise_all(errors)
    return protocol


def _with_step_lines(file: TomlFile, text: str) -> TomlFile:
    """The file with a line for each step: steps stand one a line, so that the n-th brace opens the n-th step."""
    lines, written = dict(file.lines), text.splitlines()
    roles = file.data.get("role")
    for role, data in enumerate(roles if isinstance(roles, list) else ()):
        steps = data.get("steps") if isinstance(data, dict) else None
        start = file.lines.get(("role", role, "steps"))
        if not isinstance(steps, list) or start is None:
            continue
        opened = (number for number in range(start, len(written) + 1) if _opens_step(written[number - 1]))
        lines |= {
            ("role", role, "steps", step): number for step, number in zip(range(len(steps)), opened, strict=False)
        }
    return TomlFile(file.name, file.data, lines)


def _opens_step(line: str) -> bool:
    return re.match(r"\s*(?:steps\s*=\s*\[\s*)?\{", line) is not None


def _tables(top: Section, key: str) -> list[Section]:
    """The named tables inside a table; a name that is none is an error."""
    outer = top.section(key)
    if outer is None:
        return []
    out = []
    for name in outer.data:
        if not NAME.fullmatch(name):
            outer.error(name, name, _NAME_WORDS)
        inner = outer.section(name)
        if inner is not None:
            out.append(inner)
    return out


def _example(top: Section) -> str:
    section = top.section("example")
    if section is None:
        return ""
    text = section.text("campaign") or ""
    section.close()
    return str(text)


def _site_list(section: Section) -> SiteList:
    default = section.raw("default")
    if isinstance(default, list):
        default = section.wholes("default", ())
    elif default is not None and default != "all":
        section.error("default", default, 'a list of qubits, or "all"')
    made = SiteList(name=str(section.path[-1]), register=section.text("in") or "", default=default)
    section.close()
    return made


def _register(section: Section) -> Register:
    kinds = [key for key in ("take", "join", "part_of") if section.has(key)]
    if len(kinds) != 1:
        section.error("take", kinds or "nothing", "one of take, join and part_of")
    take = section.raw("take")
    taken = isinstance(take, str) and (take in _TAKES or take.startswith("sites."))
    if take is not None and not taken and not (type(take) is int and take >= 1):
        section.error("take", take, '"all", "share", "rest", "sites.NAME", or a number of qubits, 1 or more')
    coupling = read_names(section, "coupling", ())
    for part in coupling:
        if not _COUPLING.fullmatch(part):
            section.error("coupling", part, '"circuit", "pairwise with NAME", "every with NAME"')
    made = Register(
        name=str(section.path[-1]),
        take=take,
        join=read_names(section, "join", ()),
        part_of=section.text("part_of", ""),
        sites=section.text("sites", ""),
        same_as=section.text("same_as", ""),
        coupling=coupling,
    )
    if made.part_of and bool(made.sites) == bool(made.same_as):
        section.error("part_of", made.part_of, "with it one of sites and same_as")
    if not made.part_of and (made.sites or made.same_as):
        key = "sites" if made.sites else "same_as"
        section.error(key, section.raw(key), "only with part_of")
    section.close()
    return made


def _named_draw(section: Section) -> NamedDraw:
    made = NamedDraw(
        name=str(section.path[-1]),
        kind=section.choice("kind", DRAW_KINDS) or DRAW_KINDS[0],
        fresh=section.texts("fresh", ()),
    )
    section.close()
    return made


def _measured(section: Section) -> MeasuredSignature:
    from rcbench.estimators import ESTIMATORS

    key, name = section.choice("signature", SIGNATURES), section.choice("estimator", (*ESTIMATORS, *FITS))
    if key and name in ESTIMATORS and key not in ESTIMATORS[name].signatures:
        section.error("signature", key, f"a signature of {name}: {', '.join(ESTIMATORS[name].signatures)}")
    section.close()
    return MeasuredSignature(key or "", name or "")


def _role(section: Section) -> Role:
    name = section.text("name") or ""
    if name and not NAME.fullmatch(name):
        section.error("name", name, _NAME_WORDS)
    made = Role(
        name=name,
        for_each=tuple(_loops(section)),
        steps=tuple(read_steps(section)),
        target=section.choice("target", TARGETS, ""),
        params=_params(section),
        every_batch=section.flag("every_batch", False),
    )
    section.close()
    return made


def _loops(section: Section) -> Iterable[Loop]:
    table = section.section("for_each")
    for name in table.data if table is not None else ():
        assert table is not None
        value = table.raw(name)
        if isinstance(value, str) and (value == "settings" or value.startswith("sites.")):
            yield Loop(name, value)
        elif type(value) is int and 1 <= value <= 1_000_000:
            yield Loop(name, tuple(range(value)))
        elif isinstance(value, list) and value and all(type(item) in (str, int) for item in value):
            yield Loop(name, tuple(value))
        else:
            table.error(name, value, 'a list of texts or whole numbers, "sites.NAME", "settings", or a number')
        if not NAME.fullmatch(name) or name in ("role", "depth"):
            table.error(name, name, f"{_NAME_WORDS}; not role or depth")


def _params(section: Section) -> dict[str, object]:
    table = section.section("params")
    out: dict[str, object] = {}
    for key, value in table.data.items() if table is not None else ():
        assert table is not None
        plain = value if isinstance(value, list) else [value]
        if not all(isinstance(item, str | int | float) for item in plain):
            table.error(key, value, "a text, a number, or a list of them")
        out[key] = value
    return out

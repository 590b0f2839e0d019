"""What an OpenQASM program consists of: its version, gate definitions, constants and statements."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field

from rcbench.circuits.qasm_definitions import NAME, Definition, read_header
from rcbench.circuits.qasm_expressions import ExpressionError, evaluate
from rcbench.circuits.qasm_source import Source
from rcbench.errors import InputError

MAX_STATEMENTS = 2_000_000
_WORD = re.compile(rf"\s*+({NAME})")
_CONSTANT = re.compile(rf"\s*+const\s++(?:float|angle|int|uint)\b\s*+(?:\[[^\]]*+\]\s*+)?({NAME})\s*+=(.+)", re.DOTALL)
_VERSION = re.compile(r"\s*+OPENQASM\s++(\d++)(?:\.(\d++))?\s*+;")
_LITERAL = re.compile(r"\s*+\d{1,9}\s*+")

_DECIDES = "a circuit whose gates depend on outcomes has no one ideal state"
REFUSED = {
    "if": f"no `if`: {_DECIDES}",
    "else": f"no `else`: {_DECIDES}",
    "switch": f"no `switch`: {_DECIDES}",
    **dict.fromkeys(("for", "while", "break", "continue"), "no loops: the gates written out"),
    **dict.fromkeys(("def", "extern", "return"), "no subroutines: gate definitions, or the gates written out"),
    **dict.fromkeys(("cal", "defcal", "defcalgrammar"), "no pulse definitions: gates only"),
    **dict.fromkeys(("delay", "box", "stretch", "duration"), "no timing statements: gates and barriers only"),
    "input": "no input parameters: numbers in their place",
    "end": "no `end`: a circuit runs to its last statement",
    "gate": "gate name(parameters) qubits { calls }",
    "include": 'include "file";',
    "const": "const float|angle|int|uint name = number;",
    "OPENQASM": "the version once, as the first statement",
    **dict.fromkeys(
        ("int", "uint", "float", "angle", "bool", "complex", "array"),
        "no classical variables besides bits and const numbers",
    ),
}


@dataclass(slots=True)
class Outline:
    """A program taken apart.

    version: 2 or 3. statements: the code between semicolons, definitions left out as blanks, so that places stay.
    bodies: where the body of each definition starts. constants: by name, in order.
    """

    source: Source
    version: int
    statements: list[str]
    definitions: dict[str, Definition]
    bodies: dict[str, int]
    constants: dict[str, float] = field(default_factory=dict)

    def offset(self, place: int) -> int:
        """Where a statement starts in the code."""
        statement = self.statements[place]
        return sum(map(len, self.statements[:place])) + place + _indent(statement)

    def where(self, place: int) -> str:
        """File and line of a statement."""
        return self.source.place(self.offset(place))

    def number(self, text: str) -> float:
        """The value of an expression of numbers and constants."""
        return number(text, self.constants, self.version)

    def whole(self, text: str) -> int:
        """The value of an expression for a size or an index."""
        if _LITERAL.fullmatch(text):
            return int(text)
        value = self.number(text)
        if value != int(value) or abs(value) > 1e9:
            raise InputError("number", text.strip()[:40], "a whole number below a thousand million")
        return int(value)


def number(text: str, known: Mapping[str, float], version: int) -> float:
    """The value of an expression.

    Raises:
        InputError: no such expression, or no finite real value.
    """
    try:
        return evaluate(text, known, power_sign=version == 2)
    except ExpressionError as error:
        raise InputError("expression", error.found, error.allowed) from None


def outline(source: Source) -> Outline:
    """Take a program apart.

    Raises:
        InputError: with file and line, for another version, a definition that cannot be read, a block that is no gate
            definition, a const that is no number, or text after the last semicolon.
    """
    version = _version(source)
    definitions: dict[str, Definition] = {}
    bodies: dict[str, int] = {}
    statements = _without_blocks(source, definitions, bodies).split(";")
    out = Outline(source, version, statements, definitions, bodies)
    if len(statements) > MAX_STATEMENTS:
        raise InputError("program", f"{len(statements)} statements", f"at most {MAX_STATEMENTS}", source.place(0))
    if statements[-1].strip():
        error = InputError("statement", statements[-1].strip()[:60], "a statement that ends in ;")
        raise error.at(out.where(len(statements) - 1))
    if "const" in source.code:
        _read_constants(out)
    return out


def _version(source: Source) -> int:
    match = _VERSION.match(source.code)
    if match is None:
        return 3 if re.search(r"\b(?:qubit|bit)\b|\$\d", source.code) else 2
    major, minor = match.groups()
    if major not in ("2", "3") or (major == "2" and minor not in (None, "0")):
        found = ".".join(part for part in (major, minor) if part is not None)
        raise InputError("OPENQASM", found, "2.0, 3, 3.0 or 3.1", source.place(match.start(1)))
    return int(major)


def _without_blocks(source: Source, definitions: dict[str, Definition], bodies: dict[str, int]) -> str:
    code = source.code
    parts: list[str] = []
    done = start = 0
    while (brace := code.find("{", start)) >= 0:
        begin = max(code.rfind(";", done, brace) + 1, done)
        header = code[begin:brace]
        where = source.place(begin + _indent(header))
        end = code.find("}", brace)
        if end < 0:
            raise InputError("block", header.strip()[:60], "a block that ends in }", where)
        start = end + 1
        if header.rstrip().endswith("["):  # an index set, q[{0, 2}]
            continue
        word = _WORD.match(header)
        kind = word.group(1) if word else ""
        if kind != "gate":
            allowed = REFUSED.get(kind, "gate definitions only, where there are braces")
            raise InputError("block", header.strip()[:60], allowed, where)
        if "{" in code[brace + 1 : end]:
            raise InputError("block", header.strip()[:60], "calls of gates and barriers in the body of a gate", where)
        _define(source, definitions, bodies, (header, code[brace + 1 : end]), brace + 1, where)
        parts += [code[done:begin], " " * (start - begin)]
        done = start
    return "".join((*parts, code[done:])) if parts else code


def _define(
    source: Source,
    definitions: dict[str, Definition],
    bodies: dict[str, int],
    block: tuple[str, str],
    begin: int,
    where: str,
) -> None:
    try:
        definition = read_header(*block)
    except InputError as error:
        raise error.at(where) from None
    if definition is None:
        raise InputError("gate", block[0].strip()[:60], REFUSED["gate"], where)
    before = definitions.setdefault(definition.name, definition)
    if before != definition:
        other = source.place(bodies[definition.name]).removesuffix(": ")
        raise InputError("gate", definition.name, f"one definition of each gate (the first is at {other})", where)
    bodies.setdefault(definition.name, begin)


def _read_constants(out: Outline) -> None:
    for place, statement in enumerate(out.statements):
        match = _CONSTANT.fullmatch(statement)
        if match:
            try:
                out.constants[match.group(1)] = out.number(match.group(2))
            except InputError as error:
                raise error.at(out.where(place)) from None


def _indent(text: str) -> int:
    return len(text) - len(text.lstrip())

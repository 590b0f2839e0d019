"""The gates that one program may call: built-in, from the standard files, and by its own definitions.

Programs that share their definitions share one `GateSet`, so that a kit of thousands of circuits works them out once.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache, lru_cache

from rcbench.circuits.qasm_expressions import Expression, ExpressionError, compile_expression
from rcbench.circuits.qasm_gates import MAX_COST, MAX_NESTING, Call, DefinedGate, Gate, ModifiedGate
from rcbench.circuits.qasm_library import DERIVED, NAMES, STANDARD
from rcbench.errors import InputError

# Quantifiers with a + behind them give nothing back, so that no text makes a pattern slow
NAME = r"[^\W\d]\w*+"
HEADER = re.compile(rf"\s*+gate\s++({NAME})\s*+(?:\(([^()]*+)\)\s*+)?([^(){{}}@]*+)")
CALL = re.compile(rf"\s*+({NAME})\s*+(?:\((.*)\)\s*+)?([^()@=>]*+)", re.DOTALL)
_MODIFIER = re.compile(r"\s*+(inv|pow|ctrl|negctrl)\s*+(?:\((.*)\)\s*+)?", re.DOTALL)
_NAME = re.compile(NAME)
_NO_GATES = frozenset(("for", "while", "if", "measure", "reset", "opaque", "gate", "let", "delay", "box", "return"))


@dataclass(frozen=True, slots=True)
class Definition:
    """The text of one gate definition."""

    name: str
    parameters: tuple[str, ...]
    qubits: tuple[str, ...]
    body: str


class DefinitionError(Exception):
    """A definition that cannot be used. name: the gate; offset: place in its body; undefined: a gate it lacks."""

    def __init__(self, name: str, offset: int, error: InputError, undefined: str = "") -> None:
        super().__init__(name, offset, error, undefined)
        self.name, self.offset, self.error, self.undefined = name, offset, error, undefined


def read_header(header: str, body: str) -> Definition | None:
    """A definition from what stands before its brace and between its braces; None where it is no gate definition.

    Raises:
        InputError: names that are no names, or given twice; no qubit.
    """
    match = HEADER.fullmatch(header)
    if match is None:
        return None
    name, parameters, qubits = match.groups()
    both = (_names(parameters), _names(qubits))
    for found in both:
        for one in found:
            if not _NAME.fullmatch(one) or found.count(one) > 1:
                raise InputError(f"gate {name}", one, "different names of letters, digits and _")
    if not both[1]:
        raise InputError(f"gate {name}", header.strip()[:60], "at least one qubit")
    return Definition(name, *both, body)


def split_arguments(text: str) -> list[str]:
    """The expressions of an argument list, split at the commas outside parentheses."""
    if "(" not in text:
        return text.split(",")
    parts, depth, start = [], 0, 0
    for place, sign in enumerate(text):
        if sign == "," and depth == 0:
            parts.append(text[start:place])
            start = place + 1
        depth += (sign == "(") - (sign == ")")
    return [*parts, text[start:]]


@dataclass(frozen=True, slots=True)
class Modified:
    """A call as written, its modifiers read. exponents: expressions of pow, outermost first."""

    modifiers: tuple[str, ...]
    exponents: tuple[str, ...]
    name: str
    arguments: str | None
    operands: str


def read_call(text: str, known: Mapping[str, float]) -> Modified | None:
    """A call with or without modifiers; None where it is no call. known: constants that control counts may use."""
    *written, last = text.split("@")
    match = CALL.fullmatch(last)
    if match is None:
        return None
    modifiers: list[str] = []
    exponents: list[str] = []
    for one in written:
        found = _MODIFIER.fullmatch(one)
        if found is None:
            raise InputError("modifier", one.strip()[:40], "inv, pow(k), ctrl, negctrl, ctrl(n), negctrl(n)")
        kind, argument = found.groups()
        if (kind == "pow") != (argument is not None) and kind in ("pow", "inv"):
            raise InputError("modifier", one.strip()[:40], "inv without and pow with a number in parentheses")
        if kind == "pow":
            exponents.append(argument)
        count = 1
        if kind not in ("pow", "inv") and argument is not None:
            value = compile_expression(argument, known, power_sign=False).value(known)
            if value not in (1, 2):
                raise InputError("modifier", one.strip()[:40], "1 or 2 controls: gates on one and two qubits are read")
            count = int(value)
        modifiers += [kind] * count
    return Modified(tuple(modifiers), tuple(exponents), *match.groups())


class GateSet:
    """The gates of one program by name; a definition hides a standard gate of its name.

    Args:
        standard: names of STANDARD and DERIVED that may be called.
        definitions: in the order of the program; each may call what stands before it.
        constants: the program's own constants, which bodies may use.
        power_sign: ^ is a power (OpenQASM 2.0).
    """

    def __init__(
        self,
        standard: frozenset[str],
        definitions: tuple[Definition, ...],
        constants: tuple[tuple[str, float], ...] = (),
        power_sign: bool = True,
    ) -> None:
        self._standard, self._constants, self._power_sign = standard, dict(constants), power_sign
        self._order = {definition.name: place for place, definition in enumerate(definitions)}
        self._definitions = definitions
        self._compiled: dict[str, Gate] = {}
        self._modified: dict[tuple[str, tuple[str, ...]], Gate] = {}

    def __contains__(self, name: str) -> bool:
        return name in self._order or name in self._standard

    @property
    def names(self) -> list[str]:
        """All names that may be called."""
        return [*self._order, *sorted(self._standard - self._order.keys())]

    def get(self, name: str) -> Gate | None:
        """A gate by name, its definition read when first asked for; None where there is none.

        Raises:
            DefinitionError: a definition that cannot be read.
        """
        gate = self._compiled.get(name)
        if gate is not None:
            return gate
        if name in self._order:
            # earlier definitions first, so that a long chain of them is no recursion
            for place in self._needed(self._order[name]):
                definition = self._definitions[place]
                if definition.name not in self._compiled:
                    self._compiled[definition.name] = self._compile(definition, place)
            return self._compiled[name]
        if name in self._standard:
            return STANDARD.get(name) or _derived().get(name)
        return None

    def modified(self, gate: Gate, modifiers: tuple[str, ...]) -> Gate:
        """A gate under modifiers, outermost first.

        Raises:
            InputError: the result acts on more than two qubits.
        """
        if not modifiers:
            return gate
        key = (gate.name, modifiers)
        if key not in self._modified:
            made = ModifiedGate(gate, modifiers)
            if made.n_qubits > 2:
                raise InputError(made.name, f"{made.n_qubits} qubits", "modified gates on one or two qubits")
            self._modified[key] = made
        return self._modified[key]

    def _needed(self, place: int) -> list[int]:
        """Places of the definitions behind one, itself included, in their order."""
        found, waiting = {place}, [place]
        while waiting:
            here = waiting.pop()
            for word in set(_NAME.findall(self._definitions[here].body)):
                other = self._order.get(word, here)
                if other < here and other not in found and self._definitions[other].name not in self._compiled:
                    found.add(other)
                    waiting.append(other)
        return sorted(found)

    def _compile(self, definition: Definition, place: int) -> Gate:
        calls, offset = [], 0
        for statement in definition.body.split(";"):
            try:
                call = self._call(definition, place, statement, offset)
            except ExpressionError as error:
                problem = InputError(f"gate {definition.name}", error.found, error.allowed)
                raise DefinitionError(definition.name, offset + _indent(statement), problem) from None
            except InputError as error:
                raise DefinitionError(definition.name, offset + _indent(statement), error) from None
            if call is not None:
                calls.append(call)
            offset += len(statement) + 1
        gate = DefinedGate(definition.name, definition.parameters, len(definition.qubits), tuple(calls))
        if gate.nesting > MAX_NESTING or gate.cost > MAX_COST:
            limit = f"at most {MAX_COST} gates behind one call, {MAX_NESTING} definitions inside one another"
            found = f"{min(gate.cost, 10**9)} gates, {gate.nesting} deep"
            raise DefinitionError(definition.name, 0, InputError(f"gate {definition.name}", found, limit))
        return gate

    def _call(self, definition: Definition, place: int, statement: str, offset: int) -> Call | None:
        """One statement of a body; None for a barrier or an empty one."""
        if not statement.strip():
            return None
        call = read_call(statement, self._constants)
        if call is None or call.name in _NO_GATES:
            allowed = "calls of gates and barriers in the body of a gate"
            raise InputError(f"gate {definition.name}", statement.strip()[:60], allowed)
        if call.name == "barrier":
            return None
        offset += _indent(statement)
        gate = self._callable(definition, place, call.name, offset)
        expressions = self._expressions(definition, call, gate)
        gate = self.modified(gate, call.modifiers)
        operands = _names(call.operands)
        places = tuple(definition.qubits.index(one) if one in definition.qubits else -1 for one in operands)
        if -1 in places or len(set(places)) != len(places) or len(places) != gate.n_qubits:
            allowed = f"{gate.n_qubits} different ones of the gate's qubits {', '.join(definition.qubits)}"
            raise InputError(gate.name, call.operands, allowed)
        return Call(gate, expressions, places, offset)

    def _callable(self, definition: Definition, place: int, name: str, offset: int) -> Gate:
        if self._order.get(name, -1) >= place:
            allowed = "gates defined before this one: a gate can call neither itself nor a later one"
            raise InputError(f"gate {definition.name}", name, allowed)
        gate = self._compiled.get(name) if name in self._order else self.get(name)
        if gate is None:
            raise DefinitionError(
                definition.name, offset, InputError("gate", name, "a gate that is defined"), undefined=name
            )
        return gate

    def _expressions(self, definition: Definition, call: Modified, gate: Gate) -> tuple[Expression, ...]:
        written = split_arguments(call.arguments) if call.arguments and call.arguments.strip() else []
        if len(written) != gate.n_parameters:
            raise InputError(gate.name, f"{len(written)} parameters", f"{gate.n_parameters} parameters")
        names = (*definition.parameters, *self._constants)
        known = {name: value for name, value in self._constants.items() if name not in definition.parameters}
        return tuple(
            compile_expression(text, names, power_sign=self._power_sign).bound(known)
            for text in (*written, *call.exponents)
        )


def _names(text: str | None) -> tuple[str, ...]:
    return tuple(one.strip() for one in text.split(",")) if text and text.strip() else ()


def _indent(statement: str) -> int:
    return len(statement) - len(statement.lstrip())


@cache
def _derived() -> dict[str, Gate]:
    """The gates of DERIVED by name."""
    definitions = []
    for block in DERIVED.split("}")[:-1]:
        definition = read_header(*block.split("{"))
        assert definition is not None
        definitions.append(definition)
    gates = GateSet(frozenset(STANDARD), tuple(definitions))
    return {definition.name: gate for definition in definitions if (gate := gates.get(definition.name))}


@lru_cache(maxsize=64)
def gate_set(
    version: int,
    libraries: frozenset[str],
    definitions: tuple[Definition, ...],
    constants: tuple[tuple[str, float], ...],
) -> GateSet:
    """The gates of a program of one version that asks for some standard files; shared where all is the same."""
    standard = NAMES[f"OpenQASM {version}"].union(*(NAMES[library] for library in libraries))
    return GateSet(standard, definitions, constants, power_sign=version == 2)

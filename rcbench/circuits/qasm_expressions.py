"""Parameter expressions of OpenQASM: from text to a postfix program once, to numbers as often as wanted.

The program is a flat list worked off with a stack, so that no depth of parentheses can exhaust Python's own.
"""

from __future__ import annotations

import math
import operator
import re
from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass

import numpy as np

from rcbench.arrays import FloatArray

CONSTANTS: dict[str, float] = {
    "pi": math.pi, "π": math.pi, "tau": math.tau, "τ": math.tau, "euler": math.e, "ℇ": math.e,
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Operation:
    """One step of a program that computes: on one number, and on many at once."""

    operands: int
    one: Callable[..., float]
    many: Callable[..., FloatArray]


FUNCTIONS: dict[str, Operation] = {
    "sin": Operation(1, math.sin, np.sin),
    "cos": Operation(1, math.cos, np.cos),
    "tan": Operation(1, math.tan, np.tan),
    "exp": Operation(1, math.exp, np.exp),
    "ln": Operation(1, math.log, np.log),
    "log": Operation(1, math.log, np.log),
    "sqrt": Operation(1, math.sqrt, np.sqrt),
    "arcsin": Operation(1, math.asin, np.arcsin),
    "arccos": Operation(1, math.acos, np.arccos),
    "arctan": Operation(1, math.atan, np.arctan),
    "asin": Operation(1, math.asin, np.arcsin),
    "acos": Operation(1, math.acos, np.arccos),
    "atan": Operation(1, math.atan, np.arctan),
    "floor": Operation(1, math.floor, np.floor),
    "ceiling": Operation(1, math.ceil, np.ceil),
    "pow": Operation(2, math.pow, np.power),
    "mod": Operation(2, math.fmod, np.fmod),
}
_SIGNS: dict[str, tuple[int, Operation]] = {  # with how strongly each binds
    "+": (1, Operation(2, operator.add, np.add)),
    "-": (1, Operation(2, operator.sub, np.subtract)),
    "*": (2, Operation(2, operator.mul, np.multiply)),
    "/": (2, Operation(2, operator.truediv, np.divide)),  # always real: OpenQASM 3's own gates write pow(1/2)
    "**": (4, FUNCTIONS["pow"]),
    "^": (4, FUNCTIONS["pow"]),
}
_NEGATE = (3, Operation(1, operator.neg, np.negative))  # between a product and a power, as in mathematics
_POWER, _FUNCTION, _OPEN = 4, 5, 0

_TOKEN = re.compile(
    r"\s*(?:(0[xX][\da-fA-F_]+|0[bB][01_]+)|((?:\d[\d_]*\.?[\d_]*|\.\d[\d_]*)(?:[eE][+-]?\d+)?)"
    r"|([^\W\d]\w*)|(\*\*|[-+*/^(),]))"
)
_NUMBER = r"(?:\d++\.?\d*+|\.\d++)(?:[eE][+-]?\d++)?"
_USUAL = re.compile(rf"\s*+(-?)\s*+(?:({_NUMBER})|(?:({_NUMBER})\s*+\*\s*+)?pi\s*+(?:([*/])\s*+(-?{_NUMBER}))?)\s*+")
_Step = float | str | Operation
FINITE = "an expression with a finite real value"


class ExpressionError(ValueError):
    """An expression that cannot be read or has no finite real value.

    found: the part. allowed: what may stand there. row: which of many parameter sets it was.
    """

    def __init__(self, found: str, allowed: str, row: int = 0) -> None:
        super().__init__(found, allowed, row)
        self.found, self.allowed, self.row = found, allowed, row


@dataclass(frozen=True, slots=True)
class Expression:
    """A compiled expression: numbers, names of parameters and operations, in the order of the work."""

    text: str
    steps: tuple[_Step, ...]

    def bound(self, known: Mapping[str, float]) -> Expression:
        """The same with numbers in place of some names."""
        if not known:
            return self
        return Expression(
            self.text, tuple(known.get(step, step) if isinstance(step, str) else step for step in self.steps)
        )

    def value(self, known: Mapping[str, float]) -> float:
        """The value, with the named parameters from `known`.

        Raises:
            ExpressionError: no finite real value.
        """
        stack: list[float] = []
        try:
            for step in self.steps:
                if isinstance(step, Operation):
                    if step.operands == 2:
                        right = stack.pop()
                        stack[-1] = step.one(stack[-1], right)
                    else:
                        stack[-1] = step.one(stack[-1])
                else:
                    stack.append(known[step] if isinstance(step, str) else step)
            result = float(stack[0])
        except (ArithmeticError, ValueError):
            raise ExpressionError(self.text, FINITE) from None
        if not math.isfinite(result):
            raise ExpressionError(self.text, FINITE)
        return result

    def values(self, known: Mapping[str, FloatArray]) -> FloatArray:
        """(m,) values from (m,) parameters, or (1,) where it asks for none.

        Raises:
            ExpressionError: no finite real value at some of them; `row` is the first.
        """
        stack: list[FloatArray] = []
        with np.errstate(all="ignore"):
            for step in self.steps:
                if isinstance(step, Operation):
                    if step.operands == 2:
                        right = stack.pop()
                        stack[-1] = step.many(stack[-1], right)
                    else:
                        stack[-1] = step.many(stack[-1])
                else:
                    stack.append(known[step] if isinstance(step, str) else np.array([step]))
        bad = np.flatnonzero(~np.isfinite(stack[0]))
        if len(bad):
            raise ExpressionError(self.text, FINITE, int(bad[0]))
        return stack[0]


def evaluate(text: str, known: Mapping[str, float], *, power_sign: bool) -> float:
    """The value of an expression that uses the names in `known` and no others."""
    quick = _quick(text, known)
    return compile_expression(text, known, power_sign=power_sign).value(known) if quick is None else quick


def _quick(text: str, known: Mapping[str, float]) -> float | None:
    """The value of a number or a multiple of pi, which most angles are; None for all else."""
    match = _USUAL.fullmatch(text)
    if match is None or "pi" in known:
        return None
    sign, plain, factor, by, other = match.groups()
    if plain is not None:
        value = float(plain)
    else:
        value = math.pi if factor is None else float(factor) * math.pi
        if by is not None:
            second = float(other)
            if second == 0:
                return None
            value = value * second if by == "*" else value / second
    return (-value if sign else value) if math.isfinite(value) else None


def compile_expression(text: str, names: Collection[str], *, power_sign: bool) -> Expression:
    """Read an expression: numbers, names, + - * / **, signs, parentheses and functions.

    Args:
        text: the expression.
        names: names it may use, besides pi, tau and euler; they hide a constant of the same name.
        power_sign: ^ is a power (OpenQASM 2.0); OpenQASM 3 keeps it for bits, so it is refused there.
    Raises:
        ExpressionError: not such an expression.
    """
    reader = _Reader(text, names, power_sign)
    reader.read()
    return Expression(reader.text, tuple(reader.steps))


class _Reader:
    """The shunting-yard algorithm of Dijkstra; one pass over the tokens."""

    def __init__(self, text: str, names: Collection[str], power_sign: bool) -> None:
        self.text, self.names, self.power_sign = text.strip(), names, power_sign
        self.steps: list[_Step] = []
        # waiting operations with their strength; an opening parenthesis holds the function before it, if any
        self.waiting: list[tuple[int, Operation | None]] = []
        self.commas: list[int] = []

    def read(self) -> None:
        place, operand_next = 0, True
        while place < len(self.text):
            match = _TOKEN.match(self.text, place)
            if match is None:
                raise ExpressionError(self.text[place:].strip()[:20], "numbers, names, + - * / ** ( ) and functions")
            place = match.end()
            whole, number, name, sign = match.groups()
            if sign is not None:
                operand_next = self.sign(sign, operand_next)
            elif not operand_next:
                raise ExpressionError(match.group().strip()[:40], "an operator between two values")
            elif name is not None:
                operand_next = self.name(name, self.text[place:].lstrip()[:1] == "(")
            else:
                operand_next = self.number(whole, number)
        if operand_next:
            raise ExpressionError(self.text[-40:], "an expression that ends in a value")
        self.unwind()
        if self.waiting:
            raise ExpressionError(self.text[:40], "as many closing as opening parentheses")

    def number(self, whole: str | None, number: str) -> bool:
        try:
            self.steps.append(float(int(whole.replace("_", ""), 0)) if whole else float(number.replace("_", "")))
        except (ValueError, OverflowError):
            raise ExpressionError((whole or number)[:40], "a number that fits a double") from None
        return False

    def name(self, name: str, opens: bool) -> bool:
        """A name is a function where a parenthesis follows, else a parameter or a constant."""
        if opens and name in FUNCTIONS:
            self.waiting.append((_FUNCTION, FUNCTIONS[name]))
            return True
        if name in self.names:
            self.steps.append(name)
        elif name in CONSTANTS:
            self.steps.append(CONSTANTS[name])
        else:
            known = [*self.names, "pi", *FUNCTIONS]
            raise ExpressionError(name, "a name that is known here: " + ", ".join(known[:12]))
        return False

    def sign(self, sign: str, operand_next: bool) -> bool:
        """One operator, parenthesis or comma; says whether a value must follow."""
        if sign == "(" and operand_next:
            function = self.waiting.pop()[1] if self.waiting and self.waiting[-1][0] == _FUNCTION else None
            self.waiting.append((_OPEN, function))
            self.commas.append(0)
        elif operand_next and sign in "+-":
            if sign == "-":
                self.waiting.append(_NEGATE)
        elif operand_next or sign == "(":
            raise ExpressionError(sign, "a value" if operand_next else "an operator between two values")
        elif sign in "),":
            return self.close(sign)
        elif sign == "^" and not self.power_sign:
            raise ExpressionError("^", "** for a power (in OpenQASM 3 the sign ^ works on bits)")
        else:
            strength, operation = _SIGNS[sign]
            self.unwind(strength if strength == _POWER else strength - 1)  # powers group from the right
            self.waiting.append((strength, operation))
        return True

    def unwind(self, weakest: int = _OPEN) -> None:
        """Carry out what waits and binds more strongly than `weakest`."""
        while self.waiting and self.waiting[-1][0] > weakest:
            operation = self.waiting.pop()[1]
            assert operation is not None
            self.steps.append(operation)

    def close(self, sign: str) -> bool:
        self.unwind()
        if not self.waiting:
            raise ExpressionError(sign, "a parenthesis or comma that belongs to an opening one")
        function = self.waiting[-1][1]
        wanted = function.operands if function else 1
        if sign == ",":
            self.commas[-1] += 1
            if self.commas[-1] >= wanted:
                raise ExpressionError(",", "one value between parentheses, two in pow and mod")
            return True
        self.waiting.pop()
        if self.commas.pop() + 1 != wanted:
            raise ExpressionError(self.text[:40], "two values in pow and mod")
        if function:
            self.steps.append(function)
        return False

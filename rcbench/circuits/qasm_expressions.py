"""Parameter expressions of OpenQASM: from text to a postfix program once, to numbers as often as wanted.

The program is a flat list worked off with a stack, so that no depth of parentheses can exhaust Python's own.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass

CONSTANTS: dict[str, float] = {
    "pi": math.pi, "π": math.pi, "tau": math.tau, "τ": math.tau, "euler": math.e, "ℇ": math.e,
}  # fmt: skip
FUNCTIONS: dict[str, Callable[[float], float]] = {
    "sin": math.sin, "cos": math.cos, "tan": math.tan, "exp": math.exp, "ln": math.log, "log": math.log,
    "sqrt": math.sqrt, "arcsin": math.asin, "arccos": math.acos, "arctan": math.atan, "asin": math.asin,
    "acos": math.acos, "atan": math.atan, "floor": math.floor, "ceiling": math.ceil,
}  # fmt: skip
FUNCTIONS_OF_TWO: dict[str, Callable[[float, float], float]] = {"pow": math.pow, "mod": math.fmod}

_TOKEN = re.compile(r"\s*(?:(0[xX][\da-fA-F_]+|0[bB][01_]+)|((?:\d[\d_]*\.?[\d_]*|\.\d[\d_]*)(?:[eE][+-]?\d+)?)|([^\W\d]\w*)|(\*\*|[-+*/^(),]))")
_BINARY: dict[str, tuple[int, Callable[[float, float], float]]] = {
    "+": (1, lambda a, b: a + b),
    "-": (1, lambda a, b: a - b),
    "*": (2, lambda a, b: a * b),
    "/": (2, lambda a, b: a / b),  # always real: the standard gates of OpenQASM 3 themselves write pow(1/2)
    "**": (4, math.pow),
    "^": (4, math.pow),
}
_NEGATE = 3  # binds looser than a power and tighter than a product, as in mathematics
_PUSH, _NAME, _ONE, _TWO = range(4)
_Step = tuple[int, object]


class ExpressionError(ValueError):
    """An expression that cannot be read or has no finite real value. found: the part; allowed: what may stand there."""

    def __init__(self, found: str, allowed: str) -> None:
        super().__init__(found, allowed)
        self.found, self.allowed = found, allowed


@dataclass(frozen=True, slots=True)
class Expression:
    """A compiled expression. names: the parameters and constants it asks for."""

    text: str
    steps: tuple[_Step, ...]
    names: frozenset[str]

    def value(self, known: Mapping[str, float]) -> float:
        """The value, with the named parameters from `known`.

        Raises:
            ExpressionError: no finite real value.
        """
        stack: list[float] = []
        try:
            for code, item in self.steps:
                if code == _PUSH:
                    stack.append(item)  # type: ignore[arg-type]
                elif code == _NAME:
                    stack.append(known[item])  # type: ignore[index]
                elif code == _ONE:
                    stack[-1] = item(stack[-1])  # type: ignore[operator]
                else:
                    right = stack.pop()
                    stack[-1] = item(stack[-1], right)  # type: ignore[operator]
            result = float(stack[0])
        except (ArithmeticError, ValueError):
            raise ExpressionError(self.text, "an expression with a finite real value") from None
        if not math.isfinite(result):
            raise ExpressionError(self.text, "an expression with a finite real value")
        return result


def evaluate(text: str, known: Mapping[str, float], *, power_sign: bool) -> float:
    """The value of an expression that uses the names in `known` and no others."""
    return compile_expression(text, known, power_sign=power_sign).value(known)


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
    return Expression(text.strip(), tuple(reader.steps), frozenset(reader.used))


class _Reader:
    """The shunting-yard algorithm of Dijkstra; one pass over the tokens."""

    def __init__(self, text: str, names: Collection[str], power_sign: bool) -> None:
        self.text, self.names, self.power_sign = text, names, power_sign
        self.steps: list[_Step] = []
        self.used: set[str] = set()
        # waiting operators: (binding strength, step); an opening parenthesis has strength 0 and holds its function
        self.waiting: list[tuple[int, object]] = []
        self.commas: list[int] = []

    def read(self) -> None:
        place, operand_next = 0, True
        text = self.text.rstrip()
        while place < len(text):
            match = _TOKEN.match(text, place)
            if match is None:
                raise ExpressionError(text[place:].strip()[:20], "numbers, names, + - * / ** ( ) and functions")
            place = match.end()
            whole, number, name, sign = match.groups()
            if sign is None:
                if not operand_next:
                    raise ExpressionError(match.group().strip(), "an operator between two values")
                if name is not None:
                    operand_next = self._name(name, text, place)
                else:
                    self._number(whole, number)
                    operand_next = False
            else:
                operand_next = self._sign(sign, operand_next)
        if operand_next:
            raise ExpressionError(self.text.strip(), "an expression that ends in a value")
        while self.waiting:
            strength, step = self.waiting.pop()
            if strength == 0:
                raise ExpressionError(self.text.strip(), "as many closing as opening parentheses")
            self.steps.append(step)  # type: ignore[arg-type]

    def _number(self, whole: str | None, number: str) -> None:
        try:
            value = float(int(whole.replace("_", ""), 0)) if whole else float(number.replace("_", ""))
        except (ValueError, OverflowError):
            raise ExpressionError((whole or number)[:40], "a number that fits a double") from None
        self.steps.append((_PUSH, value))

    def _name(self, name: str, text: str, place: int) -> bool:
        """A name is a function where a parenthesis follows, else a parameter or a constant."""
        if text[place:].lstrip()[:1] == "(" and (name in FUNCTIONS or name in FUNCTIONS_OF_TWO):
            self.waiting.append((5, name))
            return True
        if name in self.names:
            self.used.add(name)
            self.steps.append((_NAME, name))
        elif name in CONSTANTS:
            self.steps.append((_PUSH, CONSTANTS[name]))
        else:
            known = [*self.names, "pi", *FUNCTIONS]
            raise ExpressionError(name, "a name that is known here: " + ", ".join(known[:12]))
        return False

    def _sign(self, sign: str, operand_next: bool) -> bool:
        """One operator, parenthesis or comma; says whether a value must follow."""
        if sign == "(":
            if not operand_next:
                raise ExpressionError("(", "an operator between two values")
            function = self.waiting.pop()[1] if self.waiting and self.waiting[-1][0] == 5 else None
            self.waiting.append((0, function))
            self.commas.append(0)
            return True
        if operand_next:
            if sign in "+-":
                if sign == "-":
                    self.waiting.append((_NEGATE, (_ONE, _negative)))
                return True
            raise ExpressionError(sign, "a value")
        if sign in "),":
            return self._close(sign)
        if sign == "^" and not self.power_sign:
            raise ExpressionError("^", "** for a power (in OpenQASM 3 the sign ^ works on bits)")
        strength, operator = _BINARY[sign]
        while self.waiting and (self.waiting[-1][0] > strength or (self.waiting[-1][0] == strength != 4)):
            self.steps.append(self.waiting.pop()[1])  # type: ignore[arg-type]
        self.waiting.append((strength, (_TWO, operator)))
        return True

    def _close(self, sign: str) -> bool:
        while self.waiting and self.waiting[-1][0] != 0:
            self.steps.append(self.waiting.pop()[1])  # type: ignore[arg-type]
        if not self.waiting:
            raise ExpressionError(sign, "a parenthesis or comma that belongs to an opening one")
        function = self.waiting[-1][1]
        if sign == ",":
            if function not in FUNCTIONS_OF_TWO or self.commas[-1]:
                raise ExpressionError(",", "one value between parentheses, two in pow and mod")
            self.commas[-1] = 1
            return True
        self.waiting.pop()
        two = self.commas.pop()
        if isinstance(function, str):
            if (function in FUNCTIONS_OF_TWO) != bool(two):
                raise ExpressionError(function, "two values in pow and mod, one in every other function")
            self.steps.append((_TWO, FUNCTIONS_OF_TWO[function]) if two else (_ONE, FUNCTIONS[function]))
        return False


def _negative(value: float) -> float:
    return -value

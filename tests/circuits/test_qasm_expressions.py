"""Parameter expressions: values worked out by hand, random ones against Python's own arithmetic."""

from __future__ import annotations

import math
import random
import re

import numpy as np
import pytest

from rcbench.circuits.qasm_expressions import ExpressionError, compile_expression, evaluate


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("pi/2", math.pi / 2),
        ("-pi/4", -math.pi / 4),
        ("3*pi/4", 3 * math.pi / 4),
        ("0.25*pi", math.pi / 4),
        ("-(pi+1)/2", -(math.pi + 1) / 2),
        ("2^3", 8.0),
        ("2^3^2", 512.0),
        ("2**-1", 0.5),
        ("-2^2", -4.0),
        ("2*-3", -6.0),
        ("2--3", 5.0),
        ("1/2", 0.5),
        ("8/4/2", 1.0),
        ("7-4-2", 1.0),
        ("sin(pi/6)", math.sin(math.pi / 6)),
        ("-cos(0)^2", -1.0),
        ("tan(0.3)+exp(1)-ln(2)*sqrt(4)", math.tan(0.3) + math.e - 2 * math.log(2)),
        ("pow(2, 5)", 32.0),
        ("mod(7, 4)", 3.0),
        ("arccos(0)", math.pi / 2),
        ("1e-3", 0.001),
        (".5", 0.5),
        ("1.", 1.0),
        ("1_000", 1000.0),
        ("0x1F", 31.0),
        ("π/τ", 0.5),
        ("euler", math.e),
        (" ( ( 1 ) ) ", 1.0),
    ],
)
def test_an_expression_has_the_value_that_arithmetic_gives(text, value):
    assert evaluate(text, {}, power_sign=True) == pytest.approx(value, rel=1e-15)


def test_random_expressions_have_the_values_that_python_gives():
    draw = random.Random(11)

    def build(depth: int) -> str:
        if depth == 0 or draw.random() < 0.2:
            return draw.choice(["pi", "angle", "theta", f"{draw.uniform(0.1, 3):.3f}", str(draw.randint(1, 9))])
        kind = draw.random()
        if kind < 0.2:
            return f"({build(depth - 1)})"
        if kind < 0.3:
            return f"-{build(depth - 1)}"
        if kind < 0.45:
            return f"{draw.choice(['sin', 'cos', 'tan'])}({build(depth - 1)})"
        return f"{build(depth - 1)} {draw.choice('+-*/')} {build(depth - 1)}"

    known = {"angle": 0.37, "theta": 2.11}
    names = {"pi": math.pi, "sin": math.sin, "cos": math.cos, "tan": math.tan, **known}
    for _ in range(500):
        text = build(4)
        try:
            expected = eval(text, {"__builtins__": {}}, names)
        except ZeroDivisionError:
            continue
        assert evaluate(text, known, power_sign=True) == pytest.approx(expected, rel=1e-12), text


def test_many_parameter_sets_at_once_give_the_values_of_each_alone():
    rng = np.random.default_rng(3)
    columns = {"a": rng.uniform(0.1, 2, 20), "b": rng.uniform(0.1, 2, 20)}
    expression = compile_expression("sqrt(a)^b/(1 + ln(a*b)^2) - arctan(-a) + floor(b)", columns, power_sign=True)
    alone = [expression.value({"a": a, "b": b}) for a, b in zip(columns["a"], columns["b"], strict=True)]
    np.testing.assert_allclose(expression.values(columns), alone, rtol=1e-14)


def test_a_parameter_hides_a_constant_or_function_of_its_name():
    assert evaluate("pi + sin", {"pi": 1.0, "sin": 2.0}, power_sign=True) == 3.0


@pytest.mark.parametrize(
    ("text", "found"),
    [
        ("1/0", "1/0"),
        ("sqrt(-1)", "sqrt"),
        ("ln(0)", "ln"),
        ("(-8)^(1/3)", "-8"),
        ("9^9^9^9", "9^9"),
        ("1e999", "1e999"),
        ("exp(1000)", "exp"),
        ("nan", "nan"),
        ("inf", "inf"),
        ("foo", "foo"),
        ("", "''"),
        ("1 +", "1 +"),
        ("(1", "1"),
        ("1)", ")"),
        ("2 3", "3"),
        ("2(3)", "("),
        ("sin()", ")"),
        ("pow(1)", "pow"),
        ("(1, 2)", ","),
        ("1 ! 2", "!"),
    ],
)
def test_an_expression_without_a_finite_value_is_refused_with_the_part_that_is_wrong(text, found):
    with pytest.raises(ExpressionError, match=re.escape(found)):
        evaluate(text, {}, power_sign=True)


def test_the_sign_for_bits_of_openqasm_3_is_no_power():
    with pytest.raises(ExpressionError, match=r"\*\* for a power"):
        evaluate("2^3", {}, power_sign=False)


@pytest.mark.parametrize("text", ["(" * 50_000 + "1" + ")" * 50_000, "-" * 50_000 + "1", "+".join(["1"] * 50_000)])
def test_depth_and_length_exhaust_nothing(text):
    assert evaluate(text, {}, power_sign=True) in (1.0, 50_000.0)

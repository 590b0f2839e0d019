"""How numbers are printed: one missing sign, digits that follow the uncertainty, no NaN and no infinity."""

from __future__ import annotations

import math

MISSING = "–"
MINUS = "−"


def is_number(value: object) -> bool:
    """Whether a value is there and finite."""
    return isinstance(value, (int, float)) and not isinstance(value, bool) and math.isfinite(value)


def fixed(value: object, decimals: int) -> str:
    """A number with that many decimals; the missing sign where there is none."""
    if not is_number(value):
        return MISSING
    text = f"{float(value):.{max(decimals, 0)}f}"  # type: ignore[arg-type]
    return MINUS + text[1:] if text.startswith("-") and float(text) != 0 else text.removeprefix("-")


def number(value: object, digits: int = 3) -> str:
    """A number with that many significant digits, in powers of ten below 1e-4 and from 1e7 up."""
    if not is_number(value):
        return MISSING
    size = abs(float(value))  # type: ignore[arg-type]
    if size == 0:
        return "0"
    if size < 1e-4 or size >= 1e7:
        mantissa, _, power = f"{float(value):.{digits - 1}e}".partition("e")  # type: ignore[arg-type]
        return f"{mantissa}e{int(power)}".replace("-", MINUS)
    return fixed(value, digits - 1 - math.floor(math.log10(size)))


def decimals_for(uncertainty: object, fallback: int = 3) -> int:
    """Decimals that show two significant digits of an uncertainty, from 0 to 6."""
    if not is_number(uncertainty) or float(uncertainty) <= 0:  # type: ignore[arg-type]
        return fallback
    return min(max(1 - math.floor(math.log10(float(uncertainty))), 0), 6)  # type: ignore[arg-type]


def interval(low: object, high: object, decimals: int = 3) -> str:
    """An interval as ``[low, high]``; the missing sign where neither end is known."""
    if not is_number(low) and not is_number(high):
        return MISSING
    return f"[{fixed(low, decimals)}, {fixed(high, decimals)}]"


def whole(value: object) -> str:
    """A whole number with thin spaces between thousands."""
    if not is_number(value):
        return MISSING
    return f"{round(float(value)):,}".replace(",", "\u202f").replace("-", MINUS)  # type: ignore[arg-type]


def duration(seconds: object) -> str:
    """A time in the unit that suits it."""
    if not is_number(seconds):
        return MISSING
    value = float(seconds)  # type: ignore[arg-type]
    for limit, size, unit in ((120, 1, "s"), (7200, 60, "min"), (172800, 3600, "h"), (math.inf, 86400, "days")):
        if value < limit:
            return f"{number(value / size)} {unit}"
    return MISSING


def percent(level: float) -> str:
    """A confidence level as ``95 %``."""
    return f"{100 * level:g} %"


def ranges(values: list[int]) -> str:
    """Whole numbers as ranges where they are neighbours in steps of one: ``2, 4, 6-9``."""
    runs: list[list[int]] = []
    for value in sorted(set(values)):
        if runs and value == runs[-1][-1] + 1:
            runs[-1].append(value)
        else:
            runs.append([value])
    return ", ".join(str(r[0]) if len(r) == 1 else f"{r[0]}, {r[1]}" if len(r) == 2 else f"{r[0]}–{r[-1]}" for r in runs)

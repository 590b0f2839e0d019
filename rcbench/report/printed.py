"""How numbers are printed: one missing sign, digits that follow the uncertainty, no NaN and no infinity."""

from __future__ import annotations

import math
from collections.abc import Iterable

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


def bracketed(value: object, error: object) -> str:
    """A number with the error of its last digits in brackets, as ``2.31(11)``; four digits where no error is known."""
    if not is_number(value):
        return MISSING
    size = abs(float(value))  # type: ignore[arg-type]
    if not is_number(error) or float(error) < 1e-6 * max(size, 1e-3):  # type: ignore[arg-type]
        return "0" if size < 1e-9 else number(value, 4)
    spread = float(error)  # type: ignore[arg-type]
    if size >= 1e6 or spread < 1e-5:
        return f"{number(value, 3)} ± {number(error, 2)}"
    decimals = decimals_for(spread)
    return f"{fixed(value, decimals)}({spread * 10**decimals:.0f})"


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


def small_power(largest: object) -> int:
    """The power of ten, a multiple of three, in which quantities no larger than `largest` are shown; 0 from 0.05 up."""
    if not is_number(largest) or not 0 < float(largest) < 0.05:  # type: ignore[arg-type]
        return 0
    return 3 * math.ceil(-math.log10(float(largest)) / 3)  # type: ignore[arg-type]


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
    """A confidence level as ``95 %``, in one piece."""
    return f"{100 * level:g}\u00a0%"


def depths_text(depths: Iterable[float], tested: Iterable[float]) -> str:
    """Depths as runs of neighbours among those tested: ``depth 2``, ``depths 4 to 10 and 16``."""
    order = sorted(set(tested) | set(depths))
    places = sorted({order.index(depth) for depth in depths})
    runs: list[list[int]] = []
    for place in places:
        if runs and place == runs[-1][-1] + 1:
            runs[-1].append(place)
        else:
            runs.append([place])
    parts: list[str] = []
    for run in runs:
        if len(run) < 3:
            parts += [f"{order[place]:g}" for place in run]
        else:
            parts.append(f"{order[run[0]]:g} to {order[run[-1]]:g}")
    listed = parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}" if parts else MISSING
    return f"depth{'s' if len(places) > 1 else ''} {listed}"

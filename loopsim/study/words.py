"""Numbers and times as people read them."""

from __future__ import annotations

import math

from loopsim.language.units import ATMOSPHERE, Unit, from_si

DIGITS = 4


def rounded(number: float, digits: int = DIGITS) -> str:
    """A number with so many significant digits, all places before the point kept, no trailing zeros."""
    if not math.isfinite(number):
        return "without limit" if number > 0 else str(number)
    if number == 0:
        return "0"
    places = max(0, digits - 1 - math.floor(math.log10(abs(number))))
    if places > digits + 3 or abs(number) >= 1e9:
        return f"{number:.{digits}g}"
    text = f"{number:.{places}f}"
    text = text.rstrip("0").rstrip(".") if "." in text else text
    return "0" if text == "-0" else text


def shown(value: float, unit: Unit | None, air_pressure: float = ATMOSPHERE, digits: int = DIGITS) -> str:
    """An SI value in people's unit: `61.3 degC`, `3`."""
    if unit is None or unit.text in ("count", "dimensionless"):
        return rounded(value, digits)
    return f"{rounded(from_si(value, unit, air_pressure), digits)} {unit.text}"


def pair(value: float, limit: float, unit: Unit | None, air_pressure: float = ATMOSPHERE) -> tuple[str, str]:
    """A value and its limit with as many digits as it takes to tell them apart."""
    texts = ("", "")
    for digits in range(DIGITS, 13):
        texts = shown(value, unit, air_pressure, digits), shown(limit, unit, air_pressure, digits)
        if texts[0] != texts[1] or value == limit:
            break
    return texts


def clock(time: float) -> str:
    """A time [s] in s, min or h, as a file would say it: `45 s`, `21.5 min`, `3 h`."""
    if abs(time) < 120:
        return f"{rounded(time)} s"
    if abs(time) < 300 * 60:
        return f"{rounded(time / 60)} min"
    return f"{rounded(time / 3600)} h"


def listed(items: list[str]) -> str:
    """`a, b and c`."""
    return items[0] if len(items) == 1 else ", ".join(items[:-1]) + " and " + items[-1] if items else ""

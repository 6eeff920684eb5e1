"""Mathematics of the generated text that never raises: what has no value is nan or infinite."""

from __future__ import annotations

import math
from collections.abc import Callable

NAN = math.nan
INFINITY = math.inf


def div(a: float, b: float) -> float:
    """a/b; infinite or nan for b = 0."""
    if b != 0.0:
        return a / b
    if a == 0.0 or a != a:
        return NAN
    return math.copysign(INFINITY, a) * math.copysign(1.0, b)


def power(a: float, b: float) -> float:
    """a to the power b; nan where it is not real."""
    try:
        return math.pow(a, b)
    except ValueError:
        return INFINITY if a == 0.0 else NAN
    except OverflowError:
        return INFINITY


def _guarded(function: Callable[[float], float], overflow: float = NAN) -> Callable[[float], float]:
    def call(a: float) -> float:
        try:
            return function(a)
        except ValueError:
            return NAN
        except OverflowError:
            return overflow

    return call


def logarithm(a: float) -> float:
    """Natural logarithm; minus infinity at 0, nan below."""
    return math.log(a) if a > 0.0 else (-INFINITY if a == 0.0 else NAN)


def logarithm10(a: float) -> float:
    """Logarithm to base 10; minus infinity at 0, nan below."""
    return math.log10(a) if a > 0.0 else (-INFINITY if a == 0.0 else NAN)


def sign(a: float) -> float:
    """-1, 0 or 1."""
    return 1.0 if a > 0.0 else (-1.0 if a < 0.0 else a)


def clip(a: float, low: float, high: float) -> float:
    """a, not above `high`, then not below `low`."""
    capped = high if a > high else a
    return low if capped < low else capped


def rounded(a: float, step: float) -> float:
    """The nearest multiple of step, halves upwards; a itself for step 0."""
    return a if step == 0.0 else math.floor(a / step + 0.5) * step


def smaller(a: float, b: float) -> float:
    """The smaller one."""
    return b if b < a else a


def greater(a: float, b: float) -> float:
    """The greater one."""
    return b if b > a else a


def sticky(a: float, b: float, zone: float, position: float) -> float:
    """1 for a > b, 0 for a < b, the position as it was where both are equal within rounding."""
    gap = a - b
    if abs(gap) <= 1e-12 * (abs(a) + abs(b)) + zone:
        return position
    return 1.0 if gap > 0.0 else 0.0


GUARDED_FUNCTIONS: dict[str, object] = {
    "NAN": NAN,
    "INFINITY": INFINITY,
    "div": div,
    "power": power,
    "root": _guarded(math.sqrt),
    "exponential": _guarded(math.exp, INFINITY),
    "logarithm": logarithm,
    "logarithm10": logarithm10,
    "sine": _guarded(math.sin),
    "cosine": _guarded(math.cos),
    "tangent": _guarded(math.tan),
    "hyperbolic_tangent": _guarded(math.tanh),
    "sign": sign,
    "clip": clip,
    "rounded": rounded,
    "smaller": smaller,
    "greater": greater,
    "sticky": sticky,
}

"""The mathematics that the generated text calls: the language's own, under the text's names."""

from __future__ import annotations

import math

from loopsim.language import evaluate as language


def sticky(a: float, b: float, zone: float, position: float) -> float:
    """1 for a > b, 0 for a < b, the position as it was where both are equal within rounding and `zone`."""
    gap = a - b
    if abs(gap) <= 1e-12 * (abs(a) + abs(b)) + zone:
        return position
    return 1.0 if gap > 0.0 else 0.0


GUARDED_FUNCTIONS: dict[str, object] = {
    "NAN": math.nan,
    "INFINITY": math.inf,
    "div": language.divided,
    "power": language.power,
    "root": language.root,
    "exponential": language.exponential,
    "logarithm": language.logarithm,
    "logarithm10": language.logarithm10,
    "sine": language.sine,
    "cosine": language.cosine,
    "tangent": language.tangent,
    "hyperbolic_tangent": language.hyperbolic_tangent,
    "sign": language.sign,
    "clip": language.clip,
    "rounded": language.rounded,
    "smaller": language.smaller,
    "greater": language.greater,
    "sticky": sticky,
}

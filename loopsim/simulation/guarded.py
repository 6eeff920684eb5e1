"""The mathematics that the text calls when it runs as Python: the language's own, under the text's names."""

from __future__ import annotations

import math

from loopsim.language import evaluate as language


def floor(a: float) -> float:
    """The greatest whole number not above a, as a float."""
    return float(math.floor(a)) if math.isfinite(a) else a


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
    "floor": floor,
}

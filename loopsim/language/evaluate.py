"""Formulas evaluated with numbers; what has no value is nan or infinite, never an exception."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from loopsim.language.tree import Call, Expression, Name, Number, Operation


@dataclass(frozen=True, slots=True)
class Table:
    """A curve: straight lines between points of rising x, ends held."""

    x: tuple[float, ...]
    y: tuple[float, ...]

    def at(self, x: float) -> float:
        """The value at x."""
        place = self._place(x)
        if place is None:
            return self.y[0] if x <= self.x[0] else self.y[-1]
        return self.y[place] + self.slope(x) * (x - self.x[place])

    def slope(self, x: float) -> float:
        """The slope at x; nought beyond the ends."""
        place = self._place(x)
        if place is None:
            return 0.0
        return (self.y[place + 1] - self.y[place]) / (self.x[place + 1] - self.x[place])

    def _place(self, x: float) -> int | None:
        """The number of the line that x lies on."""
        if not self.x[0] < x < self.x[-1]:
            return None
        return max(place for place in range(len(self.x) - 1) if self.x[place] <= x)


def evaluate(tree: Expression, values: Mapping[str, float | Table]) -> float:
    """The value of a tree; on and off are 1 and 0. Only the branch taken of a `where` is evaluated."""
    if isinstance(tree, Number):
        return tree.value
    if isinstance(tree, Name):
        return values[tree.name]  # type: ignore[return-value]
    if isinstance(tree, Operation):
        return _operation(tree, values)
    assert isinstance(tree, Call)
    if tree.function == "where":
        return _where(tree.arguments, values)
    if tree.function in ("interp", "interp_slope"):
        return _table(tree, values)
    return PURE[tree.function](*[evaluate(one, values) for one in tree.arguments])


def _operation(tree: Operation, values: Mapping[str, float | Table]) -> float:
    if tree.operator == "and":
        return float(all(evaluate(one, values) for one in tree.arguments))
    if tree.operator == "or":
        return float(any(evaluate(one, values) for one in tree.arguments))
    return OPERATORS[tree.operator](*[evaluate(one, values) for one in tree.arguments])


def _where(arguments: tuple[Expression, ...], values: Mapping[str, float | Table]) -> float:
    for place in range(0, len(arguments) - 1, 2):
        if evaluate(arguments[place], values):
            return evaluate(arguments[place + 1], values)
    return evaluate(arguments[-1], values)


def _table(tree: Call, values: Mapping[str, float | Table]) -> float:
    name, x = tree.arguments[0], evaluate(tree.arguments[1], values)
    assert isinstance(name, Name)
    table = values[name.name]
    assert isinstance(table, Table)
    return table.at(x) if tree.function == "interp" else table.slope(x)


# ---------------------------------------------------------------- guarded mathematics
def divided(a: float, b: float) -> float:
    """a/b; infinite or nan for b = 0."""
    if b != 0.0:
        return a / b
    return math.nan if a == 0.0 or a != a else math.copysign(math.inf, a) * math.copysign(1.0, b)


def power(a: float, b: float) -> float:
    """a to the power b; nan where it is not real."""
    try:
        return math.pow(a, b)
    except ValueError:
        return math.inf if a == 0.0 else math.nan
    except OverflowError:
        return math.inf


def logarithm(a: float) -> float:
    """Natural logarithm; minus infinity at 0, nan below."""
    return math.log(a) if a > 0.0 else (-math.inf if a == 0.0 else math.nan)


def logarithm10(a: float) -> float:
    """Logarithm to base 10; minus infinity at 0, nan below."""
    return math.log10(a) if a > 0.0 else (-math.inf if a == 0.0 else math.nan)


def sign(a: float) -> float:
    """-1, 0 or 1."""
    return 1.0 if a > 0.0 else (-1.0 if a < 0.0 else a)


def clip(a: float, low: float, high: float) -> float:
    """a, not above `high`, then not below `low`."""
    capped = high if a > high else a
    return low if capped < low else capped


def rounded(a: float, step: float) -> float:
    """The nearest multiple of step, halves upwards; a itself for step 0."""
    if step == 0.0 or not math.isfinite(a):
        return a
    return math.floor(a / step + 0.5) * step


def smaller(a: float, b: float) -> float:
    """The smaller one; a where they are equal."""
    return b if b < a else a


def greater(a: float, b: float) -> float:
    """The greater one; a where they are equal."""
    return b if b > a else a


def guarded(function: Callable[[float], float], overflow: float = math.nan) -> Callable[[float], float]:
    """A function of one number that gives nan, or `overflow`, where Python would raise."""

    def call(a: float) -> float:
        try:
            return function(a)
        except ValueError:
            return math.nan
        except OverflowError:
            return overflow

    return call


def _smallest(*values: float) -> float:
    best = values[0]
    for value in values[1:]:
        best = smaller(best, value)
    return best


def _greatest(*values: float) -> float:
    best = values[0]
    for value in values[1:]:
        best = greater(best, value)
    return best


root, exponential = guarded(math.sqrt), guarded(math.exp, math.inf)
sine, cosine, tangent = guarded(math.sin), guarded(math.cos), guarded(math.tan)
hyperbolic_tangent = guarded(math.tanh)

PURE: dict[str, Callable[..., float]] = {
    "sqrt": root,
    "exp": exponential,
    "log": logarithm,
    "log10": logarithm10,
    "sin": sine,
    "cos": cosine,
    "tan": tangent,
    "tanh": hyperbolic_tangent,
    "abs": abs,
    "sign": sign,
    "min": _smallest,
    "max": _greatest,
    "clip": clip,
    "rounded": rounded,
}
OPERATORS: dict[str, Callable[..., float]] = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": divided,
    "^": power,
    "neg": lambda a: -a,
    "not": lambda a: float(not a),
    "<": lambda a, b: float(a < b),
    "<=": lambda a, b: float(a <= b),
    ">": lambda a, b: float(a > b),
    ">=": lambda a, b: float(a >= b),
    "==": lambda a, b: float(a == b),
    "!=": lambda a, b: float(a != b),
}

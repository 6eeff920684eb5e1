"""What kind of quantity a formula gives: a dimension, on or off, nought, a choice of a setting, a curve."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from loopsim.language.dimensions import NONE, Dimension
from loopsim.language.tree import COMPARISONS, LOGIC, Call, Expression, Name, Number, Operation, Rate
from loopsim.language.write import write


@dataclass(frozen=True, slots=True)
class OnOff:
    """On or off."""


@dataclass(frozen=True, slots=True)
class Zero:
    """Nought without a unit: it fits every dimension."""


@dataclass(frozen=True, slots=True)
class Words:
    """One of the choices of a setting."""

    choices: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Curve:
    """A table: dimensions of x and y."""

    x: Dimension
    y: Dimension


Kind = Dimension | OnOff | Zero | Words | Curve
ON_OFF, ZERO = OnOff(), Zero()
SECOND = Dimension.of({"s": 1})
VOLUME = Dimension.of({"m": 3})
FLOW = VOLUME.divide(SECOND)
PLAIN_FUNCTIONS = ("exp", "log", "log10", "sin", "cos", "tan", "tanh")


class KindError(ValueError):
    """Quantities that do not go together: `what`, the column `at` (from 0) and the cure."""

    def __init__(self, what: str, at: int = 0, hint: str = "") -> None:
        super().__init__(what)
        self.what, self.at, self.hint = what, at, hint


def describe(kind: Kind) -> str:
    """A kind in words: the unit, `on or off`, …"""
    if isinstance(kind, Dimension):
        return kind.describe()
    return {OnOff: "on or off", Zero: "0", Words: "a choice", Curve: "a curve"}[type(kind)]


def kind_of(tree: Expression, names: Callable[[Name], Kind]) -> Kind:
    """The kind of a formula; `names` gives the kind of a name, or raises `KindError`."""
    return _Walk(names).of(tree)


def same(left: Kind, right: Kind) -> bool:
    """Whether two kinds may be added, compared, or stand for each other."""
    if isinstance(left, Zero) and isinstance(right, Dimension | Zero):
        return True
    return left == right or (isinstance(right, Zero) and isinstance(left, Dimension))


class _Walk:
    """One walk over a tree."""

    def __init__(self, names: Callable[[Name], Kind]) -> None:
        self.names = names

    def of(self, tree: Expression) -> Kind:
        if isinstance(tree, Number):
            return ZERO if tree.value == 0 else NONE
        if isinstance(tree, Name):
            return self.names(tree)
        if isinstance(tree, Rate):
            return self.dimension(tree.argument).divide(SECOND)
        if isinstance(tree, Operation):
            return self._operation(tree)
        return self._call(tree)

    def dimension(self, tree: Expression) -> Dimension:
        """The dimension of a part that must have one; nought counts as dimensionless."""
        kind = self.of(tree)
        if isinstance(kind, Zero):
            return NONE
        if not isinstance(kind, Dimension):
            hint = "use where(condition, a, b) to choose between quantities" if isinstance(kind, OnOff) else ""
            raise KindError(f"`{write(tree)}` is {describe(kind)}; a quantity is wanted here", tree.at, hint)
        return kind

    def condition(self, tree: Expression) -> None:
        """A part that must be on or off."""
        kind = self.of(tree)
        if not isinstance(kind, OnOff):
            raise KindError(
                f"`{write(tree)}` is in {describe(kind)}; a condition is wanted here",
                tree.at,
                "compare it with something",
            )

    def plain(self, tree: Expression, what: str) -> None:
        """A part that must be a plain number."""
        dimension = self.dimension(tree)
        if dimension != NONE:
            raise KindError(
                f"`{write(tree)}` is in {dimension.describe()}; {what} takes a plain number",
                tree.at,
                "divide it by a reference of the same unit",
            )

    # ------------------------------------------------------------ operations
    def _operation(self, tree: Operation) -> Kind:
        if tree.operator in LOGIC:
            for part in tree.arguments:
                self.condition(part)
            return ON_OFF
        if tree.operator in COMPARISONS:
            self._alike(tree, tree.arguments, "compared", words=tree.operator in ("==", "!="))
            return ON_OFF
        match tree.operator:
            case "neg":
                kind = self.of(tree.arguments[0])
                return kind if isinstance(kind, Zero) else self.dimension(tree.arguments[0])
            case "+" | "-":
                return self._alike(tree, tree.arguments, "added" if tree.operator == "+" else "subtracted")
            case "*" | "/":
                return self._product(tree)
        return self._power(tree)

    def _alike(self, tree: Expression, parts: tuple[Expression, ...], how: str, words: bool = False) -> Kind:
        """The common kind of parts that must be alike."""
        first, found = parts[0], self.of(parts[0])
        for part in parts[1:]:
            kind = self.of(part)
            both_words = words and isinstance(found, Words | OnOff) and type(found) is type(kind)
            if not both_words and (not isinstance(found, Dimension | Zero) or not same(found, kind)):
                raise KindError(
                    f"`{write(first)}` is {_in(found)} but `{write(part)}` is {_in(kind)}: they cannot be {how}",
                    tree.at,
                    "a factor is missing or too many"
                    if isinstance(found, Dimension) and isinstance(kind, Dimension)
                    else "",
                )
            if isinstance(found, Zero):
                first, found = part, kind
        return found

    def _product(self, tree: Operation) -> Kind:
        kinds = [self.of(part) for part in tree.arguments]
        sides = [self.dimension(part) for part in tree.arguments]
        if isinstance(kinds[0], Zero) or (tree.operator == "*" and isinstance(kinds[1], Zero)):
            return ZERO
        return sides[0].multiply(sides[1]) if tree.operator == "*" else sides[0].divide(sides[1])

    def _power(self, tree: Operation) -> Kind:
        base, exponent = tree.arguments
        self.plain(exponent, "an exponent")
        dimension = self.dimension(base)
        if dimension == NONE:
            return NONE
        value = _constant(exponent)
        if value is None:
            raise KindError(
                f"`{write(base)}` is in {dimension.describe()}; its exponent must be a number",
                tree.at,
                "write the number",
            )
        return dimension.power(value)

    # ------------------------------------------------------------ calls
    def _call(self, tree: Call) -> Kind:
        name, parts = tree.function, tree.arguments
        if name in PLAIN_FUNCTIONS:
            self.plain(parts[0], name)
            return NONE
        match name:
            case "sqrt":
                return self.dimension(parts[0]).power(0.5)
            case "abs" | "sum":
                return self.dimension(parts[0])
            case "sign":
                self.dimension(parts[0])
                return NONE
            case "min" | "max" | "clip" | "rounded":
                return self._alike(tree, parts, f"used together in {name}")
            case "where":
                return self._where(tree)
            case "interp":
                return self._interp(tree)
            case "given" | "wired":
                self.of(parts[0])
                return ON_OFF
        return self._primitive(tree)

    def _where(self, tree: Call) -> Kind:
        for condition in tree.arguments[:-1:2]:
            self.condition(condition)
        branches = (*tree.arguments[1::2], tree.arguments[-1])
        kinds = [self.of(branch) for branch in branches]
        if all(isinstance(kind, OnOff) for kind in kinds):
            return ON_OFF
        if all(isinstance(kind, Words) for kind in kinds):
            return kinds[0]
        return self._alike(tree, branches, "branches of one where")

    def _interp(self, tree: Call) -> Kind:
        curve, x = self.of(tree.arguments[0]), self.of(tree.arguments[1])
        if not isinstance(curve, Curve):
            raise KindError(f"`{write(tree.arguments[0])}` is not a curve", tree.at, "give the parameter a `table:`")
        if not same(curve.x, x):
            raise KindError(
                f"`{write(tree.arguments[1])}` is {_in(x)} but the curve's x is in {curve.x.describe()}", tree.at
            )
        return curve.y

    def _primitive(self, tree: Call) -> Kind:
        parts = tree.arguments
        match tree.function:
            case "since":
                self.condition(parts[0])
                return SECOND
            case "held":
                self.condition(parts[1])
            case "delayed" | "noise":
                self._wants(parts[1], SECOND, "a time")
            case "transported":
                self._wants(parts[1], FLOW, "a volume flow")
                self._wants(parts[2], VOLUME, "a volume")
        return self.of(parts[0])

    def _wants(self, tree: Expression, dimension: Dimension, what: str) -> None:
        kind = self.of(tree)
        if not same(dimension, kind):
            raise KindError(f"`{write(tree)}` is {_in(kind)}; {what} is wanted here", tree.at)


def _in(kind: Kind) -> str:
    return f"in {describe(kind)}" if isinstance(kind, Dimension) else describe(kind)


def _constant(tree: Expression) -> float | None:
    """The number of an exponent such as 2, -1 or 1/2."""
    if isinstance(tree, Number):
        return tree.value
    if isinstance(tree, Operation) and tree.operator in ("neg", "/"):
        values = [_constant(part) for part in tree.arguments]
        if None in values or (tree.operator == "/" and values[1] == 0):
            return None
        return -values[0] if tree.operator == "neg" else values[0] / values[1]  # type: ignore[operator]
    return None

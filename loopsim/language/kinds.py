"""What a formula gives - a quantity of some dimension, on or off, a choice, a curve - found in one walk over its tree.

To add a function: its signature in `functions.py`, and a rule in `RULES` here that says what it takes and gives.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from loopsim.errors import nearest
from loopsim.language.dimensions import NONE, Dimension
from loopsim.language.parse import constant
from loopsim.language.tree import COMPARISONS, LOGIC, Call, Expression, Name, Number, Operation, Rate
from loopsim.language.write import shortened


@dataclass(frozen=True, slots=True)
class OnOff:
    """On or off."""


@dataclass(frozen=True, slots=True)
class Zero:
    """The number 0, which fits every dimension."""


@dataclass(frozen=True, slots=True)
class Words:
    """One of the choices of a setting."""

    setting: str
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
BY_FACTOR = "a factor is missing or too many"


class KindError(ValueError):
    """Quantities that do not go together: `what`, the column `at` (from 0) and the cure."""

    def __init__(self, what: str, at: int = 0, hint: str = "") -> None:
        super().__init__(what)
        self.what, self.at, self.hint = what, at, hint


def kind_of(tree: Expression, names: Callable[[Name], Kind]) -> Kind:
    """The kind of a formula; `names` gives the kind of a name. Raises `KindError`."""
    return _Walk(names).of(tree)


def same(one: Kind, other: Kind) -> bool:
    """Whether two kinds may be added, compared, or stand for each other; 0 fits every dimension."""
    if isinstance(one, Zero) or isinstance(other, Zero):
        return isinstance(one, Zero | Dimension) and isinstance(other, Zero | Dimension)
    return one == other


def describe(kind: Kind) -> str:
    """A kind in words, to stand after `is`: `W/K`, `on or off`, `a choice of mode`."""
    match kind:
        case Dimension():
            return kind.describe()
        case Words():
            return f"a choice of {kind.setting}"
        case Curve():
            return "a curve"
    return "on or off" if isinstance(kind, OnOff) else "0"


def place(tree: Expression) -> int:
    """The column where the text of a tree begins; the sign of an operation stands further right."""
    if isinstance(tree, Operation) and tree.operator not in ("neg", "not"):
        return place(tree.arguments[0])
    return tree.at


class _Walk:
    """One walk over a tree."""

    def __init__(self, names: Callable[[Name], Kind]) -> None:
        self.names = names

    def of(self, tree: Expression) -> Kind:
        """The kind of any node."""
        match tree:
            case Number():
                return ZERO if tree.value == 0 else NONE
            case Name():
                return self.names(tree)
            case Rate():
                return self.dimension(tree.argument, "changed in time").divide(SECOND)
            case Call():
                return RULES[tree.function](self, tree)
        return self._operation(tree)

    # ------------------------------------------------------------ what a part must be
    def quantity(self, tree: Expression, done: str) -> Dimension | Zero:
        """The kind of a part that must be a number; `done` says what cannot be done with anything else."""
        kind = self.of(tree)
        if isinstance(kind, Dimension | Zero):
            return kind
        hint = "write where(condition, 1, 0) for a number" if isinstance(kind, OnOff) else ""
        if isinstance(kind, Words):
            hint = f"write {shortened(tree)} == {kind.choices[0]}"
        if isinstance(kind, Curve):
            hint = f"write interp({shortened(tree)}, x)"
        raise KindError(f"`{shortened(tree)}` is {describe(kind)}: it cannot be {done}", place(tree), hint)

    def dimension(self, tree: Expression, done: str) -> Dimension:
        """As `quantity`; 0 counts as dimensionless."""
        kind = self.quantity(tree, done)
        return kind if isinstance(kind, Dimension) else NONE

    def condition(self, tree: Expression) -> None:
        """A part that must be on or off."""
        kind = self.of(tree)
        if not isinstance(kind, OnOff):
            hint = f"write {shortened(tree)} == {kind.choices[0]}" if isinstance(kind, Words) else "write a comparison"
            raise KindError(f"`{shortened(tree)}` is {describe(kind)}: a condition is wanted", place(tree), hint)

    def plain(self, tree: Expression, what: str) -> None:
        """A part that must have no dimension."""
        found = self.dimension(tree, what)
        if found != NONE:
            hint = "divide it by a quantity of its own dimension"
            text = f"`{shortened(tree)}` is {found.describe()}: only a dimensionless number can be {what}"
            raise KindError(text, place(tree), hint)

    def wanted(self, tree: Expression, dimension: Dimension, what: str) -> None:
        """A part that must have a given dimension."""
        kind = self.of(tree)
        if not same(kind, dimension):
            text = f"`{shortened(tree)}` is {describe(kind)}: {what} ({dimension.describe()}) is wanted"
            raise KindError(text, place(tree), "")

    def alike(self, trees: tuple[Expression, ...], done: str) -> Dimension | Zero:
        """The common dimension of parts that must be alike."""
        first: Expression | None = None
        common: Dimension | Zero = ZERO
        for tree in trees:
            kind = self.quantity(tree, done)
            if first is not None and not same(common, kind):
                raise _unlike(first, common, tree, kind, done)
            if isinstance(common, Zero):
                first, common = tree, kind
        return common

    # ------------------------------------------------------------ operations
    def _operation(self, tree: Operation) -> Kind:
        if tree.operator in LOGIC:
            for part in tree.arguments:
                self.condition(part)
            return ON_OFF
        if tree.operator in COMPARISONS:
            return self._comparison(tree)
        match tree.operator:
            case "neg":
                return self.quantity(tree.arguments[0], "negative")
            case "+":
                return self.alike(tree.arguments, "added")
            case "-":
                return self.alike(tree.arguments, "subtracted")
            case "^":
                return self._power(*tree.arguments)
        return self._product(tree)

    def _comparison(self, tree: Operation) -> Kind:
        if tree.operator in ("==", "!="):
            for one, other in (tree.arguments, tree.arguments[::-1]):
                kind = self._words(one)
                if kind is not None:
                    self._choice(kind, other)
                    return ON_OFF
            kinds = [self.of(part) for part in tree.arguments]
            if all(isinstance(kind, OnOff) for kind in kinds):
                return ON_OFF
        self.alike(tree.arguments, "compared")
        return ON_OFF

    def _words(self, tree: Expression) -> Words | None:
        """The setting that a tree reads, as it is or as it was."""
        inner = tree.arguments[0] if isinstance(tree, Call) and tree.function == "was" else tree
        if not isinstance(inner, Name):
            return None
        try:
            kind = self.names(inner)
        except KindError:
            return None  # a choice is no name; what is wrong is told where the other side is looked at
        return kind if isinstance(kind, Words) else None

    def _choice(self, words: Words, tree: Expression) -> None:
        """What stands beside a setting: one of its choices, or the setting itself at another time."""
        text = shortened(tree)
        if text in words.choices or self._words(tree) == words:
            return
        hint = nearest(text, words.choices, "choices")
        raise KindError(f"`{text}` is not a choice of '{words.setting}'", place(tree), hint)

    def _product(self, tree: Operation) -> Kind:
        times = tree.operator == "*"
        one, other = (self.quantity(part, "multiplied" if times else "divided") for part in tree.arguments)
        if isinstance(one, Zero) or (times and isinstance(other, Zero)):
            return ZERO
        other = NONE if isinstance(other, Zero) else other
        return one.multiply(other) if times else one.divide(other)

    def _power(self, base: Expression, exponent: Expression) -> Kind:
        self.plain(exponent, "an exponent")
        dimension = self.dimension(base, "raised to a power")
        value = constant(exponent)
        if value is not None:
            return dimension.power(value)
        if dimension != NONE:
            text = f"`{shortened(base)}` is {dimension.describe()}: its exponent must be a number, not a formula"
            raise KindError(text, place(exponent), "write the number, or divide the base by a reference")
        return NONE


def _unlike(one: Expression, kind: Kind, other: Expression, other_kind: Kind, done: str) -> KindError:
    """Two parts that do not go together, both quoted with what they are."""
    hint = BY_FACTOR
    for number, beside in ((one, other_kind), (other, kind)):
        if constant(number) is not None:
            hint = f"give the number a name and a unit under let, such as limit: {shortened(number)} {describe(beside)}"
    what = f"`{shortened(one)}` is {describe(kind)} but `{shortened(other)}` is {describe(other_kind)}"
    return KindError(f"{what}: they cannot be {done}", place(other), hint)


# ---------------------------------------------------------------- functions
Rule = Callable[[_Walk, Call], Kind]


def _plain(walk: _Walk, call: Call) -> Kind:
    walk.plain(call.arguments[0], f"the argument of {call.function}")
    return NONE


def _root(walk: _Walk, call: Call) -> Kind:
    return walk.dimension(call.arguments[0], "put under a root").power(0.5)


def _sign(walk: _Walk, call: Call) -> Kind:
    walk.quantity(call.arguments[0], "given to sign")
    return NONE


def _alike(walk: _Walk, call: Call) -> Kind:
    return walk.alike(call.arguments, f"given to {call.function} together" if len(call.arguments) > 1 else "summed up")


def _where(walk: _Walk, call: Call) -> Kind:
    for condition in call.arguments[:-1:2]:
        walk.condition(condition)
    branches = (*call.arguments[1::2], call.arguments[-1])
    kinds = [walk.of(branch) for branch in branches]
    if any(isinstance(kind, OnOff) for kind in kinds):
        for branch, kind in zip(branches, kinds, strict=True):
            if not isinstance(kind, OnOff):
                text = f"`{shortened(branch)}` is {describe(kind)} but another branch is on or off"
                raise KindError(text, place(branch), "write all branches as conditions, or all as quantities")
        return ON_OFF
    return walk.alike(branches, "branches of one where")


def _interp(walk: _Walk, call: Call) -> Kind:
    curve = walk.of(call.arguments[0])
    if not isinstance(curve, Curve):
        text = f"`{shortened(call.arguments[0])}` is {describe(curve)}: a curve is wanted"
        raise KindError(text, place(call.arguments[0]), "a curve is a parameter with table: {x_unit, y_unit}")
    walk.wanted(call.arguments[1], curve.x, "the x of the curve")
    return curve.y if call.function == "interp" else curve.y.divide(curve.x)


def _on_off(walk: _Walk, call: Call) -> Kind:
    return ON_OFF


def _delayed(walk: _Walk, call: Call) -> Kind:
    walk.wanted(call.arguments[1], SECOND, "a dead time")
    return _passed(walk, call)


def _transported(walk: _Walk, call: Call) -> Kind:
    walk.wanted(call.arguments[1], FLOW, "a volume flow")
    walk.wanted(call.arguments[2], VOLUME, "a volume")
    return _passed(walk, call)


def _noise(walk: _Walk, call: Call) -> Kind:
    walk.wanted(call.arguments[1], SECOND, "the time between draws")
    return walk.quantity(call.arguments[0], "the size of noise")


def _since(walk: _Walk, call: Call) -> Kind:
    walk.condition(call.arguments[0])
    return SECOND


def _held(walk: _Walk, call: Call) -> Kind:
    walk.condition(call.arguments[1])
    return _passed(walk, call)


def _passed(walk: _Walk, call: Call) -> Kind:
    return walk.of(call.arguments[0])


RULES: dict[str, Rule] = {
    **dict.fromkeys(("exp", "log", "log10", "sin", "cos", "tan", "tanh"), _plain),
    **dict.fromkeys(("min", "max", "clip", "rounded", "sum", "abs"), _alike),
    "sqrt": _root,
    "sign": _sign,
    "where": _where,
    "interp": _interp,
    "interp_slope": _interp,
    "given": _on_off,
    "wired": _on_off,
    "delayed": _delayed,
    "transported": _transported,
    "noise": _noise,
    "was": _passed,
    "since": _since,
    "held": _held,
}

"""Comparisons that depend on continuous quantities, made into switches whose position is frozen during a step.

A switch compares two trees; its position is 1 while the first is the greater. In a tree it appears as
`Call('switch', (Number(k),))` (a condition) or `Call('switched', (Number(k), greater, smaller))` (a value).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

from loopsim.errors import Where
from loopsim.language.tree import Call, Expression, Number, Operation, names_in, parts, rebuild

ZONE = 1e-12  # of the unit in which a quantity is written


@dataclass(frozen=True, slots=True)
class Switch:
    """`left` against `right`; `tie` is the position at the start where both are equal.

    Gaps up to `zone` [SI] count as none, so that what rests on a limit of zero does not flicker.
    """

    left: Expression
    right: Expression
    tie: float
    tag: str
    where: Where
    zone: float


@dataclass(slots=True)
class Switches:
    """All switches of a model in the order in which they must be evaluated (inner before outer)."""

    moves: Callable[[str], bool]
    scale: Callable[[str], float]
    found: list[Switch] = field(default_factory=list)
    _numbers: dict[tuple[Expression, Expression, float], int] = field(default_factory=dict)

    def number(self, left: Expression, right: Expression, tie: float, tag: str, where: Where) -> int:
        """The number of the switch that compares these trees."""
        key = (left, right, tie)
        if key not in self._numbers:
            self._numbers[key] = len(self.found)
            self.found.append(self.made(left, right, tie, tag, where))
        return self._numbers[key]

    def made(self, left: Expression, right: Expression, tie: float, tag: str, where: Where) -> Switch:
        """A switch with the dead zone that suits what it compares."""
        scales = [self.scale(name) for name in names_in(left) | names_in(right)]
        return Switch(left, right, tie, tag, where, ZONE * max(scales, default=1.0))

    def apply(self, tree: Expression, tag: str, where: Where) -> Expression:
        """The tree with its moving comparisons replaced by switches."""
        below = tuple(self.apply(part, tag, where) for part in parts(tree))
        node = rebuild(tree, below)
        if not isinstance(node, Operation | Call) or not self._moving(node):
            return node
        if isinstance(node, Operation):
            return self._comparison(node, tag, where)
        return self._function(node, tag, where)

    def _moving(self, node: Expression) -> bool:
        return any(self.moves(name) for name in names_in(node))

    def _comparison(self, node: Operation, tag: str, where: Where) -> Expression:
        if node.operator not in ("<", "<=", ">", ">="):
            return node
        greater = node.operator in (">", ">=")
        tie = 1.0 if node.operator in (">=", "<") else 0.0
        condition = Call("switch", (Number(float(self.number(node.arguments[0], node.arguments[1], tie, tag, where))),))
        return condition if greater else Operation("not", (condition,))

    def _function(self, node: Call, tag: str, where: Where) -> Expression:
        match node.function:
            case "max" | "min":
                return self._extreme(node, tag, where)
            case "clip":
                value, low, high = node.arguments
                capped = self._pick(value, high, high, value, tag, where)
                return self._pick(capped, low, capped, low, tag, where)
            case "abs":
                (value,) = node.arguments
                return self._pick(value, Number(0.0), value, Operation("neg", (value,)), tag, where)
            case "sign":
                return self._pick(node.arguments[0], Number(0.0), Number(1.0), Number(-1.0), tag, where)
        return node

    def _extreme(self, node: Call, tag: str, where: Where) -> Expression:
        best = node.arguments[0]
        for other in node.arguments[1:]:
            pair = (best, other) if node.function == "max" else (other, best)
            best = self._pick(best, other, *pair, tag, where)
        return best

    def _pick(
        self, left: Expression, right: Expression, greater: Expression, smaller: Expression, tag: str, where: Where
    ) -> Expression:
        number = self.number(left, right, 0.0, tag, where)
        return Call("switched", (Number(float(number)), greater, smaller))


def moving_names(name_of: Callable[[str], frozenset[str] | None]) -> Callable[[str], bool]:
    """Whether a name can change inside a step; `name_of` gives what it depends on, None for what moves by itself."""
    known: dict[str, bool] = {}

    def moves(name: str) -> bool:
        if name not in known:
            known[name] = True  # a loop of algebra moves
            below = name_of(name)
            known[name] = below is None or any(moves(one) for one in below)
        return known[name]

    return moves


def is_flag(tree: Expression) -> bool:
    """Whether a tree is on or off by its own form."""
    if isinstance(tree, Operation):
        return tree.operator in ("and", "or", "not", "<", "<=", ">", ">=", "==", "!=")
    return isinstance(tree, Call) and tree.function == "switch"

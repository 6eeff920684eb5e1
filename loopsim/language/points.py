"""Points on a scale and differences told apart: 60 degC is a point, 5 K a difference, though both are kelvin inside."""

from __future__ import annotations

from collections.abc import Callable

from loopsim.language.kinds import KindError, place
from loopsim.language.tree import COMPARISONS, Call, Expression, Name, Number, Operation
from loopsim.language.write import shortened

Points = Callable[[Name], bool | None]
ALIKE = ("min", "max", "clip")
PASSED = ("delayed", "transported", "was", "held", "rounded")


def is_point(tree: Expression, names: Points) -> bool | None:
    """Whether a formula gives a point on a scale (True), a difference (False), or something that cannot be told (None).

    `names` says it of a name. Raises `KindError` where a point is compared with a difference, or with the bare 0.
    """
    match tree:
        case Name():
            return names(tree)
        case Operation() if tree.operator in COMPARISONS:
            _common(tree.arguments, names)
            return None
        case Operation():
            return _operation(tree, names)
        case Call():
            return _call(tree, names)
    return None


def _operation(tree: Operation, names: Points) -> bool | None:
    sides = [is_point(part, names) for part in tree.arguments]
    match tree.operator, sides:
        case ("+" | "-", [True, False]) | ("+", [False, True]):
            return True
        case ("+" | "-", [False, False]) | ("-", [True, True]) | ("neg", [False]):
            return False
        case "*" | "/", _ if False in sides and any(isinstance(part, Number) for part in tree.arguments):
            return False
    return None


def _call(tree: Call, names: Points) -> bool | None:
    if tree.function in ALIKE:
        return _common(tree.arguments, names)
    if tree.function == "where":
        for condition in tree.arguments[:-1:2]:
            is_point(condition, names)
        return _common((*tree.arguments[1::2], tree.arguments[-1]), names)
    found = [is_point(part, names) for part in tree.arguments]
    return found[0] if tree.function in PASSED else None


def _common(parts: tuple[Expression, ...], names: Points) -> bool | None:
    """What all of several parts are that stand beside each other; None where some of them cannot be told."""
    found = [is_point(part, names) for part in parts]
    if True not in found:
        known = [one is False or isinstance(part, Number) for one, part in zip(found, parts, strict=True)]
        return False if all(known) else None
    point = parts[found.index(True)]
    for part, one in zip(parts, found, strict=True):
        if one is False:
            text = f"`{shortened(point)}` is a point on a scale, `{shortened(part)}` a difference"
            hint = "declare both as points, in degC or bar(g), or both as differences, in K or bar"
            raise KindError(text, place(part), hint)
        if isinstance(part, Number) and part.value == 0:
            text = f"`{shortened(point)}` is a point on a scale: 0 has no meaning beside it"
            raise KindError(text, place(part), "give the point a name and a unit under let: freezing: 0 degC")
    return True if all(found) else None

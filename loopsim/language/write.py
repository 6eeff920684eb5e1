"""Trees written as text that `parse_formula` reads back, with no more parentheses than needed."""

from __future__ import annotations

import math

from loopsim.language.tree import ARITHMETIC, COMPARISONS, Call, Expression, Index, Name, Number, Operation, Rate

# how strongly each operator binds; minus stands between products and powers
STRENGTH = {"or": 1, "and": 2, "not": 3, "+": 5, "-": 5, "*": 6, "/": 6, "neg": 7, "^": 8}
STRENGTH |= dict.fromkeys(COMPARISONS, 4)
ATOM = 9


def write(tree: Expression) -> str:
    """The text of a tree: `a*(b + c)`, `dT/dt`, `where(x > 0, x, 0)`."""
    return _text(tree)[0]


def shortened(tree: Expression, longest: int = 60) -> str:
    """The text of a tree for a message, its middle left out where it is long."""
    text = write(tree)
    half = (longest - 3) // 2
    return text if len(text) <= longest else f"{text[:half]} … {text[-half:]}"


def index_text(index: Index) -> str:
    """An index with its brackets: `[i]`, `[i-1]`, `[0]`, `[n+1]`."""
    if index.base is None:
        return f"[{index.offset}]"
    return f"[{index.base}{index.offset:+d}]" if index.offset else f"[{index.base}]"


def _text(tree: Expression) -> tuple[str, int]:
    """The text of a tree and how strongly it binds."""
    match tree:
        case Number():
            return _number(tree.value)
        case Name():
            return tree.name + (index_text(tree.index) if tree.index else ""), ATOM
        case Rate(Name()):
            return f"d{_text(tree.argument)[0]}/dt", ATOM
        case Rate():
            return f"d({_text(tree.argument)[0]})/dt", ATOM
        case Call():
            return f"{tree.function}({', '.join(write(one) for one in tree.arguments)})", ATOM
    return _operation(tree)


def _number(value: float) -> tuple[str, int]:
    if math.isnan(value):
        return "(0/0)", ATOM
    if math.isinf(value):
        return ("(1/0)", ATOM) if value > 0 else ("-1/0", STRENGTH["/"])
    return repr(value).removesuffix(".0"), ATOM if math.copysign(1.0, value) > 0 else STRENGTH["neg"]


def _operation(tree: Operation) -> tuple[str, int]:
    own = STRENGTH[tree.operator]
    texts = [_text(one) for one in tree.arguments]
    if tree.operator == "neg":
        return "-" + _held(*texts[0], own + 1), own
    if tree.operator == "not":
        return "not " + _held(*texts[0], own), own
    left, right = texts
    if tree.operator == "^":
        return f"{_held(*left, ATOM)}^{_held(*right, STRENGTH['neg'])}", own
    space = "" if tree.operator in ("*", "/") else " "
    # comparisons do not chain; a minus behind another sign reads better in parentheses
    left_least = own + 1 if tree.operator in COMPARISONS else own
    right_least = ATOM if right[0].startswith("-") and tree.operator in ARITHMETIC else own + 1
    return f"{_held(*left, left_least)}{space}{tree.operator}{space}{_held(*right, right_least)}", own


def _held(text: str, strength: int, least: int) -> str:
    """The text of a part, in parentheses where it binds less than `least`."""
    return text if strength >= least else f"({text})"

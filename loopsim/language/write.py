"""Trees written as formulas, with no more parentheses than they need."""

from __future__ import annotations

from loopsim.language.tree import Call, Expression, Index, Name, Number, Operation, Rate

STRENGTH = {"or": 1, "and": 2, "not": 3, "<": 4, "<=": 4, ">": 4, ">=": 4, "==": 4, "!=": 4,
            "+": 5, "-": 5, "*": 6, "/": 6, "neg": 7, "^": 8}  # fmt: skip
ATOM = 9


def write(tree: Expression) -> str:
    """The formula's text; reading it gives the tree back."""
    return _written(tree)[0]


def _written(tree: Expression) -> tuple[str, int]:
    if isinstance(tree, Number):
        text = f"{tree.value:g}" if float(f"{tree.value:g}") == tree.value else repr(tree.value)
        return (f"({text})", ATOM) if tree.value < 0 else (text, ATOM)
    if isinstance(tree, Name):
        return tree.name + (f"[{_index(tree.index)}]" if tree.index is not None else ""), ATOM
    if isinstance(tree, Rate):
        inner, _ = _written(tree.argument)
        return (f"d{inner}/dt" if isinstance(tree.argument, Name) else f"d({inner})/dt"), ATOM
    if isinstance(tree, Call):
        return f"{tree.function}({', '.join(write(one) for one in tree.arguments)})", ATOM
    return _operation(tree)


def _index(index: Index) -> str:
    if index.base is None:
        return str(index.offset)
    return f"{index.base}{index.offset:+d}" if index.offset else index.base


def _operation(tree: Operation) -> tuple[str, int]:
    strength = STRENGTH[tree.operator]
    if tree.operator in ("neg", "not"):
        inner = _inside(tree.arguments[0], strength)
        return (f"-{inner}" if tree.operator == "neg" else f"not {inner}"), strength
    # powers group to the right, everything else to the left; comparisons do not chain
    left_least, right_least = strength, strength + 1
    if tree.operator == "^":
        left_least, right_least = ATOM, STRENGTH["neg"]
    elif strength == STRENGTH["<"]:
        left_least = strength + 1
    left, right = _inside(tree.arguments[0], left_least), _inside(tree.arguments[1], right_least)
    tight = tree.operator in ("*", "/", "^")
    return (f"{left}{tree.operator}{right}" if tight else f"{left} {tree.operator} {right}"), strength


def _inside(tree: Expression, least: int) -> str:
    text, strength = _written(tree)
    return text if strength >= least else f"({text})"

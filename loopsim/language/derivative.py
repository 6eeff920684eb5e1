"""Trees simplified, differentiated, and with names replaced."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

from loopsim.language.evaluate import PURE, evaluate
from loopsim.language.tree import Call, Expression, Name, Number, Operation, Rate, names_in, parts, rebuild

ZERO, ONE = Number(0.0), Number(1.0)
FOLDED = (*PURE, "where")  # calls that are a number as soon as their arguments are


def substitute(tree: Expression, names: Mapping[str, Expression]) -> Expression:
    """The tree with names (those without an index) replaced by trees."""
    if isinstance(tree, Name):
        return names.get(tree.name, tree) if tree.index is None else tree
    return rebuild(tree, tuple(substitute(part, names) for part in parts(tree)))


# ---------------------------------------------------------------- simplification
def simplify(tree: Expression) -> Expression:
    """The same value in fewer nodes wherever the value is finite: numbers folded, 0 and 1 taken out."""
    return _simplified(rebuild(tree, tuple(simplify(part) for part in parts(tree))))


def _simplified(node: Expression) -> Expression:
    """One node whose parts are simple already."""
    below = parts(node)
    if not below or isinstance(node, Rate):
        return node
    if all(isinstance(part, Number) for part in below) and _foldable(node):
        return Number(float(evaluate(node, {})))
    if isinstance(node, Operation):
        rule = RULES.get(node.operator)
        return rule(node, *below) if rule is not None else node
    return _simple_where(node) if isinstance(node, Call) and node.function == "where" else node


def _foldable(node: Expression) -> bool:
    return isinstance(node, Operation) or (isinstance(node, Call) and node.function in FOLDED)


def _sum(node: Expression, a: Expression, b: Expression) -> Expression:
    return b if a == ZERO else a if b == ZERO else node


def _difference(node: Expression, a: Expression, b: Expression) -> Expression:
    return a if b == ZERO else _operation("neg", b) if a == ZERO else node


def _product(node: Expression, a: Expression, b: Expression) -> Expression:
    if ZERO in (a, b):
        return ZERO
    return b if a == ONE else a if b == ONE else node


def _quotient(node: Expression, a: Expression, b: Expression) -> Expression:
    if b == Number(-1.0):
        return _operation("neg", a)
    return a if b == ONE else ZERO if a == ZERO else node


def _power(node: Expression, a: Expression, b: Expression) -> Expression:
    return a if b == ONE else ONE if b == ZERO else node


def _negative(node: Expression, a: Expression) -> Expression:
    return a.arguments[0] if isinstance(a, Operation) and a.operator == "neg" else node


def _logic(node: Expression, a: Expression, b: Expression) -> Expression:
    """`and`, `or` with one side known."""
    assert isinstance(node, Operation)
    for known, other in ((a, b), (b, a)):
        if isinstance(known, Number):
            decides = bool(known.value) == (node.operator == "or")
            return Number(float(bool(known.value))) if decides else other
    return node


RULES: dict[str, Callable[..., Expression]] = {
    "+": _sum,
    "-": _difference,
    "*": _product,
    "/": _quotient,
    "^": _power,
    "neg": _negative,
    "and": _logic,
    "or": _logic,
}


def _simple_where(node: Call) -> Expression:
    """Branches that are never taken dropped; those behind one that is always taken, too."""
    kept: list[Expression] = []
    for condition, branch in zip(node.arguments[:-1:2], node.arguments[1::2], strict=False):
        if not isinstance(condition, Number):
            kept += [condition, branch]
        elif condition.value:
            return Call("where", (*kept, branch), node.at) if kept else branch
    return Call("where", (*kept, node.arguments[-1]), node.at) if kept else node.arguments[-1]


def _operation(operator: str, *arguments: Expression) -> Expression:
    return _simplified(Operation(operator, arguments))


def _call(function: str, *arguments: Expression) -> Expression:
    return _simplified(Call(function, arguments))


# ---------------------------------------------------------------- derivatives
def derivative(tree: Expression, name: str) -> Expression:
    """d tree / d name, simplified; of `where`, `min`, `max`, `clip` by the branch in force; `rounded` passes."""
    if isinstance(tree, Name):
        return ONE if tree.name == name else ZERO
    if isinstance(tree, Number | Rate) or name not in names_in(tree):
        return ZERO
    if isinstance(tree, Operation):
        return _of_operation(tree, name)
    if tree.function in PIECEWISE:
        return PIECEWISE[tree.function](tree.arguments, name)
    outer = OUTER.get(tree.function)
    return _chained(outer(tree), derivative(tree.arguments[0], name)) if outer is not None else ZERO


def _chained(outer: Expression, inner: Expression) -> Expression:
    """Outer slope times inner slope."""
    return _spread(lambda slope: _operation("*", outer, slope), inner)


def _spread(change: Callable[[Expression], Expression], slope: Expression) -> Expression:
    """A change of a slope that leaves 0 at 0, made in its branches: where one is 0 a factor may well be infinite."""
    if isinstance(slope, Call) and slope.function == "where" and ZERO in _branches(slope):
        branches = [_spread(change, one) for one in _branches(slope)]
        return _simple_where(_where_of(slope.arguments[:-1:2], branches))
    return ZERO if slope == ZERO else change(slope)


def _branches(where: Call) -> tuple[Expression, ...]:
    return (*where.arguments[1::2], where.arguments[-1])


def _where_of(conditions: Sequence[Expression], branches: Sequence[Expression]) -> Call:
    """`where` from its conditions and branches, one branch more than conditions."""
    pairs = zip(conditions, branches, strict=False)
    return Call("where", (*[one for pair in pairs for one in pair], branches[-1]))


def _of_operation(tree: Operation, name: str) -> Expression:
    slopes = [derivative(one, name) for one in tree.arguments]
    match tree.operator:
        case "neg":
            return _spread(lambda slope: _operation("neg", slope), slopes[0])
        case "+" | "-":
            return _operation(tree.operator, *slopes)
        case "*":
            a, b = tree.arguments
            by_a = _spread(lambda slope: _operation("*", slope, b), slopes[0])
            return _operation("+", by_a, _chained(a, slopes[1]))
        case "/":
            return _of_quotient(tree, *slopes)
        case "^":
            return _of_power(tree, *slopes)
    return ZERO


def _of_quotient(tree: Operation, da: Expression, db: Expression) -> Expression:
    below = tree.arguments[1]
    top = _operation("-", da, _operation("*", tree, db))
    return _spread(lambda slope: _operation("/", slope, below), top)


def _of_power(tree: Operation, da: Expression, db: Expression) -> Expression:
    a, b = tree.arguments
    lowered = _operation("*", b, _operation("^", a, _operation("-", b, ONE)))
    by_exponent = _chained(_operation("*", tree, _call("log", a)), db)
    return _operation("+", _chained(lowered, da), by_exponent)


def _of_where(arguments: tuple[Expression, ...], name: str) -> Expression:
    branches = [derivative(one, name) for one in (*arguments[1::2], arguments[-1])]
    if all(one == ZERO for one in branches):
        return ZERO
    return _simple_where(_where_of(arguments[:-1:2], branches))


def _of_extreme(sign: str) -> Callable[[tuple[Expression, ...], str], Expression]:
    def rule(arguments: tuple[Expression, ...], name: str) -> Expression:
        best, slope = arguments[0], derivative(arguments[0], name)
        for other in arguments[1:]:
            first = Operation(sign, (best, other))
            slope = _simple_where(Call("where", (first, slope, derivative(other, name))))
            best = Call("min" if sign == "<=" else "max", (best, other))
        return slope

    return rule


def _of_clip(arguments: tuple[Expression, ...], name: str) -> Expression:
    value, low, high = arguments
    below, above = Operation("<", (value, low)), Operation(">", (value, high))
    slopes = [derivative(one, name) for one in (low, high, value)]
    if all(one == ZERO for one in slopes):
        return ZERO
    return _simple_where(Call("where", (below, slopes[0], above, slopes[1], slopes[2])))


def _of_interp(arguments: tuple[Expression, ...], name: str) -> Expression:
    return _chained(Call("interp_slope", arguments), derivative(arguments[1], name))


PIECEWISE: dict[str, Callable[[tuple[Expression, ...], str], Expression]] = {
    "where": _of_where,
    "min": _of_extreme("<="),
    "max": _of_extreme(">="),
    "clip": _of_clip,
    "interp": _of_interp,
    "rounded": lambda arguments, name: derivative(arguments[0], name),
}
OUTER: dict[str, Callable[[Call], Expression]] = {
    "sqrt": lambda tree: _operation("/", Number(0.5), tree),
    "exp": lambda tree: tree,
    "log": lambda tree: _operation("/", ONE, tree.arguments[0]),
    "log10": lambda tree: _operation("/", Number(0.4342944819032518), tree.arguments[0]),
    "sin": lambda tree: _call("cos", tree.arguments[0]),
    "cos": lambda tree: _operation("neg", _call("sin", tree.arguments[0])),
    "tan": lambda tree: _operation("+", ONE, _operation("*", tree, tree)),
    "tanh": lambda tree: _operation("-", ONE, _operation("*", tree, tree)),
    "abs": lambda tree: _call("sign", tree.arguments[0]),
}

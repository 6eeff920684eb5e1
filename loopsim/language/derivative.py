"""placeholder until the language layer lands"""
from __future__ import annotations

from collections.abc import Mapping

from loopsim.language.evaluate import evaluate
from loopsim.language.tree import Call, Expression, Name, Number, Operation, Rate, names_in, parts, rebuild

ZERO, ONE = Number(0.0), Number(1.0)


def op(o, *a):
    return simplify_node(Operation(o, tuple(a)))


def simplify(tree: Expression) -> Expression:
    below = tuple(simplify(p) for p in parts(tree))
    return simplify_node(rebuild(tree, below))


def simplify_node(t):
    b = parts(t)
    if isinstance(t, (Operation, Call)) and b and all(isinstance(p, Number) for p in b) and not (isinstance(t, Call) and t.function in ("switch", "switched")):
        return Number(float(evaluate(t, {})))
    if isinstance(t, Operation):
        o = t.operator
        if o == "+":
            if b[0] == ZERO: return b[1]
            if b[1] == ZERO: return b[0]
        if o == "-":
            if b[1] == ZERO: return b[0]
            if b[0] == ZERO: return op("neg", b[1])
        if o == "*":
            if ZERO in b: return ZERO
            if b[0] == ONE: return b[1]
            if b[1] == ONE: return b[0]
        if o == "/":
            if b[0] == ZERO: return ZERO
            if b[1] == ONE: return b[0]
        if o == "^" and b[1] == ONE: return b[0]
        if o == "neg" and isinstance(b[0], Operation) and b[0].operator == "neg": return b[0].arguments[0]
        if o == "and":
            for i in (0, 1):
                if isinstance(b[i], Number): return b[1 - i] if b[i].value else ZERO
        if o == "or":
            for i in (0, 1):
                if isinstance(b[i], Number): return ONE if b[i].value else b[1 - i]
    if isinstance(t, Call) and t.function == "where":
        kept = []
        for c, br in zip(b[:-1:2], b[1::2]):
            if isinstance(c, Number):
                if c.value:
                    return Call("where", (*kept, br)) if kept else br
                continue
            kept += [c, br]
        return Call("where", (*kept, b[-1])) if kept else b[-1]
    return t


def derivative(t: Expression, name: str) -> Expression:
    if isinstance(t, Number): return ZERO
    if isinstance(t, Name): return ONE if t.name == name else ZERO
    if isinstance(t, Rate): return ZERO
    if name not in names_in(t): return ZERO
    a = t.arguments
    d = lambda e: derivative(e, name)
    if isinstance(t, Operation):
        match t.operator:
            case "+" | "-": return op(t.operator, d(a[0]), d(a[1]))
            case "*": return op("+", op("*", d(a[0]), a[1]), op("*", a[0], d(a[1])))
            case "/":
                return op("/", op("-", d(a[0]), op("*", t, d(a[1]))), a[1]) if d(a[1]) != ZERO else op("/", d(a[0]), a[1])
            case "^":
                if d(a[1]) == ZERO:
                    return op("*", op("*", a[1], op("^", a[0], op("-", a[1], ONE))), d(a[0]))
                return op("*", t, op("+", op("*", d(a[1]), Call("log", (a[0],))), op("*", a[1], op("/", d(a[0]), a[0]))))
            case "neg": return op("neg", d(a[0]))
        return ZERO
    f = t.function
    match f:
        case "where":
            out = []
            for c, br in zip(a[:-1:2], a[1::2]): out += [c, d(br)]
            out.append(d(a[-1]))
            if all(o == ZERO for o in out[1::2]) and out[-1] == ZERO: return ZERO
            return simplify_node(Call("where", tuple(out)))
        case "min" | "max":
            best, db = a[0], d(a[0])
            for o in a[1:]:
                c = Operation("<=" if f == "min" else ">=", (best, o))
                db = simplify_node(Call("where", (c, db, d(o))))
                best = Call(f, (best, o))
            return db
        case "clip":
            return simplify_node(Call("where", (Operation("<", (a[0], a[1])), d(a[1]), Operation(">", (a[0], a[2])), d(a[2]), d(a[0]))))
        case "abs": return op("*", Call("sign", a), d(a[0]))
        case "rounded": return d(a[0])
        case "sqrt": return op("/", d(a[0]), op("*", Number(2.0), t))
        case "exp": return op("*", t, d(a[0]))
        case "log": return op("/", d(a[0]), a[0])
        case "log10": return op("/", d(a[0]), op("*", a[0], Number(2.302585092994046)))
        case "sin": return op("*", Call("cos", a), d(a[0]))
        case "cos": return op("neg", op("*", Call("sin", a), d(a[0])))
        case "tan": return op("*", op("+", ONE, op("*", t, t)), d(a[0]))
        case "tanh": return op("*", op("-", ONE, op("*", t, t)), d(a[0]))
        case "interp": return op("*", Call("interp_slope", a), d(a[1]))
    return ZERO


def substitute(t: Expression, m: Mapping[str, Expression]) -> Expression:
    if isinstance(t, Name): return m.get(t.name, t) if t.index is None else t
    return rebuild(t, tuple(substitute(p, m) for p in parts(t)))

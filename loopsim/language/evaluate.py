"""placeholder until the language layer lands"""
from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from loopsim.language.tree import Call, Expression, Name, Number, Operation


@dataclass(frozen=True, slots=True)
class Table:
    x: tuple[float, ...]
    y: tuple[float, ...]


def evaluate(tree: Expression, values: Mapping[str, Any]) -> float:
    if isinstance(tree, Number):
        return tree.value
    if isinstance(tree, Name):
        return values[tree.name]
    a = tree.arguments
    if isinstance(tree, Operation):
        o = tree.operator
        if o == "and":
            return bool(evaluate(a[0], values)) and bool(evaluate(a[1], values))
        if o == "or":
            return bool(evaluate(a[0], values)) or bool(evaluate(a[1], values))
        v = [evaluate(p, values) for p in a]
        try:
            match o:
                case "+": return v[0] + v[1]
                case "-": return v[0] - v[1]
                case "*": return v[0] * v[1]
                case "/": return v[0] / v[1] if v[1] != 0 else (math.nan if v[0] == 0 else math.copysign(math.inf, v[0]))
                case "^":
                    r = v[0] ** v[1]
                    return r if not isinstance(r, complex) else math.nan
                case "neg": return -v[0]
                case "not": return not v[0]
                case "<": return v[0] < v[1]
                case "<=": return v[0] <= v[1]
                case ">": return v[0] > v[1]
                case ">=": return v[0] >= v[1]
                case "==": return v[0] == v[1]
                case "!=": return v[0] != v[1]
        except (OverflowError, ZeroDivisionError):
            return math.nan
    assert isinstance(tree, Call)
    f = tree.function
    if f == "where":
        for c, b in zip(a[:-1:2], a[1::2]):
            if evaluate(c, values):
                return evaluate(b, values)
        return evaluate(a[-1], values)
    v = [evaluate(p, values) for p in a]
    if f in ("interp", "interp_slope"):
        t, x = v
        if x <= t.x[0] or x >= t.x[-1]:
            return 0.0 if f == "interp_slope" else (t.y[0] if x <= t.x[0] else t.y[-1])
        k = max(i for i in range(len(t.x)) if t.x[i] <= x)
        s = (t.y[k + 1] - t.y[k]) / (t.x[k + 1] - t.x[k])
        return s if f == "interp_slope" else t.y[k] + s * (x - t.x[k])
    try:
        match f:
            case "min": return min(v)
            case "max": return max(v)
            case "clip": return min(max(v[0], v[1]), v[2])
            case "abs": return abs(v[0])
            case "sign": return math.copysign(1.0, v[0]) if v[0] else 0.0
            case "rounded": return v[0] if v[1] == 0 else math.floor(v[0] / v[1] + 0.5) * v[1]
        return getattr(math, f)(*v)
    except (ValueError, OverflowError):
        return math.nan

"""Flat trees written as restricted Python: straight-line scalar statements that can also be compiled."""

from __future__ import annotations

import keyword
import re
from collections.abc import Callable

from loopsim.language.tree import Call, Expression, Name, Number, Operation
from loopsim.simulation.switches import Switch, is_flag

# functions of the block language -> guarded functions of the engine text
GUARDED = {
    "sqrt": "root",
    "exp": "exponential",
    "log": "logarithm",
    "log10": "logarithm10",
    "sin": "sine",
    "cos": "cosine",
    "tan": "tangent",
    "tanh": "hyperbolic_tangent",
    "abs": "abs",
    "sign": "sign",
    "clip": "clip",
    "rounded": "rounded",
    "min": "smaller",
    "max": "greater",
}
SMALL_POWERS = (2.0, 3.0, 4.0)


class Identifiers:
    """Python names for the model's names: readable, and each its own."""

    def __init__(self) -> None:
        self._known: dict[str, str] = {}
        self._taken: set[str] = set()

    def of(self, name: str) -> str:
        """The identifier of a model name."""
        if name not in self._known:
            stem = re.sub(r"\W", "_", name.replace("'", "_new"))
            if stem[0].isdigit() or keyword.iskeyword(stem) or len(stem) < 4:
                stem = f"v_{stem}"
            unique, number = stem, 1
            while unique in self._taken:
                number += 1
                unique = f"{stem}_{number}"
            self._taken.add(unique)
            self._known[name] = unique
        return self._known[name]


class Writer:
    """Writes trees; `read` gives the text for a name, `sticky` evaluates switches afresh instead of frozen.

    Temporary values go to `lines`.
    """

    def __init__(
        self, read: Callable[[str], str], switches: list[Switch], tables: dict[str, str], sticky: bool = False
    ) -> None:
        self.read, self.switches, self.tables, self.sticky = read, switches, tables, sticky
        self.lines: list[str] = []
        self.temporaries = 0

    def take(self) -> list[str]:
        """The lines written since the last call."""
        lines, self.lines = self.lines, []
        return lines

    def temporary(self, text: str) -> str:
        """A local that holds an intermediate value."""
        self.temporaries += 1
        name = f"w{self.temporaries}"
        self.lines.append(f"{name} = {text}")
        return name

    def value(self, tree: Expression) -> str:
        """A tree as a number; on and off are 1.0 and 0.0."""
        if is_flag(tree):
            return f"(1.0 if {self.condition(tree)} else 0.0)"
        if isinstance(tree, Number):
            return number_text(tree.value)
        if isinstance(tree, Name):
            return self.read(tree.name)
        if isinstance(tree, Operation):
            return self._operation(tree)
        assert isinstance(tree, Call)
        return self._call(tree)

    def condition(self, tree: Expression) -> str:
        """A tree as a condition."""
        if isinstance(tree, Operation) and tree.operator in ("and", "or"):
            return f"({self.condition(tree.arguments[0])} {tree.operator} {self.condition(tree.arguments[1])})"
        if isinstance(tree, Operation) and tree.operator == "not":
            return f"(not {self.condition(tree.arguments[0])})"
        if isinstance(tree, Operation) and is_flag(tree):
            left, right = (self.value(one) for one in tree.arguments)
            return f"({left} {tree.operator} {right})"
        if isinstance(tree, Call) and tree.function == "switch":
            return f"({self._position(tree)} > 0.5)"
        return f"({self.value(tree)} > 0.5)"

    def _position(self, call: Call) -> str:
        """The position of the switch a call names."""
        first = call.arguments[0]
        assert isinstance(first, Number)
        number = int(first.value)
        if not self.sticky:
            return f"b[{number}]"
        switch = self.switches[number]
        return f"sticky({self.value(switch.left)}, {self.value(switch.right)}, {switch.zone!r}, b[{number}])"

    def _operation(self, tree: Operation) -> str:
        if tree.operator == "neg":
            return f"(-{self.value(tree.arguments[0])})"
        if tree.operator == "^":
            return self._power(*tree.arguments)
        left, right = (self.value(one) for one in tree.arguments)
        if tree.operator == "/" and not (isinstance(tree.arguments[1], Number) and tree.arguments[1].value != 0):
            return f"div({left}, {right})"
        return f"({left} {tree.operator} {right})"

    def _power(self, base: Expression, exponent: Expression) -> str:
        if isinstance(exponent, Number) and exponent.value in SMALL_POWERS:
            text = self.value(base)
            if not text.isidentifier():
                text = self.temporary(text)
            return "(" + "*".join([text] * int(exponent.value)) + ")"
        return f"power({self.value(base)}, {self.value(exponent)})"

    def _call(self, tree: Call) -> str:
        match tree.function:
            case "where":
                return self._where(tree.arguments)
            case "switched":
                greater, smaller = (self.value(one) for one in tree.arguments[1:])
                return f"({greater} if {self._position(tree)} > 0.5 else {smaller})"
            case "interp" | "interp_slope":
                table = tree.arguments[0]
                assert isinstance(table, Name)
                return f"{tree.function}_{self.tables[table.name]}({self.value(tree.arguments[1])})"
            case "min" | "max":
                text = self.value(tree.arguments[0])
                for other in tree.arguments[1:]:
                    text = f"{GUARDED[tree.function]}({text}, {self.value(other)})"
                return text
        arguments = ", ".join(self.value(one) for one in tree.arguments)
        return f"{GUARDED[tree.function]}({arguments})"

    def _where(self, arguments: tuple[Expression, ...]) -> str:
        text = self.value(arguments[-1])
        pairs = list(zip(arguments[:-1:2], arguments[1::2], strict=False))
        for condition, branch in reversed(pairs):
            text = f"({self.value(branch)} if {self.condition(condition)} else {text})"
        return text


def number_text(value: float) -> str:
    """A number as Python reads it back, bit for bit."""
    if value != value:
        return "NAN"
    if value in (float("inf"), float("-inf")):
        return "INFINITY" if value > 0 else "(-INFINITY)"
    return repr(float(value)) if value >= 0 else f"({float(value)!r})"

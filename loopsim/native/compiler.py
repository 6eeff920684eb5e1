"""Restricted Python compiled: functions of numbers and flat arrays, lowered to LLVM's language.

What it takes: module-level functions and integer constants; assignments (also `+=`, also to `a[i]`), `if`, `while`,
`for i in range(…)`, `continue`, `return`; arithmetic, comparisons, `and or not`, `a if c else b`; calls of the module's
functions, of `LIBRARY` and `INTRINSIC`, of `div`, `abs` and `int`. Types: f (float), i (int), F and I (flat arrays of
them), P (array of float arrays). A function is compiled for the argument types of its first call. Every operation gives
the same bits as in Python.
"""

from __future__ import annotations

import ast
import threading
from dataclasses import dataclass, field

from loopsim.native.kinds import ELEMENT, TYPES, NotCompilable
from loopsim.native.statements import Lowering

PURE = "nounwind willreturn memory(none)"
SMALL = 80  # lines: a function of no more is written out where it is called
PARSING = threading.Lock()  # Python 3.11 counts the depth of a parse for all threads together, and stumbles over it


@dataclass(slots=True)
class Module:
    """The functions of a text and what has been compiled of them."""

    text: str
    functions: dict[str, ast.FunctionDef] = field(default_factory=dict)
    constants: dict[str, float | int] = field(default_factory=dict)
    compiled: dict[str, tuple[str, tuple[str, ...]]] = field(default_factory=dict)
    bodies: dict[str, str] = field(default_factory=dict)
    entries: set[str] = field(default_factory=set)
    declared: dict[str, str] = field(default_factory=dict)
    whole: dict[str, bool] = field(default_factory=dict)

    def __post_init__(self) -> None:
        with PARSING:
            body = ast.parse(self.text).body
        for node in body:
            if isinstance(node, ast.FunctionDef):
                self.functions[node.name] = node
            elif isinstance(node, ast.Assign) and isinstance(node.targets[0], ast.Name):
                self.constants[node.targets[0].id] = ast.literal_eval(node.value)

    def function(self, name: str, kinds: tuple[str, ...]) -> tuple[str, tuple[str, ...]]:
        """What the function compiled for these arguments returns, and the kinds that it takes."""
        if name not in self.compiled:
            node = self.functions[name]
            returns = self._returned(node, dict(zip([one.arg for one in node.args.args], kinds, strict=True)))
            self.compiled[name] = returns, kinds
            self.bodies[name] = Lowering(self, node, kinds, returns).lower()
        returns, known = self.compiled[name]
        if any(have != want and (have, want) != ("i", "f") for have, want in zip(kinds, known, strict=True)):
            raise NotCompilable(f"{name} is called with {kinds} and with {known}")
        return returns, known

    def entry(self, name: str, kinds: tuple[str, ...]) -> None:
        """Compile a function that is called from outside."""
        self.function(name, kinds)
        self.entries.add(name)

    def llvm(self) -> str:
        """The whole module in LLVM's text."""
        declared = [f"declare double {name}({kinds}) {PURE}" for name, kinds in self.declared.items()]
        return "\n".join([*declared, *map(self._defined, self.bodies)])

    def _defined(self, name: str) -> str:
        returns, kinds = self.compiled[name]
        names = [one.arg for one in self.functions[name].args.args]
        pairs = zip(names, kinds, strict=True)
        taken = ", ".join(f"{TYPES[kind]}{' noalias' if kind in ELEMENT else ''} %{one}" for one, kind in pairs)
        head = f"{TYPES[returns]} @text_{name}({taken}) nounwind"
        if name not in self.entries:
            head = f"internal {head}{' alwaysinline' if self.bodies[name].count(chr(10)) < SMALL else ''}"
        return f"define {head} {{\n{self.bodies[name]}\n}}"

    def _returned(self, node: ast.FunctionDef, kinds: dict[str, str]) -> str:
        """Float unless all returns are whole numbers."""
        return "i" if self._gives_whole(node, {name for name, kind in kinds.items() if kind == "i"}) else "f"

    def _gives_whole(self, node: ast.FunctionDef, known: set[str]) -> bool:
        inside = list(ast.walk(node))
        returns = [one.value for one in inside if isinstance(one, ast.Return) and one.value is not None]
        if not returns:
            return False
        whole = known | self._whole_names([one for one in inside if isinstance(one, ast.Assign)])
        return all(self._is_whole(one, whole) for one in returns)

    def _call_gives_whole(self, name: str) -> bool:
        """Whether a function of the text gives a whole number, whatever it is called with."""
        if name not in self.whole:
            self.whole[name] = False
            called = self.functions.get(name)
            self.whole[name] = called is not None and self._gives_whole(called, set())
        return self.whole[name]

    def _whole_names(self, assigned: list[ast.Assign]) -> set[str]:
        """Locals that hold whole numbers by their first assignment."""
        seen, whole = set[str](), set[str]()
        for one in sorted(assigned, key=lambda one: one.lineno):
            target = one.targets[0]
            if isinstance(target, ast.Name) and target.id not in seen:
                seen.add(target.id)
                if self._is_whole(one.value, whole):
                    whole.add(target.id)
        return whole

    def _is_whole(self, node: ast.expr, names: set[str]) -> bool:
        if isinstance(node, ast.Constant):
            return isinstance(node.value, int)
        if isinstance(node, ast.UnaryOp):
            return self._is_whole(node.operand, names)
        if isinstance(node, ast.IfExp):
            return self._is_whole(node.body, names) and self._is_whole(node.orelse, names)
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name):
            return node.func.id == "int" or self._call_gives_whole(node.func.id)
        return isinstance(node, ast.Name) and node.id in names

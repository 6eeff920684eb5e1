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

from llvmlite import ir

from loopsim.native.kinds import ELEMENT, TYPES, NotCompilable
from loopsim.native.statements import Lowering

PARSING = threading.Lock()  # Python 3.11 counts the depth of a parse for all threads together, and stumbles over it


@dataclass(slots=True)
class Module:
    """The functions of a text and what has been compiled of them."""

    text: str
    module: ir.Module = field(default_factory=lambda: ir.Module(name="loopsim"))
    functions: dict[str, ast.FunctionDef] = field(default_factory=dict)
    constants: dict[str, float | int] = field(default_factory=dict)
    compiled: dict[str, tuple[ir.Function, str, tuple[str, ...]]] = field(default_factory=dict)
    whole: dict[str, bool] = field(default_factory=dict)

    def __post_init__(self) -> None:
        with PARSING:
            body = ast.parse(self.text).body
        for node in body:
            if isinstance(node, ast.FunctionDef):
                self.functions[node.name] = node
            elif isinstance(node, ast.Assign) and isinstance(node.targets[0], ast.Name):
                self.constants[node.targets[0].id] = ast.literal_eval(node.value)

    def function(self, name: str, kinds: tuple[str, ...]) -> tuple[ir.Function, str]:
        """The compiled function for these argument kinds, and the kind that it returns."""
        if name not in self.compiled:
            node = self.functions[name]
            returns = self._returned(node, dict(zip([one.arg for one in node.args.args], kinds, strict=True)))
            signature = ir.FunctionType(TYPES[returns], [TYPES[kind] for kind in kinds])
            made = ir.Function(self.module, signature, name=f"text_{name}")
            made.linkage = "internal"
            for argument, kind in zip(made.args, kinds, strict=True):
                if kind in ELEMENT:
                    argument.add_attribute("noalias")
            self.compiled[name] = (made, returns, kinds)
            Lowering(self, node, made, returns, kinds).lower()
        made, returns, known = self.compiled[name]
        if known != kinds:
            raise NotCompilable(f"{name} is called with {kinds} and with {known}")
        return made, returns

    def entry(self, name: str, kinds: tuple[str, ...]) -> None:
        """Compile a function that is called from outside."""
        made, _ = self.function(name, kinds)
        made.linkage = "external"

    def _returned(self, node: ast.FunctionDef, kinds: dict[str, str]) -> str:
        """Float unless all returns are whole numbers."""
        return "i" if self._gives_whole(node, {name for name, kind in kinds.items() if kind == "i"}) else "f"

    def _gives_whole(self, node: ast.FunctionDef, known: set[str]) -> bool:
        whole = known | self._whole_names(node)
        returns = [one.value for one in ast.walk(node) if isinstance(one, ast.Return) and one.value is not None]
        return bool(returns) and all(self._is_whole(one, whole) for one in returns)

    def _call_gives_whole(self, name: str) -> bool:
        """Whether a function of the text gives a whole number, whatever it is called with."""
        if name not in self.whole:
            self.whole[name] = False
            called = self.functions.get(name)
            self.whole[name] = called is not None and self._gives_whole(called, set())
        return self.whole[name]

    def _whole_names(self, node: ast.FunctionDef) -> set[str]:
        """Locals that hold whole numbers by their first assignment."""
        found: dict[str, bool] = {}
        assigned = [
            one for one in ast.walk(node) if isinstance(one, ast.Assign) and isinstance(one.targets[0], ast.Name)
        ]
        for one in sorted(assigned, key=lambda one: one.lineno):
            assert isinstance(one.targets[0], ast.Name)
            found.setdefault(
                one.targets[0].id, self._is_whole(one.value, {name for name, is_so in found.items() if is_so})
            )
        return {name for name, is_so in found.items() if is_so}

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

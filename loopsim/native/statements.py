"""Statements of the restricted language lowered to LLVM's."""

from __future__ import annotations

import ast

from loopsim.native.expressions import Expressions
from loopsim.native.kinds import TYPES, Value, number


class Lowering(Expressions):
    """Lowers one function."""

    again = ""

    def lower(self) -> str:
        """The lines of its body; a function that ends without `return` gives nought."""
        for name in sorted(self._assigned() & set(self.arguments)):
            self.store(name, self.arguments[name])
        self.block(self.node.body)
        self.lines.end(f"ret {number(0 if self.returns == 'i' else 0.0)}")
        return self.lines.whole()

    def _assigned(self) -> set[str]:
        """The locals that the function gives a value."""
        return {one.id for one in ast.walk(self.node) if isinstance(one, ast.Name) and isinstance(one.ctx, ast.Store)}

    def block(self, body: list[ast.stmt]) -> None:
        for statement in body:
            if self.lines.ended:
                return
            getattr(self, f"on_{type(statement).__name__}", self.refuse)(statement)

    def on_Pass(self, node: ast.Pass) -> None:
        """Nothing."""

    def on_Expr(self, node: ast.Expr) -> None:
        self.value(node.value)

    def on_Return(self, node: ast.Return) -> None:
        value = self.value(node.value) if node.value is not None else number(0)
        self.lines.end(f"ret {self.cast(value, self.returns)}")

    def on_Assign(self, node: ast.Assign) -> None:
        (target,) = node.targets
        value = self.value(node.value)
        if isinstance(target, ast.Name):
            self.store(target.id, value)
            return
        assert isinstance(target, ast.Subscript)
        place = self.place(target)
        self.lines.do(f"store {self.cast(value, place.kind)}, ptr {place.text}")

    def on_AugAssign(self, node: ast.AugAssign) -> None:
        assert isinstance(node.target, ast.Name)
        self.store(node.target.id, self.arithmetic(node.op, self.name(node.target.id), self.value(node.value)))

    def on_If(self, node: ast.If) -> None:
        then, otherwise, after = (self.lines.name(stem) for stem in ("then", "otherwise", "after"))
        self.lines.choose(self.condition(node.test), then, otherwise if node.orelse else after)
        self.lines.begin(then)
        self.block(node.body)
        self.lines.go(after)
        if node.orelse:
            self.lines.begin(otherwise)
            self.block(node.orelse)
        self.lines.begin(after)

    def on_While(self, node: ast.While) -> None:
        head, body, after = (self.lines.name(stem) for stem in ("head", "body", "after"))
        self.lines.begin(head)
        self.lines.choose(self.condition(node.test), body, after)
        self.lines.begin(body)
        self._repeated(node.body, head)
        self.lines.go(head)
        self.lines.begin(after)

    def _repeated(self, body: list[ast.stmt], again: str) -> None:
        """A loop's body; `continue` goes to `again`."""
        outer, self.again = self.again, again
        self.block(body)
        self.again = outer

    def on_Continue(self, node: ast.Continue) -> None:
        self.lines.go(self.again)

    def on_For(self, node: ast.For) -> None:
        assert isinstance(node.target, ast.Name) and isinstance(node.iter, ast.Call)
        bounds = [self.cast(self.value(one), "i") for one in node.iter.args]
        first, last = bounds if len(bounds) == 2 else (number(0), bounds[0])
        counter = self.lines.slot("i")
        self.lines.do(f"store {first}, ptr {counter}")
        head, body, step, after = (self.lines.name(stem) for stem in ("head", "body", "step", "after"))
        self.lines.begin(head)
        now = self.lines.make("i", f"load {TYPES['i']}, ptr {counter}")
        self.lines.choose(self.compared(ast.Lt, now, last), body, after)
        self.lines.begin(body)
        self.store(node.target.id, now)
        self._repeated(node.body, step)
        self.lines.begin(step)
        following: Value = self.lines.make("i", f"add {now}, 1")
        self.lines.do(f"store {following}, ptr {counter}")
        self.lines.go(head)
        self.lines.begin(after)

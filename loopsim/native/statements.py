"""Statements of the restricted language lowered to LLVM's."""

from __future__ import annotations

import ast

from llvmlite import ir

from loopsim.native.expressions import Expressions
from loopsim.native.kinds import LONG, TYPES, Value


class Lowering(Expressions):
    """Lowers one function."""

    def lower(self) -> None:
        """The whole body; a function that ends without `return` gives nought."""
        self.block(self.node.body)
        if not self.builder.block.is_terminated:
            self.builder.ret(ir.Constant(TYPES[self.returns], 0))

    def block(self, body: list[ast.stmt]) -> None:
        for statement in body:
            if self.builder.block.is_terminated:
                return
            getattr(self, f"on_{type(statement).__name__}", self.refuse)(statement)

    def on_Pass(self, node: ast.Pass) -> None:
        """Nothing."""

    def on_Expr(self, node: ast.Expr) -> None:
        self.value(node.value)

    def on_Return(self, node: ast.Return) -> None:
        value = self.value(node.value) if node.value is not None else Value("i", ir.Constant(LONG, 0))
        self.builder.ret(self.cast(value, self.returns))

    def on_Assign(self, node: ast.Assign) -> None:
        (target,) = node.targets
        value = self.value(node.value)
        if isinstance(target, ast.Name):
            self.store(target.id, value)
            return
        assert isinstance(target, ast.Subscript)
        kind, place = self.place(target)
        self.builder.store(self.cast(value, kind), place)

    def on_AugAssign(self, node: ast.AugAssign) -> None:
        assert isinstance(node.target, ast.Name)
        value = self.arithmetic(node.op, self.name(node.target.id), self.value(node.value))
        self.store(node.target.id, value)

    def on_If(self, node: ast.If) -> None:
        test = self.condition(node.test)
        if node.orelse:
            with self.builder.if_else(test) as (then, otherwise):
                with then:
                    self.block(node.body)
                with otherwise:
                    self.block(node.orelse)
        else:
            with self.builder.if_then(test):
                self.block(node.body)

    def on_While(self, node: ast.While) -> None:
        head = self.builder.append_basic_block("head")
        body = self.builder.append_basic_block("body")
        after = self.builder.append_basic_block("after")
        self.builder.branch(head)
        self.builder.position_at_end(head)
        self.builder.cbranch(self.condition(node.test), body, after)
        self.builder.position_at_end(body)
        self.loops.append(head)
        self.block(node.body)
        self.loops.pop()
        if not self.builder.block.is_terminated:
            self.builder.branch(head)
        self.builder.position_at_end(after)

    def on_Continue(self, node: ast.Continue) -> None:
        self.builder.branch(self.loops[-1])

    def on_For(self, node: ast.For) -> None:
        assert isinstance(node.target, ast.Name) and isinstance(node.iter, ast.Call)
        bounds = [self.cast(self.value(one), "i") for one in node.iter.args]
        first, last = bounds if len(bounds) == 2 else (ir.Constant(LONG, 0), bounds[0])
        with self.builder.goto_entry_block():
            counter = self.builder.alloca(LONG)
        self.builder.store(first, counter)
        head = self.builder.append_basic_block("head")
        body = self.builder.append_basic_block("body")
        step = self.builder.append_basic_block("step")
        after = self.builder.append_basic_block("after")
        self.builder.branch(head)
        self.builder.position_at_end(head)
        now = self.builder.load(counter)
        self.builder.cbranch(self.builder.icmp_signed("<", now, last), body, after)
        self.builder.position_at_end(body)
        self.store(node.target.id, Value("i", now))
        self.loops.append(step)
        self.block(node.body)
        self.loops.pop()
        if not self.builder.block.is_terminated:
            self.builder.branch(step)
        self.builder.position_at_end(step)
        self.builder.store(self.builder.add(self.builder.load(counter), ir.Constant(LONG, 1)), counter)
        self.builder.branch(head)
        self.builder.position_at_end(after)

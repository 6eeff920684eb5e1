"""Expressions of the restricted language lowered to LLVM's."""

from __future__ import annotations

import ast
from typing import Any

from llvmlite import ir

from loopsim.native.kinds import (
    BIT,
    COMPARED,
    DOUBLE,
    ELEMENT,
    INTRINSIC,
    LIBRARY,
    LONG,
    TYPES,
    NotCompilable,
    Text,
    Value,
)


class Expressions:
    """What a function's expressions need: its locals, which live in stack slots that the optimiser makes registers."""

    def __init__(
        self, module: Text, node: ast.FunctionDef, made: ir.Function, returns: str, kinds: tuple[str, ...]
    ) -> None:
        self.module, self.node, self.made, self.returns = module, node, made, returns
        self.slots: dict[str, tuple[str, Any]] = {}
        self.entry = made.append_basic_block("entry")
        self.builder = ir.IRBuilder(self.entry)
        self.loops: list[Any] = []
        for argument, kind, name in zip(made.args, kinds, node.args.args, strict=True):
            self.store(name.arg, Value(kind, argument))

    # ------------------------------------------------------------ locals
    def store(self, name: str, value: Value) -> None:
        if name not in self.slots:
            kind = "i" if value.kind == "b" else value.kind
            with self.builder.goto_entry_block():
                self.slots[name] = (kind, self.builder.alloca(TYPES[kind], name=name))
        kind, slot = self.slots[name]
        self.builder.store(self.cast(value, kind), slot)

    def cast(self, value: Value, kind: str) -> Any:
        """A value as another kind."""
        if value.kind == kind:
            return value.value
        if kind == "f" and value.kind == "i":
            return self.builder.sitofp(value.value, DOUBLE)
        if kind == "i" and value.kind == "b":
            return self.builder.zext(value.value, LONG)
        raise NotCompilable(f"{self.node.name}: {value.kind} where {kind} is wanted")

    def refuse(self, node: ast.AST) -> Any:
        raise NotCompilable(f"{self.node.name}, line {getattr(node, 'lineno', 0)}: {type(node).__name__}")

    # ------------------------------------------------------------ expressions
    def value(self, node: ast.expr) -> Value:
        found: Value = getattr(self, f"of_{type(node).__name__}", self.refuse)(node)
        return found

    def condition(self, node: ast.expr) -> Any:
        value = self.value(node)
        if value.kind == "b":
            return value.value
        if value.kind == "i":
            return self.builder.icmp_signed("!=", value.value, ir.Constant(LONG, 0))
        return self.builder.fcmp_unordered("!=", value.value, ir.Constant(DOUBLE, 0.0))

    def name(self, name: str) -> Value:
        if name in self.slots:
            kind, slot = self.slots[name]
            return Value(kind, self.builder.load(slot))
        if name in ("NAN", "INFINITY"):
            return Value("f", ir.Constant(DOUBLE, float("nan" if name == "NAN" else "inf")))
        if name not in self.module.constants:
            raise NotCompilable(f"{self.node.name}: '{name}' has no value")
        return self.constant(self.module.constants[name])

    def constant(self, number: float | int) -> Value:
        return (
            Value("i", ir.Constant(LONG, number))
            if isinstance(number, int)
            else Value("f", ir.Constant(DOUBLE, number))
        )

    def of_Name(self, node: ast.Name) -> Value:
        return self.name(node.id)

    def of_Constant(self, node: ast.Constant) -> Value:
        assert isinstance(node.value, int | float)
        return self.constant(node.value)

    def place(self, node: ast.Subscript) -> tuple[str, Any]:
        """The kind and address of `a[i]`."""
        array = self.value(node.value)
        index = self.cast(self.value(node.slice), "i")
        return ELEMENT[array.kind], self.builder.gep(array.value, [index], inbounds=True)

    def of_Subscript(self, node: ast.Subscript) -> Value:
        kind, place = self.place(node)
        return Value(kind, self.builder.load(place))

    def of_UnaryOp(self, node: ast.UnaryOp) -> Value:
        if isinstance(node.op, ast.Not):
            return Value("b", self.builder.not_(self.condition(node.operand)))
        value = self.value(node.operand)
        if isinstance(node.op, ast.USub):
            made = self.builder.fneg(value.value) if value.kind == "f" else self.builder.neg(value.value)
            return Value(value.kind, made)
        return value

    def of_BinOp(self, node: ast.BinOp) -> Value:
        return self.arithmetic(node.op, self.value(node.left), self.value(node.right))

    def arithmetic(self, sign: ast.operator, left: Value, right: Value) -> Value:
        name = {ast.Add: "add", ast.Sub: "sub", ast.Mult: "mul", ast.Div: "div"}[type(sign)]
        if left.kind == right.kind == "i" and name != "div":
            return Value("i", getattr(self.builder, name)(left.value, right.value))
        made = getattr(self.builder, f"f{name}")(self.cast(left, "f"), self.cast(right, "f"))
        return Value("f", made)

    def of_Compare(self, node: ast.Compare) -> Value:
        left, right = self.value(node.left), self.value(node.comparators[0])
        sign = COMPARED[type(node.ops[0])]
        if left.kind == right.kind == "i":
            return Value("b", self.builder.icmp_signed(sign, left.value, right.value))
        sides = self.cast(left, "f"), self.cast(right, "f")
        compare = self.builder.fcmp_unordered if sign == "!=" else self.builder.fcmp_ordered
        return Value("b", compare(sign, *sides))

    def of_BoolOp(self, node: ast.BoolOp) -> Value:
        """`and`, `or`: a side that does not decide is not looked at."""
        made = self.condition(node.values[0])
        for part in node.values[1:]:
            before = self.builder.block
            look = self.builder.append_basic_block("look")
            after = self.builder.append_basic_block("decided")
            if isinstance(node.op, ast.And):
                self.builder.cbranch(made, look, after)
            else:
                self.builder.cbranch(made, after, look)
            self.builder.position_at_end(look)
            other, ends = self.condition(part), self.builder.block
            self.builder.branch(after)
            self.builder.position_at_end(after)
            joined = self.builder.phi(BIT)
            joined.add_incoming(ir.Constant(BIT, isinstance(node.op, ast.Or)), before)
            joined.add_incoming(other, ends)
            made = joined
        return Value("b", made)

    def of_IfExp(self, node: ast.IfExp) -> Value:
        test = self.condition(node.test)
        then = self.builder.append_basic_block("then")
        otherwise = self.builder.append_basic_block("otherwise")
        after = self.builder.append_basic_block("chosen")
        self.builder.cbranch(test, then, otherwise)
        self.builder.position_at_end(then)
        first, first_end = self.value(node.body), self.builder.block
        self.builder.position_at_end(otherwise)
        second, second_end = self.value(node.orelse), self.builder.block
        kind = "i" if first.kind == second.kind == "i" else "f"
        ends = []
        for value, end in ((first, first_end), (second, second_end)):
            self.builder.position_at_end(end)
            ends.append((self.cast(value, kind), self.builder.block))
            self.builder.branch(after)
        self.builder.position_at_end(after)
        joined = self.builder.phi(TYPES[kind])
        for made, end in ends:
            joined.add_incoming(made, end)
        return Value(kind, joined)

    def of_Call(self, node: ast.Call) -> Value:
        assert isinstance(node.func, ast.Name)
        arguments = [self.value(one) for one in node.args]
        return self.call(node.func.id, arguments)

    def call(self, name: str, arguments: list[Value]) -> Value:
        if name in self.module.functions:
            kinds = tuple("i" if one.kind == "b" else one.kind for one in arguments)
            known = self.module.compiled.get(name)
            wanted = known[2] if known is not None else kinds
            wanted = tuple(
                "f" if have == "i" and want == "f" else have for have, want in zip(kinds, wanted, strict=True)
            )
            made, returns = self.module.function(name, wanted)
            values = [self.cast(one, kind) for one, kind in zip(arguments, wanted, strict=True)]
            return Value(returns, self.builder.call(made, values))
        if name == "int":
            return Value("i", self.builder.fptosi(self.cast(arguments[0], "f"), LONG))
        if name == "abs":
            return self.absolute(arguments[0])
        floats = [self.cast(one, "f") for one in arguments]
        if name == "div":
            return Value("f", self.builder.fdiv(*floats))
        if name in INTRINSIC:
            intrinsic = self.module.module.declare_intrinsic(INTRINSIC[name], [DOUBLE])
            return Value("f", self.builder.call(intrinsic, floats))
        if name in LIBRARY:
            return Value("f", self.builder.call(self.library(name), floats))
        raise NotCompilable(f"{self.node.name}: there is no function '{name}'")

    def absolute(self, value: Value) -> Value:
        if value.kind == "f":
            return Value(
                "f", self.builder.call(self.module.module.declare_intrinsic("llvm.fabs", [DOUBLE]), [value.value])
            )
        negative = self.builder.icmp_signed("<", value.value, ir.Constant(LONG, 0))
        return Value("i", self.builder.select(negative, self.builder.neg(value.value), value.value))

    def library(self, name: str) -> ir.Function:
        known = self.module.module.globals.get(f"loopsim_{name}")
        if isinstance(known, ir.Function):
            return known
        made = ir.Function(self.module.module, ir.FunctionType(DOUBLE, [DOUBLE] * LIBRARY[name]), f"loopsim_{name}")
        made.attributes.add("nounwind")
        return made

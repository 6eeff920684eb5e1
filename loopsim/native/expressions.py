"""Expressions of the restricted language lowered to LLVM's."""

from __future__ import annotations

import ast
from typing import Any

from loopsim.native.kinds import (
    COMBINED,
    COMPARED,
    ELEMENT,
    INTRINSIC,
    LIBRARY,
    TYPES,
    NotCompilable,
    Text,
    Value,
    number,
)
from loopsim.native.lines import Lines


class Expressions:
    """What the expressions of one function need."""

    def __init__(self, module: Text, node: ast.FunctionDef, kinds: tuple[str, ...], returns: str) -> None:
        self.module, self.node, self.returns = module, node, returns
        self.lines = Lines()
        self.slots: dict[str, Value] = {}
        self.arguments = {
            argument.arg: Value(kind, f"%{argument.arg}") for argument, kind in zip(node.args.args, kinds, strict=True)
        }

    # ------------------------------------------------------------ locals
    def store(self, name: str, value: Value) -> None:
        if name not in self.slots:
            self.arguments.pop(name, None)
            kind = "i" if value.kind == "b" else value.kind
            self.slots[name] = Value(kind, self.lines.slot(kind))
        slot = self.slots[name]
        self.lines.do(f"store {self.cast(value, slot.kind)}, ptr {slot.text}")

    def cast(self, value: Value, kind: str) -> Value:
        """A value as another kind."""
        if value.kind == kind:
            return value
        if kind == "f" and value.kind == "i":
            return self.lines.make("f", f"sitofp {value} to double")
        if kind == "i" and value.kind == "b":
            return self.lines.make("i", f"zext {value} to i64")
        raise NotCompilable(f"{self.node.name}: {value.kind} where {kind} is wanted")

    def refuse(self, node: ast.AST) -> Any:
        raise NotCompilable(f"{self.node.name}, line {getattr(node, 'lineno', 0)}: {type(node).__name__}")

    # ------------------------------------------------------------ expressions
    def value(self, node: ast.expr) -> Value:
        found: Value = getattr(self, f"of_{type(node).__name__}", self.refuse)(node)
        return found

    def condition(self, node: ast.expr) -> Value:
        value = self.value(node)
        if value.kind == "b":
            return value
        return self.compared(ast.NotEq, value, number(0 if value.kind == "i" else 0.0))

    def name(self, name: str) -> Value:
        if name in self.slots:
            slot = self.slots[name]
            return self.lines.make(slot.kind, f"load {TYPES[slot.kind]}, ptr {slot.text}")
        if name in self.arguments:
            return self.arguments[name]
        if name in ("NAN", "INFINITY"):
            return number(float("nan" if name == "NAN" else "inf"))
        if name not in self.module.constants:
            raise NotCompilable(f"{self.node.name}: '{name}' has no value")
        return number(self.module.constants[name])

    def of_Name(self, node: ast.Name) -> Value:
        return self.name(node.id)

    def of_Constant(self, node: ast.Constant) -> Value:
        assert isinstance(node.value, int | float)
        return number(node.value)

    def place(self, node: ast.Subscript) -> Value:
        """The address of `a[i]`, with the kind of what stands there."""
        array = self.value(node.value)
        index = self.cast(self.value(node.slice), "i")
        kind = ELEMENT[array.kind]
        return self.lines.make(kind, f"getelementptr inbounds {TYPES[kind]}, {array}, {index}")

    def of_Subscript(self, node: ast.Subscript) -> Value:
        place = self.place(node)
        return self.lines.make(place.kind, f"load {TYPES[place.kind]}, ptr {place.text}")

    def of_UnaryOp(self, node: ast.UnaryOp) -> Value:
        if isinstance(node.op, ast.Not):
            return self.lines.make("b", f"xor {self.condition(node.operand)}, true")
        value = self.value(node.operand)
        if not isinstance(node.op, ast.USub):
            return value
        return self.lines.make(value.kind, f"fneg {value}" if value.kind == "f" else f"sub i64 0, {value.text}")

    def of_BinOp(self, node: ast.BinOp) -> Value:
        return self.arithmetic(node.op, self.value(node.left), self.value(node.right))

    def arithmetic(self, sign: ast.operator, left: Value, right: Value) -> Value:
        name = COMBINED[type(sign)]
        if left.kind == right.kind == "i" and name != "div":
            return self.lines.make("i", f"{name} {left}, {right.text}")
        left, right = self.cast(left, "f"), self.cast(right, "f")
        return self.lines.make("f", f"f{name} {left}, {right.text}")

    def of_Compare(self, node: ast.Compare) -> Value:
        return self.compared(type(node.ops[0]), self.value(node.left), self.value(node.comparators[0]))

    def compared(self, sign: type[ast.cmpop], left: Value, right: Value) -> Value:
        whole, real = COMPARED[sign]
        if left.kind == right.kind == "i":
            return self.lines.make("b", f"icmp {whole} {left}, {right.text}")
        left, right = self.cast(left, "f"), self.cast(right, "f")
        return self.lines.make("b", f"fcmp {real} {left}, {right.text}")

    def of_BoolOp(self, node: ast.BoolOp) -> Value:
        """`and`, `or`: a side that does not decide is not looked at."""
        decided = "true" if isinstance(node.op, ast.Or) else "false"
        made = self.condition(node.values[0])
        for part in node.values[1:]:
            before, look, after = self.lines.label, self.lines.name("look"), self.lines.name("decided")
            self.lines.choose(made, *((after, look) if decided == "true" else (look, after)))
            self.lines.begin(look)
            other, end = self.condition(part), self.lines.label
            self.lines.begin(after)
            made = self.lines.make("b", f"phi i1 [{decided}, %{before}], [{other.text}, %{end}]")
        return made

    def of_IfExp(self, node: ast.IfExp) -> Value:
        then, otherwise, after = (self.lines.name(stem) for stem in ("then", "otherwise", "chosen"))
        self.lines.choose(self.condition(node.test), then, otherwise)
        self.lines.begin(then)
        first = self.value(node.body)
        first = first if first.kind == "i" else self.cast(first, "f")
        first_end = self.lines.label
        self.lines.go(after)
        self.lines.begin(otherwise)
        second = self.cast(self.value(node.orelse), first.kind)
        second_end = self.lines.label
        self.lines.begin(after)
        pairs = f"[{first.text}, %{first_end}], [{second.text}, %{second_end}]"
        return self.lines.make(first.kind, f"phi {TYPES[first.kind]} {pairs}")

    def of_Call(self, node: ast.Call) -> Value:
        assert isinstance(node.func, ast.Name)
        return self.call(node.func.id, [self.value(one) for one in node.args])

    def call(self, name: str, arguments: list[Value]) -> Value:
        if name in self.module.functions:
            kinds = tuple("i" if one.kind == "b" else one.kind for one in arguments)
            returns, wanted = self.module.function(name, kinds)
            values = [self.cast(one, kind) for one, kind in zip(arguments, wanted, strict=True)]
            return self.called(returns, f"@text_{name}", values)
        if name == "int":
            return self.lines.make("i", f"fptosi {self.cast(arguments[0], 'f')} to i64")
        if name == "abs":
            return self.absolute(arguments[0])
        floats = [self.cast(one, "f") for one in arguments]
        if name == "div":
            return self.lines.make("f", f"fdiv {floats[0]}, {floats[1].text}")
        if name in INTRINSIC:
            return self.outside(f"@llvm.{INTRINSIC[name]}.f64", floats)
        if name in LIBRARY:
            return self.outside(f"@loopsim_{name}", floats)
        raise NotCompilable(f"{self.node.name}: there is no function '{name}'")

    def called(self, returns: str, name: str, values: list[Value]) -> Value:
        return self.lines.make(returns, f"call {TYPES[returns]} {name}({', '.join(map(str, values))})")

    def outside(self, name: str, floats: list[Value]) -> Value:
        self.module.declared[name] = ", ".join("double" for _ in floats)
        return self.called("f", name, floats)

    def absolute(self, value: Value) -> Value:
        if value.kind == "f":
            return self.outside("@llvm.fabs.f64", [value])
        negative = self.compared(ast.Lt, value, number(0))
        turned = self.lines.make("i", f"sub i64 0, {value.text}")
        return self.lines.make("i", f"select {negative}, {turned}, {value}")

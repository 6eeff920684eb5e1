"""Restricted Python compiled: functions of numbers and flat arrays, lowered to LLVM's language.

What it takes: module-level functions and integer constants; assignments (also `+=`, also to `a[i]`), `if`, `while`,
`for i in range(…)`, `continue`, `return`; arithmetic, comparisons, `and or not`, `a if c else b`; calls of the module's
functions, of `LIBRARY` and `INTRINSIC`, of `div`, `abs` and `int`. Types: f (float), i (int), F and I (flat arrays of
them), P (array of float arrays). A function is compiled for the argument types of its first call. Every operation gives
the same bits as in Python.
"""

from __future__ import annotations

import ast
from dataclasses import dataclass, field
from typing import Any

from llvmlite import ir

DOUBLE, LONG, BIT = ir.DoubleType(), ir.IntType(64), ir.IntType(1)
TYPES: dict[str, ir.Type] = {
    "f": DOUBLE,
    "i": LONG,
    "F": DOUBLE.as_pointer(),
    "I": LONG.as_pointer(),
    "P": DOUBLE.as_pointer().as_pointer(),
}
ELEMENT = {"F": "f", "I": "i", "P": "F"}
# functions of one or two floats from the C library, bound under names of our own: the optimiser must leave their bits
LIBRARY = {
    "power": 2,
    "exponential": 1,
    "logarithm": 1,
    "logarithm10": 1,
    "sine": 1,
    "cosine": 1,
    "tangent": 1,
    "hyperbolic_tangent": 1,
}
INTRINSIC = {"root": "llvm.sqrt", "floor": "llvm.floor"}
COMPARED = {ast.Lt: "<", ast.LtE: "<=", ast.Gt: ">", ast.GtE: ">=", ast.Eq: "==", ast.NotEq: "!="}


class NotCompilable(Exception):
    """Text outside the restricted language."""


@dataclass(frozen=True, slots=True)
class Value:
    """A value and its kind: a type letter, or b for a condition."""

    kind: str
    value: Any


@dataclass(slots=True)
class Module:
    """The functions of a text and what has been compiled of them."""

    text: str
    module: ir.Module = field(default_factory=lambda: ir.Module(name="loopsim"))
    functions: dict[str, ast.FunctionDef] = field(default_factory=dict)
    constants: dict[str, float | int] = field(default_factory=dict)
    compiled: dict[str, tuple[ir.Function, str, tuple[str, ...]]] = field(default_factory=dict)

    def __post_init__(self) -> None:
        for node in ast.parse(self.text).body:
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
            _Lowering(self, node, made, returns, kinds).lower()
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
            called = self.functions.get(node.func.id)
            return node.func.id == "int" or (called is not None and self._gives_whole(called, set()))
        return isinstance(node, ast.Name) and node.id in names


class _Lowering:
    """Lowers one function; locals live in stack slots that the optimiser turns into registers."""

    def __init__(
        self, module: Module, node: ast.FunctionDef, made: ir.Function, returns: str, kinds: tuple[str, ...]
    ) -> None:
        self.module, self.node, self.made, self.returns = module, node, made, returns
        self.slots: dict[str, tuple[str, Any]] = {}
        self.entry = made.append_basic_block("entry")
        self.builder = ir.IRBuilder(self.entry)
        self.loops: list[Any] = []
        for argument, kind, name in zip(made.args, kinds, node.args.args, strict=True):
            self.store(name.arg, Value(kind, argument))

    def lower(self) -> None:
        """The whole body; a function that ends without `return` gives nought."""
        self.block(self.node.body)
        if not self.builder.block.is_terminated:
            self.builder.ret(ir.Constant(TYPES[self.returns], 0))

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

    # ------------------------------------------------------------ statements
    def block(self, body: list[ast.stmt]) -> None:
        for statement in body:
            if self.builder.block.is_terminated:
                return
            getattr(self, f"on_{type(statement).__name__}", self.refuse)(statement)

    def refuse(self, node: ast.AST) -> Any:
        raise NotCompilable(f"{self.node.name}, line {getattr(node, 'lineno', 0)}: {type(node).__name__}")

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

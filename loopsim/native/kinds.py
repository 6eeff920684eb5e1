"""Kinds of values in the restricted language, what it may call, and what a compiled text offers."""

from __future__ import annotations

import ast
from dataclasses import dataclass
from typing import Any, Protocol

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


class Text(Protocol):
    """A text that is being compiled: its functions and constants, and what has been made of them."""

    module: ir.Module
    functions: dict[str, ast.FunctionDef]
    constants: dict[str, float | int]
    compiled: dict[str, tuple[ir.Function, str, tuple[str, ...]]]

    def function(self, name: str, kinds: tuple[str, ...]) -> tuple[ir.Function, str]:
        """The compiled function for these argument kinds, and the kind that it returns."""

"""Kinds of values in the restricted language, and what it may call."""

from __future__ import annotations

import ast
import struct
from dataclasses import dataclass
from typing import Protocol

# f float, i whole number, b condition, F and I flat arrays of them, P array of float arrays: in LLVM's words
TYPES = {"f": "double", "i": "i64", "b": "i1", "F": "ptr", "I": "ptr", "P": "ptr"}
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
INTRINSIC = {"root": "sqrt", "floor": "floor"}
COMPARED: dict[type[ast.cmpop], tuple[str, str]] = {
    ast.Lt: ("slt", "olt"),
    ast.LtE: ("sle", "ole"),
    ast.Gt: ("sgt", "ogt"),
    ast.GtE: ("sge", "oge"),
    ast.Eq: ("eq", "oeq"),
    ast.NotEq: ("ne", "une"),
}
COMBINED: dict[type[ast.operator], str] = {ast.Add: "add", ast.Sub: "sub", ast.Mult: "mul", ast.Div: "div"}


class NotCompilable(Exception):
    """Text outside the restricted language."""


@dataclass(frozen=True, slots=True)
class Value:
    """A value as LLVM's text names it, and its kind."""

    kind: str
    text: str

    def __str__(self) -> str:
        return f"{TYPES[self.kind]} {self.text}"


def number(value: float | int) -> Value:
    """A constant; floats by their bits."""
    if isinstance(value, int):
        return Value("i", str(int(value)))
    return Value("f", f"0x{struct.pack('>d', value).hex().upper()}")


class Text(Protocol):
    """A text that is being compiled: its functions and constants, and what has been made of them."""

    functions: dict[str, ast.FunctionDef]
    constants: dict[str, float | int]
    declared: dict[str, str]

    def function(self, name: str, kinds: tuple[str, ...]) -> tuple[str, tuple[str, ...]]:
        """What the function compiled for these arguments returns, and the kinds that it takes."""

"""Expression trees: what a formula is once it has been read.

A tree is a value: frozen, compared without its place in the text. The same nodes serve a block's own
text (names as the block writes them, with an index) and the flattened model (names `tag.port`, no index).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

ARITHMETIC = ("+", "-", "*", "/", "^", "neg")
COMPARISONS = ("<", "<=", ">", ">=", "==", "!=")
LOGIC = ("and", "or", "not")


@dataclass(frozen=True, slots=True)
class Index:
    """What stands between `[` and `]`: `base` (a letter, a count's name, a list name, or None) plus `offset`."""

    base: str | None
    offset: int = 0


@dataclass(frozen=True, slots=True)
class Number:
    """A number without unit."""

    value: float
    at: int = field(default=0, compare=False)


@dataclass(frozen=True, slots=True)
class Name:
    """A name: `T`, `range.low`, `out.takes` (dots stay in `name`), `T[i-1]` (with `index`), or flat `tank.T`."""

    name: str
    index: Index | None = None
    at: int = field(default=0, compare=False)


@dataclass(frozen=True, slots=True)
class Operation:
    """`+ - * / ^ neg`, `< <= > >= == !=`, `and or not`; `and`/`or`/`+`/… take exactly two arguments."""

    operator: str
    arguments: tuple[Expression, ...]
    at: int = field(default=0, compare=False)
    names: frozenset[str] = field(init=False, compare=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "names", _names_of(self.arguments))


@dataclass(frozen=True, slots=True)
class Call:
    """A function of the language applied to arguments."""

    function: str
    arguments: tuple[Expression, ...]
    at: int = field(default=0, compare=False)
    names: frozenset[str] = field(init=False, compare=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "names", _names_of(self.arguments))


@dataclass(frozen=True, slots=True)
class Rate:
    """`dX/dt` (argument a Name) or `d(expression)/dt`; stands in balances only."""

    argument: Expression
    at: int = field(default=0, compare=False)


Expression = Number | Name | Operation | Call | Rate


def parts(tree: Expression) -> tuple[Expression, ...]:
    """The direct parts of a node, left to right."""
    if isinstance(tree, Operation | Call):
        return tree.arguments
    return (tree.argument,) if isinstance(tree, Rate) else ()


def walk(tree: Expression) -> Iterator[Expression]:
    """The node and everything below it, parents first."""
    stack = [tree]
    while stack:
        node = stack.pop()
        yield node
        stack.extend(reversed(parts(node)))


def rebuild(tree: Expression, new_parts: tuple[Expression, ...]) -> Expression:
    """The same node with other parts; the node itself when nothing changed."""
    if new_parts == parts(tree):
        return tree
    if isinstance(tree, Rate):
        return replace(tree, argument=new_parts[0])
    assert isinstance(tree, Operation | Call)
    return replace(tree, arguments=new_parts)


def transform(tree: Expression, change: Callable[[Expression], Expression]) -> Expression:
    """Apply `change` to every node, parts before wholes."""
    below = tuple(transform(part, change) for part in parts(tree))
    return change(rebuild(tree, below))


def names_in(tree: Expression) -> frozenset[str]:
    """All names that occur in a tree."""
    if isinstance(tree, Name):
        return frozenset((tree.name,))
    if isinstance(tree, Rate):
        return names_in(tree.argument)
    return tree.names if isinstance(tree, Operation | Call) else frozenset()


def _names_of(arguments: tuple[Expression, ...]) -> frozenset[str]:
    """The names in all arguments; kept with each node, since they are asked for again and again."""
    return frozenset[str]().union(*map(names_in, arguments))

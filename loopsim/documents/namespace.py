"""The names of a block and its formulas, section by section."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from loopsim.documents.types import (
    Balance,
    Block,
    Bounds,
    ByChoice,
    Fault,
    Formula,
    Held,
    Input,
    Key,
    Let,
    Output,
    PairValue,
    Parameter,
    Setting,
    Unknown,
)
from loopsim.errors import Where, nearest
from loopsim.language.functions import CONSTANTS
from loopsim.language.tree import Call, Expression, Index, Name, walk
from loopsim.language.write import index_text

KNOWN = ("given", "wired")  # what these are asked about is known when the model is assembled
Ported = Parameter | Input | Held | Unknown | Output
Entry = Setting | Parameter | Input | Held | Let | Balance | Unknown | Fault | Output


@dataclass(frozen=True, slots=True, eq=False)
class Member:
    """One entry that gives a name a meaning; `section` is what people call it: parameter, input, state, let, …"""

    section: str
    key: Key
    entry: Entry

    @property
    def where(self) -> Where:
        """Where it stands."""
        return self.entry.where


@dataclass(frozen=True, slots=True)
class Text:
    """One tree of a block: the entry that it belongs to, and its role there: default, start, value, …"""

    section: str
    key: Key
    role: str
    tree: Expression
    where: Where

    def at(self, column: int) -> Where:
        """The place of a column of the text."""
        return column_of(self.where, column)


def column_of(where: Where, column: int) -> Where:
    """The place of a column of a text, from 0; the text's beginning where it runs over several lines."""
    on_the_line = not where.text or where.column - 1 + column < len(where.text)
    return where.shifted(column) if on_the_line else where


class Names:
    """What a block's names mean: `of(name)` gives the entries behind a name."""

    def __init__(self, block: Block) -> None:
        self.block = block
        self.letter = block.repeat.letter if block.repeat else ""
        self.over = block.repeat.over if block.repeat else ""
        self.members = tuple(_members(block))
        self._by_name: dict[str, list[Member]] = {}
        for member in self.members:
            self._by_name.setdefault(member.key.name, []).append(member)

    def __contains__(self, name: str) -> bool:
        return name in self._by_name

    def __iter__(self) -> Iterator[str]:
        return iter(self._by_name)

    def of(self, name: str, section: str = "") -> list[Member]:
        """The entries of a name, those of one section only if it is given."""
        return [one for one in self._by_name.get(name, []) if section in ("", one.section)]

    def sections(self, name: str) -> set[str]:
        """The sections that a name stands in."""
        return {one.section for one in self._by_name.get(name, [])}

    def generic(self, key: Key) -> bool:
        """Whether a key stands for all elements: `T[i]`."""
        return key.index is not None and key.index.offset == 0 and key.index.base == self.letter != ""

    def has(self, name: str, index: Index) -> bool:
        """Whether an element is there, named by a number or from the count: `T[0]`, `T[2]`, `T[n]`, `T[n+1]`."""
        keys = [one.key for one in self.of(name)]
        return Key(name, index) in keys or (inside(index) and any(self.generic(key) for key in keys))

    @property
    def listed(self) -> tuple[str, ...] | None:
        """The names that the repeat runs over, as far as the block names them; None where it counts."""
        parameters = [one.entry for one in self.of(self.over, "parameter")]
        return next((one.names for one in parameters if isinstance(one, Parameter)), None)


def inside(index: Index) -> bool:
    """Whether an index means one of the counted elements: `[1]`, `[n]`, `[n-1]`, not `[0]` or `[n+1]`."""
    return index.offset >= 1 if index.base is None else index.offset <= 0


def entries_with_unit(block: Block) -> Iterator[Ported]:
    """Every entry that has a `unit:`."""
    yield from block.parameters
    yield from block.inputs
    yield from block.states
    yield from block.memory
    yield from block.solve
    yield from block.outputs


def _members(block: Block) -> Iterator[Member]:
    for name, setting in block.settings.items():
        yield Member("setting", Key(name), setting)
    keyed: tuple[tuple[str, tuple[Parameter | Input | Held | Unknown | Let | Balance | Output, ...]], ...] = (
        ("parameter", block.parameters),
        ("input", block.inputs),
        ("state", block.states),
        ("memory", block.memory),
        ("unknown", block.solve),
        ("let", block.let),
        ("scan", block.scan),
        ("continuous", block.continuous),
    )
    for section, entries in keyed:
        for entry in entries:
            yield Member(section, entry.key, entry)
    for name, fault in block.faults.items():
        yield Member("fault", Key(name), fault)
    for output in block.outputs:
        yield Member("output", output.key, output)


def shown(key: Key) -> str:
    """A key as people write it: `T`, `T[i]`, `T[n+1]`."""
    return key.name + (index_text(key.index) if key.index else "")


def near(name: str, known: Iterable[str], what: str) -> str:
    """A hint with the nearest of several names, or that there are none; `what` they are, in the plural."""
    choices = list(known)
    return nearest(name, choices, what) if choices else f"this block has no {what}"


# ---------------------------------------------------------------- formulas
def texts_of(block: Block) -> Iterator[Text]:
    """Every tree of a block, those of all choices among them."""
    for parameter in block.parameters:
        yield from _texts("parameter", parameter.key, "default", parameter.default)
        yield from _bounds("parameter", parameter.key, parameter.bounds)
    for one in block.inputs:
        yield from _texts("input", one.key, "default", one.default)
        if one.answers is not None:
            for answer in (one.answers.takes, one.answers.up, one.answers.down):
                yield from _texts("input", one.key, "answer", answer)
    for section, entries in (("state", block.states), ("memory", block.memory)):
        for held in entries:
            yield from _texts(section, held.key, "start", held.start)
            yield from _bounds(section, held.key, held.bounds)
    for output in block.outputs:
        yield from _texts("output", output.key, "value", output.value)
        yield from _bounds("output", output.key, output.bounds)
    yield from _equations(block)


def _equations(block: Block) -> Iterator[Text]:
    for section, lets in (("let", block.let), ("scan", block.scan), ("continuous", block.continuous)):
        for entry in lets:
            yield from (
                _sides(section, entry)
                if isinstance(entry, Balance)
                else _texts(section, entry.key, "value", entry.value)
            )
    for balance in block.balances:
        yield from _sides("balance", balance)
    for unknown in block.solve:
        yield from _sides("unknown", unknown.equation)
        yield from _texts("unknown", unknown.key, "start", unknown.start)
        yield from _texts("unknown", unknown.key, "between", unknown.between)


def _sides(section: str, balance: Balance) -> Iterator[Text]:
    for tree in (balance.left, balance.right):
        yield Text(section, balance.key, "equation", tree, balance.where)


def _bounds(section: str, key: Key, bounds: Bounds) -> Iterator[Text]:
    for limit in (bounds.above, bounds.at_least, bounds.below, bounds.at_most):
        yield from _texts(section, key, "bound", limit)


def _texts(section: str, key: Key, role: str, value: object) -> Iterator[Text]:
    for formula in formulas_in(value):
        yield Text(section, key, role, formula.tree, formula.where)


def formulas_in(value: object) -> Iterator[Formula]:
    """The formulas of a definition, those of all choices."""
    match value:
        case Formula():
            yield value
        case ByChoice():
            for option in value.options.values():
                yield from formulas_in(option)
        case PairValue():
            yield from formulas_in(value.low)
            yield from formulas_in(value.high)


def choices_in(value: object) -> Iterator[ByChoice]:
    """The choices by setting of a definition or unit, the outer ones first."""
    if isinstance(value, ByChoice):
        yield value
        for option in value.options.values():
            yield from choices_in(option)


def moving(tree: Expression, names: Names, still: set[str], seen: frozenset[str] = frozenset()) -> list[Name]:
    """Names in a tree that depend on anything but the sections in `still`, lets followed."""
    found = []
    known = {
        id(one) for node in walk(tree) if isinstance(node, Call) and node.function in KNOWN for one in node.arguments
    }
    for node in walk(tree):
        if not isinstance(node, Name) or id(node) in known:
            continue
        stem = node.name.partition(".")[0]
        if stem in CONSTANTS or stem in seen or stem not in names:
            continue
        sections = names.sections(stem) - {"output", "fault"}
        trees = [one.tree for let in names.of(stem, "let") for one in formulas_in(getattr(let.entry, "value", None))]
        inner = [name for one in trees for name in moving(one, names, still, seen | {stem})]
        if inner or not sections or not sections <= still | {"let"}:
            found.append(node)
    return found

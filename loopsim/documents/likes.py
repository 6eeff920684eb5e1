"""`like` and `rename`: a block that starts from another one's text.

Renaming works on what has been read, so every formula keeps the place where it was written.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, fields, is_dataclass, replace
from typing import Any, TypeVar

from loopsim.documents.definitions import new_name
from loopsim.documents.fields import name
from loopsim.documents.nodes import Mapping as Node
from loopsim.documents.types import (
    Balance,
    Block,
    ByChoice,
    Check,
    Fault,
    Formula,
    Input,
    Key,
    Repeat,
    Setting,
    Stream,
    UnitText,
    Use,
    Wire,
    Word,
)
from loopsim.errors import Problems, Where, fail, nearest
from loopsim.language.functions import FUNCTIONS
from loopsim.language.tree import Expression, Index, Name, transform

T = TypeVar("T")

_KEYED = ("parameters", "inputs", "states", "balances", "memory", "scan", "continuous", "let", "solve", "outputs")
_NAMED = ("settings", "faults", "streams", "blocks", "ports")
_WHOLE = ("assumes", "sources", "one_of", "repeat", "wires")
_NAME_FIELDS: dict[type, tuple[str, ...]] = {
    Setting: ("name",),
    Fault: ("name",),
    Stream: ("name",),
    Input: ("percent_of",),
    ByChoice: ("setting",),
    Repeat: ("letter", "over"),
    Check: ("at", "gain", "time_constant", "after", "given"),
    UnitText: ("port",),
    Use: ("tag", "values"),
    Wire: ("source", "target"),
    Block: ("one_of",),
}
_WORD = re.compile(r"(?<![\w.])[A-Za-z_]\w*")


# ---------------------------------------------------------------- laying one block over another
@dataclass(frozen=True, slots=True)
class Own:
    """What a file says itself: its block, its sections, and the entries that it takes out (section -> key -> place)."""

    block: Block
    sections: frozenset[str]
    taken_out: dict[str, dict[Key, Where]]


def laid_over(base: Block, own: Own, problems: Problems) -> Block:
    """`own` over `base`, entry by entry; lists without names are replaced as a whole."""
    block = own.block
    changes: dict[str, Any] = {}
    for section in _KEYED:
        under, over = getattr(base, section), getattr(block, section)
        merged = {one.key: one for one in under} | {one.key: one for one in over}
        changes[section] = tuple(_without(merged, own.taken_out.get(section, {}), section, problems).values())
    for section in _NAMED:
        merged = getattr(base, section) | getattr(block, section)
        out = {key.name: where for key, where in own.taken_out.get(section, {}).items()}
        changes[section] = _without(merged, out, section, problems)
    for section in _WHOLE:
        changes[section] = getattr(block if section in own.sections else base, section)
    checks = block.checks if "check" in own.sections else base.checks
    return replace(block, about=block.about or base.about, checks=checks, **changes)


def _without(merged: dict[T, Any], out: Mapping[T, Where], section: str, problems: Problems) -> dict[T, Any]:
    for one, where in out.items():
        if one not in merged:
            text, known = shown(one), [shown(key) for key in merged]
            problems.add(f"there is no '{text}' in {section} to take out", where, nearest(text, known, "there are"))
    return {one: entry for one, entry in merged.items() if one not in out}


def shown(one: object) -> str:
    """A key as people write it."""
    if not isinstance(one, Key):
        return str(one)
    if one.index is None:
        return one.name
    base, offset = one.index.base, one.index.offset
    inside = str(offset) if base is None else base + (f"{offset:+d}" if offset else "")
    return f"{one.name}[{inside}]"


# ---------------------------------------------------------------- renaming
def renamed(base: Block, node: Node) -> Block:
    """The block with whole names changed in names and formulas, not in units. Raises `InputError`."""
    problems = Problems()
    known, choices = _names_of(base), {choice: one.name for one in base.settings.values() for choice in one.choices}
    changed: dict[str, str] = {}
    for entry in node:
        with problems.collecting():
            old, new = name(entry.key), new_name(entry.value)
            if old not in known:
                what = f"there is no name '{old}' in '{base.name}'"
                raise fail(what, entry.key.where, nearest(old, known, "its names"))
            if new in known and new not in node.entries:
                raise fail(f"'{new}' is a name in '{base.name}' already", entry.value.where, "choose another name")
            if old in choices:
                hint = f"it is also a choice of '{choices[old]}'"
                raise fail(f"'{old}' cannot be renamed", entry.key.where, hint)
            changed[old] = new
    doubled = [new for new in changed.values() if list(changed.values()).count(new) > 1]
    if doubled:
        problems.add(f"two names become '{doubled[0]}'", node.where)
    problems.raise_if_any()
    renamed_block = _Renaming(changed).apply(base)
    assert isinstance(renamed_block, Block)
    return renamed_block


def _names_of(block: Block) -> set[str]:
    """All names that a block declares."""
    keyed = {one.key.name for section in _KEYED for one in getattr(block, section)}
    named = {name for section in _NAMED for name in getattr(block, section)}
    carried = {one.name for stream in block.streams.values() for pair in stream.carries for one in pair}
    return keyed | named | carried | ({block.repeat.letter} if block.repeat else set())


class _Renaming:
    """Changes names wherever they stand in a block."""

    def __init__(self, changed: Mapping[str, str]) -> None:
        self.changed = changed

    def apply(self, item: Any) -> Any:
        """The item with its names changed, and those of all it is made of."""
        match item:
            case Where() | str() | None:
                return item
            case Formula():
                return replace(item, tree=self.tree(item.tree), text=self.text(item.text))
            case Balance():
                left, right = self.tree(item.left), self.tree(item.right)
                return replace(item, key=self.key(item.key), left=left, right=right, text=self.text(item.text))
            case Key():
                return self.key(item)
            case Word():
                return replace(item, text=self.name(item.text))
            case tuple():
                return tuple(self.apply(one) for one in item)
            case dict():
                return {key: self.apply(one) for key, one in item.items()}
        return self.parts(item) if is_dataclass(item) else item

    def parts(self, item: Any) -> Any:
        """A dataclass with every field changed; those that hold names are named in a table."""
        names = _NAME_FIELDS.get(type(item), ())
        changes = {
            one.name: self.names(getattr(item, one.name)) if one.name in names else self.apply(getattr(item, one.name))
            for one in fields(item)
        }
        if isinstance(item, UnitText):
            changes["text"] = self.text(item.text) if item.kind in ("like", "change", "quotient") else item.text
        if isinstance(item, Block):
            changes |= {section: self.keys(changes[section]) for section in _NAMED}
        return replace(item, **changes)

    def names(self, item: Any) -> Any:
        """Names, alone or in lists, or as keys."""
        if isinstance(item, str):
            return self.name(item)
        if isinstance(item, tuple):
            return tuple(self.names(one) for one in item)
        if isinstance(item, dict):
            return self.keys(self.apply(item))
        return self.apply(item)

    def keys(self, item: dict[str, T]) -> dict[str, T]:
        """The same entries under changed names."""
        return {self.name(key): one for key, one in item.items()}

    def name(self, text: str) -> str:
        """A name, also one with dots or an index behind it."""
        head = re.match(r"[^.\[]*", text)
        first = head[0] if head else text
        return self.changed.get(first, first) + text[len(first) :]

    def key(self, key: Key) -> Key:
        return Key(self.name(key.name), self.index(key.index))

    def index(self, index: Index | None) -> Index | None:
        if index is None or index.base is None:
            return index
        return replace(index, base=self.changed.get(index.base, index.base))

    def tree(self, tree: Expression) -> Expression:
        return transform(tree, self.node)

    def node(self, node: Expression) -> Expression:
        if not isinstance(node, Name):
            return node
        return replace(node, name=self.name(node.name), index=self.index(node.index))

    def text(self, text: str) -> str:
        """The text of a formula; `dX/dt` follows its state."""
        return _WORD.sub(lambda match: self.word(match, text), text)

    def word(self, match: re.Match[str], text: str) -> str:
        word, rest = match[0], text[match.end() :].lstrip()
        if word in FUNCTIONS and rest.startswith("("):
            return word
        if word in self.changed:
            return self.changed[word]
        if word[0] == "d" and word[1:] in self.changed and re.match(r"(\[[^\]]*\])?\s*/\s*dt\b", rest):
            return "d" + self.changed[word[1:]]
        return word

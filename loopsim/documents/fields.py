"""Typed reading of nodes: sentences, names, yes/no, whole numbers, lists, and the keys of a shape."""

from __future__ import annotations

import re
from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import TypeVar

from loopsim.documents.nodes import Entry, Mapping, Node, Scalar, Sequence
from loopsim.documents.shapes import Shape
from loopsim.documents.source import missing
from loopsim.errors import InputError, Problems, Where, fail, nearest

T = TypeVar("T")

_YES = {"yes": True, "true": True, "on": True, "no": False, "false": False, "off": False}
_MISREAD = frozenset({*_YES, "null", "~"})
_TAG = re.compile(r"[A-Za-z][\w-]*", re.ASCII)
_ADDRESS = re.compile(r"[A-Za-z][\w-]*(\.[\w-]+)*", re.ASCII)
_MOST_DIGITS = 18


def scalar(node: Node, wanted: str) -> Scalar:
    """The node as a single text that is not empty."""
    if not isinstance(node, Scalar):
        what = "a list" if isinstance(node, Sequence) else "a mapping of keys"
        raise fail(
            f"{what} stands where {wanted} is wanted", node.where, "write a single text, in quotes if it has commas"
        )
    if not node.text:
        raise fail(f"nothing stands where {wanted} is wanted", node.where, "write it here, or take the key out")
    return node


def sentence(node: Node) -> str:
    """Free text."""
    return scalar(node, "a sentence").text


def sentences(node: Node) -> tuple[str, ...]:
    """A list of free texts."""
    return tuple(sentence(item) for item in items(node, "sentences"))


def items(node: Node, wanted: str) -> tuple[Node, ...]:
    """The items of a list; nothing written is an empty list."""
    if isinstance(node, Sequence):
        return node.items
    if isinstance(node, Scalar) and node.empty:
        return ()
    hint = f"write [{node.text}]" if isinstance(node, Scalar) else "write each on a line of its own, after '- '"
    raise fail(f"a list is wanted for {wanted}", node.where, hint)


def mapping(node: Node, wanted: str, hint: str = "") -> Mapping:
    """The node as a mapping; nothing written is an empty mapping."""
    if isinstance(node, Mapping):
        return node
    if isinstance(node, Scalar) and node.empty:
        return Mapping({}, node.where)
    raise fail(f"a mapping of keys is wanted for {wanted}", node.where, hint or "write key: value, or {key: value}")


def name(node: Node, wanted: str = "a name") -> str:
    """A name as it stands; words that YAML readers take for yes/no or nothing are refused without quotes."""
    found = scalar(node, wanted)
    if found.plain and found.text.lower() in _MISREAD:
        hint = f'choose another name, or write it in quotes: "{found.text}"'
        raise fail(f"'{found.text}' is read as yes, no or nothing by other YAML readers", found.where, hint)
    return found.text


def tag(node: Node, wanted: str = "a tag") -> str:
    """The name of a block in a plant, of a plant, a strategy, a point: letters, digits, `_`, `-`."""
    found = name(node, wanted)
    if not _TAG.fullmatch(found):
        hint = "it starts with a letter; letters, digits, _ and - follow"
        raise fail(f"'{found}' cannot be {wanted}", node.where, hint)
    return found


def address(node: Node, wanted: str = "a signal") -> str:
    """`TAG.name`, deeper with more dots, or a bare name."""
    found = name(node, wanted)
    check_address(found, node.where, wanted)
    return found


def check_address(text: str, where: Where, wanted: str = "a signal") -> None:
    """Raise `InputError` unless the text is `TAG.name`, deeper with more dots, or a bare name."""
    if _ADDRESS.fullmatch(text):
        return
    indexed = re.fullmatch(r"(.+)\[(\w+)\]", text)
    hint = f"write {indexed[1]}.{indexed[2]}" if indexed else "write TAG.name, as in tank.T or TIC-101.sp"
    raise fail(f"'{text}' cannot be {wanted}", where, hint)


def beside(node: Node, folder: Path) -> str:
    """The name of a file in `folder`, which must be there."""
    text = scalar(node, "the name of a file").text
    try:
        there = (folder / text).is_file()
    except (OSError, ValueError):
        there = False
    if not there:
        raise missing(folder / text, node.where)
    return text


def yes_no(node: Node) -> bool:
    """yes, true, on; no, false, off."""
    found = scalar(node, "yes or no")
    if found.text.lower() not in _YES:
        raise fail(f"'{found.text}' is neither yes nor no", found.where, "write yes or no")
    return _YES[found.text.lower()]


def whole(node: Node) -> int:
    """A whole number that is not negative."""
    found = scalar(node, "a whole number")
    if not re.fullmatch(r"\d+", found.text, re.ASCII):
        raise fail(f"'{found.text}' is not a whole number", found.where, "write digits only, such as 7")
    if len(found.text) > 1 and found.text[0] == "0":
        raise leading_zero(found.text, found.where)
    if len(found.text) > _MOST_DIGITS:
        raise fail(f"'{found.text}' is too large", found.where, f"at most {_MOST_DIGITS} digits")
    return int(found.text)


def leading_zero(text: str, where: Where) -> InputError:
    """The error for `010`, which some YAML readers take for 8."""
    cure = re.sub(r"^([+-]?)0+(?=\d)", r"\1", text)
    return fail(f"'{text}' starts with a zero", where, f"some readers take it for an octal number; write {cure}")


class Fields:
    """The keys of one mapping that has a shape. A wrong value is noted in `problems` and read as None."""

    def __init__(self, node: Node, shape: Shape, what: str, problems: Problems, at: Where | None = None) -> None:
        """Note unknown and missing keys. `what` names the mapping in messages; `at` is its place if not its own."""
        keys = shape.names()
        hint = f"write {{{keys[0]}: …}}" if shape.more else "keys: " + ", ".join(keys[:8])
        self.node = mapping(node, what, hint)
        self.where = at or self.node.where
        self.problems = problems
        self.others: list[Entry] = []
        for entry in self.node:
            if entry.key.text in keys:
                continue
            if shape.more is None:
                hint = nearest(entry.key.text, keys)
                problems.add(f"'{entry.key.text}' is not a key of {what}", entry.key.where, hint)
            else:
                self.others.append(entry)
        for key in shape.keys:
            if key.needed and self.node.get(key.name) is None:
                problems.add(f"'{key.name}' is missing from {what}", self.where, f"{key.name}: {key.about}")

    def __contains__(self, key: str) -> bool:
        return key in self.node.entries

    def place(self, key: str) -> Where:
        """Where a key stands; the mapping itself when it is absent."""
        entry = self.node.entries.get(key)
        return entry.key.where if entry else self.where

    def read(self, key: str, reader: Callable[[Node], T]) -> T | None:
        """What a key holds, read by `reader`; None when it is absent or wrong (then noted)."""
        node = self.node.get(key)
        return None if node is None else self.attempt(partial(reader, node))

    def attempt(self, reading: Callable[[], T]) -> T | None:
        """The result of a reading; None when it fails (then noted)."""
        with self.problems.collecting():
            return reading()
        return None

    def text(self, key: str) -> str:
        """A sentence, or the empty text."""
        return self.read(key, sentence) or ""

    def yes(self, key: str) -> bool:
        """yes/no; absent is no."""
        return bool(self.read(key, yes_no))

    def every(self, key: str, reader: Callable[[Node], T | None]) -> tuple[T, ...]:
        """The items of a list, those that are wrong left out (then noted)."""
        nodes = self.read(key, lambda node: items(node, f"'{key}'")) or ()
        read = (self.attempt(partial(reader, node)) for node in nodes)
        return tuple(one for one in read if one is not None)

    def named(self, key: str, reader: Callable[[Entry], tuple[str, T]]) -> dict[str, T]:
        """The entries of a mapping by name, those that are wrong left out (then noted)."""
        node = self.read(key, lambda node: mapping(node, f"'{key}'"))
        read = (self.attempt(partial(reader, entry)) for entry in node or ())
        return dict(pair for pair in read if pair is not None)

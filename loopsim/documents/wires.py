"""Wires `a -> b`, and tagged blocks with the values given to them."""

from __future__ import annotations

import re
from collections.abc import Callable

from loopsim.documents.fields import Fields, check_address, name, scalar
from loopsim.documents.nodes import Entry, Node
from loopsim.documents.shapes import USE
from loopsim.documents.types import Given, Use, Wire
from loopsim.errors import Problems, fail

_ARROWS = re.compile(r"\s*(<-+>?|<=+|-{2,}>|=+>|→|⟶|➔)\s*")


def wire(node: Node) -> Wire:
    """`source -> target`: what drives, and what is driven."""
    found = scalar(node, "a wire, a -> b")
    text, where = found.text, found.where
    ends = [end.strip() for end in text.split("->")]
    odd = _ARROWS.search(text)
    if odd:
        left, right = text[: odd.start()], text[odd.end() :]
        cure = f"{right} -> {left}" if odd[1].startswith("<") else f"{left} -> {right}"
        raise fail(f"'{odd[1]}' is not the arrow of a wire", where.shifted(odd.start(1)), f"write {cure}")
    if len(ends) == 1:
        raise fail(f"the wire '{text}' has no arrow", where, "write source -> target, as in tank.T -> TT-101.T")
    if len(ends) > 2:
        raise fail(f"'{text}' is more than one wire", where, f"write {ends[0]} -> {ends[1]} and {ends[1]} -> {ends[2]}")
    for end, side in zip(ends, ("source", "target"), strict=True):
        if not end:
            raise fail(f"the wire '{text}' has no {side}", where, "write source -> target, as in tank.T -> TT-101.T")
        check_address(end, where.shifted(text.index(end)), "the end of a wire")
    return Wire(ends[0], ends[1], where)


def use(tag: str, entry: Entry, value: Callable[[Node], Given], problems: Problems) -> Use | None:
    """`TAG: {use: block, parameter: value, …}`; None when the block is not named (then noted)."""
    fields = Fields(entry.value, USE, f"'{tag}'", problems, entry.key.where)
    block = fields.read("use", lambda node: name(node, "the name of a block"))
    values: dict[str, Given] = {}
    for other in fields.others:
        with problems.collecting():
            check_address(other.key.text, other.key.where, "the name of a value")
            values[other.key.text] = value(other.value)
    return Use(tag, block, values, entry.key.where) if block else None

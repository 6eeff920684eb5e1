"""Events of a scenario: what happens, at a time or on a condition."""

from __future__ import annotations

import re
from pathlib import Path

from loopsim.documents.fields import Fields, address, beside, check_address, mapping, scalar, sentence, tag
from loopsim.documents.nodes import Node, Scalar
from loopsim.documents.shapes import EVENTS
from loopsim.documents.types import Condition, Event, Given, Quantity, Value, Word
from loopsim.documents.values import (
    duration,
    given,
    looks_like_number,
    number,
    plain_value,
    positive_duration,
    quantity,
    quantity_from,
    unit,
    word,
)
from loopsim.errors import Problems, fail, nearest

_CONDITION = re.compile(r"(\S+)\s+(below|above|is)\s+(\S.*)")
_HINT = "write tank.h below 0.2 m, tank.h above 1 m, or pump.running is on"
_SIZES = {"step": ("to", "by", "times"), "ramp": ("to", "by"), "pulse": ("to", "by")}


def event(node: Node, folder: Path, problems: Problems) -> Event:
    """One event; its kind is the key that names what it acts on. What is wrong is noted, and it is then of no use.

    `folder` is where the files that it names are.
    """
    tree = mapping(node, "an event", "write {at: 20 min, step: feed_q, by: 30 %}")
    kinds = [key for key in EVENTS if key in tree.entries]
    if len(kinds) != 1:
        raise fail(_kind_is_unclear(kinds, list(tree.entries)), tree.where, "kinds of event: " + ", ".join(EVENTS))
    kind = kinds[0]
    fields = Fields(tree, EVENTS[kind], f"a {kind} event", problems)
    _check_sizes(fields, kind)
    target = fields.read(kind, tag if kind in ("mode", "fault") else address)
    condition = _when(fields)
    return Event(
        kind=kind,
        target=target or "",
        where=tree.where,
        at=fields.read("at", duration),
        when=condition,
        to=fields.read("to", _mode if kind == "mode" else quantity if kind == "ramp" else plain_value),
        by=fields.read("by", quantity),
        times=fields.read("times", number),
        over=fields.read("over", positive_duration),
        lasts=fields.read("lasts", positive_duration),
        period=fields.read("period", positive_duration),
        file=fields.read("file", lambda node: beside(node, folder)) or "",
        column=fields.read("column", sentence) or "",
        unit=fields.read("unit", unit),
        fault=fields.read("kind", lambda node: tag(node, "a fault")) or "",
        size=fields.read("size", quantity),
        sets=_sets(fields),
    )


def _kind_is_unclear(kinds: list[str], keys: list[str]) -> str:
    if kinds:
        return f"an event is of one kind; this one is {' and '.join(kinds)}"
    guess = next((hint for key in keys if (hint := nearest(key, EVENTS, "")).startswith("did you mean")), "")
    return "this event does not say what happens" + (f"; {guess}" if guess else "")


def _check_sizes(fields: Fields, kind: str) -> None:
    sizes = _SIZES.get(kind, ())
    found = [size for size in sizes if size in fields]
    if sizes and len(found) != 1:
        what = "has no size" if not found else f"has {' and '.join(found)}"
        hint = "write one of " + ", ".join(f"{size}:" for size in sizes)
        fields.problems.add(f"this {kind} {what}", fields.where, hint)


def _mode(node: Node) -> Value:
    return Word(tag(node, "a mode"), node.where)


def _when(fields: Fields) -> Condition | None:
    """The condition an event waits for; an event has a time or a condition."""
    timed, waiting = "at" in fields, "when" in fields
    if timed == waiting:
        what = "both a time and a condition" if timed else "neither a time nor a condition"
        fields.problems.add(f"this event has {what}", fields.where, "write at: 20 min, or when: tank.h below 0.2 m")
    for key in ("holds", "once"):
        if key in fields and not waiting:
            fields.problems.add(f"'{key}' needs a condition", fields.place(key), "it goes with when:")
    holds, once = fields.read("holds", duration), fields.yes("once")
    return fields.read("when", lambda node: _condition(scalar(node, "a condition"), holds, once))


def _condition(found: Scalar, holds: Quantity | None, once: bool) -> Condition:
    match = _CONDITION.fullmatch(found.text)
    if not match:
        raise fail(f"'{found.text}' is not a condition", found.where, _HINT)
    signal, relation, text = match[1], match[2], match[3]
    check_address(signal, found.where)
    where = found.where.shifted(match.start(3))
    value: Quantity | Word
    if relation == "is" and not looks_like_number(text):
        value = word(Scalar(text, found.plain, found.source, found.line, found.column + match.start(3)))
    elif not looks_like_number(text):
        raise fail(f"'{text}' is not a number with its unit", where, _HINT)
    else:
        value = quantity_from(text, where)
    if relation == "is" and isinstance(value, Quantity) and value.unit is not None:
        raise fail(f"a signal is hardly ever exactly '{text}'", where, _HINT)
    return Condition(signal, relation, value, holds, once, found.where)


def _sets(fields: Fields) -> dict[str, Given]:
    """Memories that are set at the same instant."""
    values: dict[str, Given] = {}
    for entry in fields.others:
        with fields.problems.collecting():
            values[address(entry.key, "the name of a memory")] = given(entry.value)
    return values

"""Plant and strategy files."""

from __future__ import annotations

from loopsim.documents.fields import Fields, address, mapping, name, sentence, tag
from loopsim.documents.nodes import Entry, Mapping, Node
from loopsim.documents.shapes import KINDS, LIQUID
from loopsim.documents.types import Diagram, Given, Liquid, Quantity, Use
from loopsim.documents.values import given, quantity, unit
from loopsim.documents.wires import use, wire
from loopsim.errors import Problems, fail
from loopsim.language.units import Unit, parse_unit


def diagram_from(tree: Mapping, problems: Problems) -> Diagram:
    """The plant or strategy that a tree describes. What is wrong is noted in `problems`, and it is then of no use."""
    kind = next(iter(tree.entries))
    fields = Fields(tree, KINDS[kind], f"a {kind}", problems)
    return Diagram(
        kind=kind,
        name=fields.read(kind, lambda node: tag(node, "a name")) or "",
        where=tree.entries[kind].value.where,
        about=fields.read("about", sentence) or "",
        liquid=fields.read("liquid", lambda node: _liquid(node, problems)),
        air_pressure=fields.read("air_pressure", _air_pressure),
        show=_show(fields),
        boundary=fields.named("boundary", lambda entry: (tag(entry.key, "a name"), given(entry.value))),
        blocks=_uses(fields, problems),
        wires=fields.every("wires", wire),
        points=fields.named("points", lambda entry: (tag(entry.key, "a name"), _point(entry, problems))),
        cut=fields.every("cut", wire),
        set=fields.named("set", _value),
    )


def _liquid(node: Node, problems: Problems) -> Liquid | None:
    fields = Fields(node, LIQUID, "the liquid", problems)
    liquid, at = fields.read("is", name), fields.read("at", _temperature)
    return Liquid(liquid, at, node.where) if liquid and at else None


def _temperature(node: Node) -> Quantity:
    return _of_kind(quantity(node), "degC", "a temperature", "write a temperature, such as 60 degC")


def _air_pressure(node: Node) -> Quantity:
    hint = "write an absolute pressure, such as 1.013 bar(a)"
    found = _of_kind(quantity(node), "bar(a)", "an absolute pressure", hint)
    if found.unit is None or not found.unit.point or found.unit.offset != 0 or found.value <= 0:
        raise fail(f"'{found.text}' is not an absolute pressure", found.where, hint)
    return found


def _of_kind(found: Quantity, example: str, what: str, hint: str) -> Quantity:
    if found.unit is None or found.unit.dimension != parse_unit(example).dimension:
        raise fail(f"'{found.text}' is not {what}", found.where, hint)
    return found


def _show(fields: Fields) -> dict[str, Unit]:
    """Units for people; one for each dimension, points and differences apart."""
    seen: dict[object, str] = {}

    def one(entry: Entry) -> tuple[str, Unit]:
        shown = unit(entry.value)
        other = seen.setdefault((shown.dimension, shown.point), entry.key.text)
        if other != entry.key.text:
            hint = f"'{other}' names one already; keep one of them"
            raise fail(f"'{entry.key.text}' is a second unit for the same dimension", entry.value.where, hint)
        return name(entry.key), shown

    return fields.named("show", one)


def _uses(fields: Fields, problems: Problems) -> dict[str, Use]:
    def one(entry: Entry) -> tuple[str, Use | None]:
        found = tag(entry.key)
        return found, use(found, entry, given, problems)

    return {found: made for found, made in fields.named("blocks", one).items() if made}


def _value(entry: Entry) -> tuple[str, Given]:
    return address(entry.key, "the name of a value"), given(entry.value)


def _point(entry: Entry, problems: Problems) -> dict[str, Given]:
    """The values of an operating point; all that are wrong are noted."""
    values: dict[str, Given] = {}
    for one in mapping(entry.value, f"the point '{entry.key.text}'", "write {feed_T: 6 degC, feed_q: 4.5 m^3/h}"):
        with problems.collecting():
            key, value = _value(one)
            values[key] = value
    return values

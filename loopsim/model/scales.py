"""The unit of every name of every instance: `any`, `like` and `change of` resolved along the wires."""

from __future__ import annotations

from collections.abc import Iterable

from loopsim.documents.types import (
    ByChoice,
    Held,
    Input,
    Output,
    PairValue,
    Parameter,
    Quantity,
    UnitSpec,
    UnitText,
    Unknown,
    Value,
    Word,
)
from loopsim.errors import Problems
from loopsim.language.dimensions import Dimension
from loopsim.language.parse import parse_key
from loopsim.language.tree import Name
from loopsim.language.units import Unit, difference_of, to_si
from loopsim.model.elements import Elements
from loopsim.model.layout import Layout
from loopsim.model.wiring import Wiring

ON_OFF = Unit("on/off", 1.0, 0.0, Dimension())
COUNT = Unit("count", 1.0, 0.0, Dimension())
TRUE_WORDS = ("on", "yes", "true")
FALSE_WORDS = ("off", "no", "false")


class Scales:
    """Resolves units on demand; `choices` gives the setting in force for `{by: setting}` units."""

    def __init__(
        self, layout: Layout, elements: dict[str, Elements], wiring: Wiring, choices: dict[str, dict[str, str]]
    ) -> None:
        self.layout, self.elements, self.wiring, self.choices = layout, elements, wiring, choices
        self._known: dict[str, Unit | None] = {}
        self._specs = {tag: _specs(layout, elements, tag) for tag in layout.instances}

    def of(self, flat: str) -> Unit | None:
        """The unit of a boundary value or of `TAG.element`; None where nothing tells it."""
        if flat not in self._known:
            self._known[flat] = None
            self._known[flat] = self._resolve(flat)
        return self._known[flat]

    def _resolve(self, flat: str) -> Unit | None:
        if flat in self.layout.boundary:
            return _unit_of_value(self.layout.boundary[flat].value)
        for tag in _tags(flat):
            if tag in self._specs:
                element = flat[len(tag) + 1 :]
                found = self._specs[tag].get(element)
                return self.resolve(found[0], tag, element, found[1]) if found else None
        return None

    def resolve(self, spec: UnitSpec, tag: str, element: str, index: str = "") -> Unit | None:
        """The unit that a `unit:` text means for one element of an instance."""
        if isinstance(spec, ByChoice):
            option = spec.options[self.choices[tag][spec.setting]]
            assert isinstance(option, UnitText | ByChoice)
            return self.resolve(option, tag, element, index)
        match spec.kind:
            case "fixed":
                return spec.unit
            case "on_off":
                return ON_OFF
            case "count":
                return COUNT
            case "like":
                return self._port(spec.port, tag, index)
            case "change":
                unit = self._port(spec.port, tag, index)
                return difference_of(unit) if unit else None
            case "quotient":
                return self._quotient(spec, tag, index)
            case "any":
                return self._from_outside(tag, element)
        return None

    def _port(self, port: str, tag: str, index: str) -> Unit | None:
        name, position = parse_key(port)
        return self.of(f"{tag}.{self.elements[tag].name(Name(name, position), index)}")

    def _quotient(self, spec: UnitText, tag: str, index: str) -> Unit | None:
        assert spec.top is not None and spec.bottom is not None
        top, bottom = self.resolve(spec.top, tag, "", index), self.resolve(spec.bottom, tag, "", index)
        if top is None or bottom is None:
            return None
        top, bottom = difference_of(top), difference_of(bottom)
        factor = top.factor / (bottom.factor * spec.scale)
        below = bottom.text if spec.scale == 1 else f"{spec.scale:g} {bottom.text}"
        text = f"{top.text}/({below})" if any(sign in below for sign in "*/ ") else f"{top.text}/{below}"
        return Unit(text, factor, 0.0, top.dimension.divide(bottom.dimension))

    def _from_outside(self, tag: str, element: str) -> Unit | None:
        driver = self.wiring.drivers.get(f"{tag}.{element}")
        if driver is not None:
            return self.of(driver.source)
        given = self.layout.instances[tag].values.get(element)
        if given is not None:
            return _unit_of_value(given.value)
        port = self.wiring.ports.get(f"{tag}.{element}")
        default = getattr(port.entry, "default", None) if port else None
        return default.unit if isinstance(default, Quantity) else None


def _tags(flat: str) -> Iterable[str]:
    cut = len(flat)
    while (cut := flat.rfind(".", 0, cut)) > 0:
        yield flat[:cut]


def _specs(layout: Layout, elements: dict[str, Elements], tag: str) -> dict[str, tuple[UnitSpec, str]]:
    """Element name -> its `unit:` and the index it stands for."""
    block = layout.instances[tag].block
    found: dict[str, tuple[UnitSpec, str]] = {}
    groups = (block.outputs, block.parameters, block.solve, block.memory, block.states, block.inputs)
    for group in groups:
        entries: tuple[Output | Parameter | Unknown | Held | Input, ...] = group
        for entry in sorted(entries, key=lambda one: not elements[tag].generic(one.key)):
            for element in elements[tag].of(entry.key):
                index = element.rpartition(".")[2] if entry.key.index is not None else ""
                found[element] = (entry.unit, index)
    return found


def _unit_of_value(value: Value) -> Unit | None:
    if isinstance(value, Quantity):
        return value.unit or Unit("dimensionless", 1.0, 0.0, Dimension())
    if isinstance(value, PairValue) and isinstance(value.low, Quantity):
        return value.low.unit
    return ON_OFF if isinstance(value, Word) else None


def si_value(value: Quantity | Word, unit: Unit, problems: Problems, air_pressure: float, what: str) -> float:
    """A written value in SI, checked against the unit of the place where it stands; a problem and nan otherwise."""
    if isinstance(value, Word):
        if unit == ON_OFF and value.text in TRUE_WORDS + FALSE_WORDS:
            return float(value.text in TRUE_WORDS)
        problems.add(f"'{value.text}' where {what} wants {_wanted(unit)}", value.where, "write a number and its unit")
        return float("nan")
    if value.unit is None:
        return _bare(value, unit, problems, what)
    if value.unit.dimension != unit.dimension or unit == ON_OFF:
        problems.add(
            f"{value.text} where {what} wants {_wanted(unit)}",
            value.where,
            f"write it in {unit.text}" if unit != ON_OFF else "write on or off",
        )
        return float("nan")
    if value.unit.point != unit.point:
        problems.add(f"{value.text} where {what} wants {_wanted(unit)}", value.where, _point_hint(value.unit, unit))
        return float("nan")
    return to_si(value.value, value.unit, air_pressure)


def _bare(value: Quantity, unit: Unit, problems: Problems, what: str) -> float:
    if unit in (COUNT,) or unit.text == "dimensionless":
        return value.value
    if value.value == 0 and not unit.point and unit != ON_OFF:
        return 0.0
    problems.add(
        f"the bare number {value.text} where {what} wants {_wanted(unit)}",
        value.where,
        "write on or off" if unit == ON_OFF else f"write the unit: {value.text} {unit.text}",
    )
    return float("nan")


def _wanted(unit: Unit) -> str:
    if unit == ON_OFF:
        return "on or off"
    kind = "a point on the scale of " if unit.point else ""
    return f"{kind}{unit.text}"


def _point_hint(found: Unit, wanted: Unit) -> str:
    if wanted.point:
        return f"{found.text} is a difference; write a point, in {wanted.text}"
    return f"{found.text} is a point on a scale; write a difference, in {wanted.text}"

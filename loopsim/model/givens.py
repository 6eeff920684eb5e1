"""Numbers that a plant gives to its blocks, put into slots: parameters, unwired inputs, settings, faults, boundary."""

from __future__ import annotations

import math

from loopsim.documents.types import (
    Block,
    ByChoice,
    Definition,
    Formula,
    Given,
    Held,
    Input,
    PairValue,
    Parameter,
    Quantity,
    TableValue,
    Value,
    Word,
)
from loopsim.errors import Problems, Where, nearest
from loopsim.language.evaluate import Table
from loopsim.language.tree import Expression, Name, Number, names_in
from loopsim.language.units import PERCENT, Unit, to_si
from loopsim.model.draft import Absent, Draft, namespace
from loopsim.model.elements import Elements
from loopsim.model.layout import Instance
from loopsim.model.liquids import property_of
from loopsim.model.scales import ON_OFF, si_value
from loopsim.model.translate import Translator, pair_parts
from loopsim.model.types import Slot


def boundary(draft: Draft) -> None:
    """A slot for each boundary value."""
    for name, given in draft.layout.boundary.items():
        unit = draft.unit(name, given.where)
        if not isinstance(given.value, Quantity | Word):
            draft.problems.add(f"the boundary value '{name}' is not a number with a unit", given.where)
            continue
        value = si_value(given.value, unit, draft.problems, draft.layout.air_pressure, f"'{name}'")
        _slot(draft, name, "boundary", value, unit, given.where, given.about)
        note_assumed(draft, name, given)


def note_assumed(draft: Draft, name: str, given: Given) -> None:
    """Keep the list of numbers that the plant marks as assumed."""
    if given.assumed:
        text = getattr(given.value, "text", "")
        draft.assumed.append(f"{name} = {text}")


def _slot(draft: Draft, name: str, kind: str, value: float, unit: Unit, where: Where, about: str = "") -> None:
    number = 1.0 if math.isnan(value) else value
    draft.slots[name] = Slot(name, kind, number, unit, where, about=about)


class Givens(Translator):
    """Reads the values of one instance."""

    def read_parameters(self) -> None:
        """Slots, tables and computed parameters; settings and faults."""
        for name, setting in self.block.settings.items():
            code = float(setting.choices.index(self.choices[name]))
            unit = Unit("setting", 1.0, 0.0, ON_OFF.dimension)
            self.draft.slots[self.flat(name)] = Slot(
                self.flat(name), "setting", code, unit, setting.where, setting.choices, setting.about
            )
        for parameter in sorted(self.block.parameters, key=lambda one: not self.elements.generic(one.key)):
            for element in self.elements.of(parameter.key):
                if parameter.names is None:
                    self._parameter_of(parameter, element)
        for fault in self.block.faults.values():
            if fault.name not in self.members or self.members[fault.name].kind == "fault":
                _slot(self.draft, self.flat(fault.name), "fault", 0.0, ON_OFF, fault.where, fault.about)
        self._check_one_of()

    def _parameter_of(self, parameter: Parameter, element: str) -> None:
        flat = self.flat(element)
        given = self.values.get(element, self.values.get(parameter.key.name))
        value: Value | Definition | None = given.value if given is not None else parameter.default
        if given is not None:
            note_assumed(self.draft, flat, given)
        liquid = property_of(self.draft.layout.liquid, element) if given is None else None
        if liquid is not None:
            unit = self.draft.unit(flat, parameter.where)
            assert self.draft.layout.liquid is not None
            _slot(self.draft, flat, "parameter", liquid, unit, self.draft.layout.liquid.where, parameter.about)
        elif value is None or (isinstance(value, Word) and value.text == "none"):
            self._left_out(parameter, flat)
        elif isinstance(value, TableValue):
            self._table(parameter, flat, value)
        elif isinstance(value, PairValue):
            for end, part in pair_parts(value):
                self._number(f"{flat}.{end}", flat, part, parameter.where, given is not None, parameter.about)
            self._check_rising(flat, value)
        elif parameter.pair and isinstance(value, Formula) and isinstance(value.tree, Name) and given is not None:
            for end in ("low", "high"):
                self._computed(f"{flat}.{end}", Name(f"{value.tree.name}.{end}"), value.where)
        else:
            self._number(flat, flat, value, parameter.where, given is not None, parameter.about)

    def _left_out(self, parameter: Parameter, flat: str) -> None:
        self.draft.absent.add(flat)
        if parameter.optional:
            return
        self.draft.broken.add(flat)
        self.draft.problems.add(
            f"'{self.tag}' ({self.block.name}) needs a value for '{parameter.key.name}'"
            + (f": {parameter.about}" if parameter.about else ""),
            self.where,
            "give it; a number that is not known yet may be written `{is: …, assumed: yes}`",
        )

    def _number(
        self, flat: str, unit_of: str, value: Value | Definition, where: Where, given: bool, about: str
    ) -> None:
        """One number: written ones go into a slot, formulas are computed from other parameters."""
        unit = self.draft.unit(unit_of, where)
        bare = isinstance(value, Formula) and isinstance(value.tree, Number)
        if isinstance(value, Quantity | Word) and not self._names_something(value):
            number = si_value(value, unit, self.draft.problems, self.draft.layout.air_pressure, f"'{flat}'")
            _slot(self.draft, flat, "parameter", number, unit, value.where, about)
            return
        if bare:
            assert isinstance(value, Formula) and isinstance(value.tree, Number)
            _slot(self.draft, flat, "parameter", value.tree.value, unit, value.where, about)
            return
        try:
            assert isinstance(value, Formula | ByChoice | Word)
            tree = value.tree if given and isinstance(value, Formula) else self.definition(value)
            if given:
                self._refuse_absent(tree)
            self._computed(flat, tree, getattr(value, "where", where))
        except Absent as absent:
            self.leave_out(flat, absent)

    def _computed(self, flat: str, tree: Expression, where: Where) -> None:
        """A number computed from others, which must not lead back to it."""
        pending, seen = list(names_in(tree)), set[str]()
        while pending:
            name = pending.pop()
            if name == flat:
                others = f", by way of {', '.join(sorted(seen))}" if seen else ""
                self.draft.problems.add(f"'{flat}' is given by itself{others}", where, "write a number and its unit")
                tree = Number(1.0)
                break
            if name in self.draft.assignments and name not in seen:
                seen.add(name)
                pending += names_in(self.draft.assignments[name].tree)
        self.draft.assign(flat, self.tag, tree, where)

    def leave_out(self, flat: str, cause: Absent) -> None:
        """Note that a name has no value here, and whether that is a mistake already told."""
        self.draft.absent.add(flat)
        if cause.name in self.draft.broken:
            self.draft.broken.add(flat)

    def _names_something(self, value: Quantity | Word) -> bool:
        return isinstance(value, Word) and value.text in self.members

    def _refuse_absent(self, tree: Expression) -> None:
        if isinstance(tree, Name) and tree.name in self.draft.absent:
            raise Absent(tree.name)

    def _table(self, parameter: Parameter, flat: str, value: TableValue) -> None:
        if parameter.table is None:
            self.draft.problems.add(f"'{flat}' is a single value, not a curve", value.where)
            return
        columns = []
        for unit, points in zip(parameter.table, (value.x, value.y), strict=True):
            units = [one.unit or unit for one in points]
            columns.append(
                tuple(
                    to_si(one.value, own, self.draft.layout.air_pressure)
                    for one, own in zip(points, units, strict=True)
                )
            )
        if list(columns[0]) != sorted(set(columns[0])):
            self.draft.problems.add(f"the x values of '{flat}' do not rise", value.where, "sort the points by x")
        self.draft.tables[flat] = Table(columns[0], columns[1])

    def _check_rising(self, flat: str, value: PairValue) -> None:
        ends = [self.draft.static(Name(f"{flat}.{end}")) for end in ("low", "high")]
        if ends[0] is not None and ends[1] is not None and not ends[0] < ends[1]:
            self.draft.problems.add(f"'{flat}' must rise from its first value to its second", value.where)

    def _check_one_of(self) -> None:
        for group in self.block.one_of:
            given = [name for name in group if name in self.values]
            if len(given) != 1:
                names = " or ".join(f"'{name}'" for name in group)
                self.draft.problems.add(
                    f"'{self.tag}' wants exactly one of {names}; {len(given) or 'none'} "
                    + ("is given" if len(given) < 2 else "are given"),
                    self.where,
                )

    # ------------------------------------------------------------ inputs
    def read_inputs(self) -> None:
        """What drives each input: a wire, a value or a default."""
        for port in self.draft.wiring.ports.values():
            if port.tag == self.tag and isinstance(port.entry, Input):
                self._input(port.flat, port.element, port.entry, port.index)

    def _input(self, flat: str, element: str, entry: Input, index: str) -> None:
        driver = self.draft.wiring.drivers.get(flat)
        given = self.values.get(element, self.values.get(entry.key.name))
        if driver is not None:
            if driver.source in self.draft.absent:
                self._drop(flat, driver.source, driver.stream, entry)
                return
            self._wired(flat, driver.source, entry, driver.where)
        elif given is not None and isinstance(given.value, Quantity | Word):
            unit = self.draft.unit(flat, given.where)
            value = si_value(given.value, unit, self.draft.problems, self.draft.layout.air_pressure, f"'{flat}'")
            _slot(self.draft, flat, "input", value, unit, given.where, entry.about)
            note_assumed(self.draft, flat, given)
        elif isinstance(given, Given) and isinstance(given.value, Formula):
            self.draft.assign(flat, self.tag, given.value.tree, given.where)
        elif entry.default is not None:
            self._default(flat, entry, index)
        else:
            self._unconnected(flat, entry)

    def _drop(self, flat: str, source: str, stream: bool, entry: Input) -> None:
        """A driver that does not exist here: an optional input of a stream stays open, anything else is told."""
        if stream:
            del self.draft.wiring.drivers[flat]
            self._unconnected(flat, entry) if entry.default is None else self._default(flat, entry, "")
            return
        self.draft.absent.add(flat)
        if source in self.draft.broken:
            self.draft.broken.add(flat)
            return
        self.draft.problems.add(
            f"'{source}' has no value here, because an input that it needs is not wired",
            self.draft.wiring.drivers[flat].where,
            "wire that input first",
        )

    def _unconnected(self, flat: str, entry: Input) -> None:
        self.draft.absent.add(flat)
        if entry.optional:
            return
        self.draft.broken.add(flat)
        about = f": {entry.about}" if entry.about else ""
        self.draft.problems.add(
            f"nothing drives the input '{flat}'{about}",
            self.where,
            f"wire something to it (`… -> {flat}`), or give '{self.tag}' a value for it",
        )

    def _wired(self, flat: str, source: str, entry: Input, where: Where) -> None:
        unit, from_unit = self.draft.unit(flat, where), self.draft.unit(source, where)
        tree: Expression = Name(source)
        if entry.percent_of and from_unit.dimension == PERCENT.dimension != unit.dimension:
            tree = self.scaled(tree, entry.percent_of)
        else:
            self._check_units(flat, source, unit, from_unit, where)
        self.draft.assign(flat, self.tag, tree, where)

    def scaled(self, share: Expression, pair: str) -> Expression:
        """A share of a range (0 to 1) as a value on that range."""
        raise NotImplementedError

    def _check_units(self, flat: str, source: str, unit: Unit, from_unit: Unit, where: Where) -> None:
        if unit.dimension != from_unit.dimension or (unit == ON_OFF) != (from_unit == ON_OFF):
            self.draft.problems.add(
                f"'{source}' is in {from_unit.text} but '{flat}' wants {unit.text}",
                where,
                "put a block between that converts it, such as a transmitter with a range, or wire another port",
            )
        elif unit.point != from_unit.point:
            kinds = ["a point on a scale" if one.point else "a difference" for one in (from_unit, unit)]
            self.draft.problems.add(
                f"'{source}' is {kinds[0]} ({from_unit.text}) but '{flat}' wants {kinds[1]} ({unit.text})", where
            )

    def _default(self, flat: str, entry: Input, index: str) -> None:
        unit = self.draft.unit(flat, entry.where)
        default = entry.default
        assert default is not None
        if isinstance(default, Formula) and isinstance(default.tree, Number):
            _slot(self.draft, flat, "input", default.tree.value, unit, entry.where, entry.about)
        elif isinstance(default, Quantity | Word) and not self._names_something(default):
            value = si_value(default, unit, self.draft.problems, self.draft.layout.air_pressure, f"'{flat}'")
            _slot(self.draft, flat, "input", value, unit, entry.where, entry.about)
        else:
            self.draft.assign(flat, self.tag, self.definition(default, index), entry.where)


def check_keys(instance: Instance, elements: Elements, problems: Problems) -> None:
    """Tell values given under names that the block does not have."""
    known = known_keys(instance.block) | set(namespace(instance, elements))
    for key, given in instance.values.items():
        if key not in known:
            problems.add(
                f"'{instance.tag}' ({instance.block.name}) has no parameter, setting or input '{key}'",
                given.where,
                nearest(key, known, "it has"),
            )


def known_keys(block: Block) -> set[str]:
    """What a plant may give to a block: settings, parameters, inputs, and starts of states and memories."""
    entries: tuple[Parameter | Input | Held, ...] = (*block.parameters, *block.inputs, *block.states, *block.memory)
    return {entry.key.name for entry in entries} | set(block.settings)

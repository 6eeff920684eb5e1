"""Every formula and number of a block against the unit of what it defines, for all settings that units depend on."""

from __future__ import annotations

from itertools import product

from loopsim.documents.block_kinds import SWITCHED, Found, Kinds, Scale, Untold
from loopsim.documents.namespace import Member, Names, choices_in, column_of, entries_with_unit, shown
from loopsim.documents.types import (
    Balance,
    Block,
    Bounds,
    ByChoice,
    Definition,
    Formula,
    Held,
    Input,
    Key,
    Let,
    Output,
    PairValue,
    Parameter,
    Quantity,
    TableValue,
    UnitText,
    Unknown,
    Word,
)
from loopsim.errors import Problems, Where
from loopsim.language.dimensions import Dimension
from loopsim.language.kinds import BY_FACTOR, ON_OFF, SECOND, ZERO, Curve, Kind, OnOff, Words, describe, place, same
from loopsim.language.units import Unit, difference_of
from loopsim.language.write import shortened

MOST_COMBINATIONS = 256
Value = Definition | PairValue | TableValue | UnitText


def check_units(
    block: Block, names: Names, reached: frozenset[Key], circles: frozenset[str], problems: Problems
) -> None:
    """Note every formula and number whose unit does not fit.

    `reached`: single elements that must be of the kind of all; `circles`: names that go round in a circle.
    """
    settings = _unit_settings(block)
    options = [block.settings[name].choices for name in settings]
    if _count(options) > MOST_COMBINATIONS:
        what = f"the units depend on more than {MOST_COMBINATIONS} combinations of settings"
        problems.add(what, block.where, "make two blocks of it")
        return
    for chosen in product(*options):
        kinds = Kinds(names, dict(zip(settings, chosen, strict=True)), problems, circles)
        _Units(block, names, kinds).check(reached)
        if kinds.untold and not problems.found:
            problems.add("the unit of this formula cannot be told", kinds.untold[0], "give its names units")


def _unit_settings(block: Block) -> list[str]:
    found = {choice.setting for entry in entries_with_unit(block) for choice in choices_in(entry.unit)}
    return sorted(found & set(block.settings))


def _count(options: list[tuple[str, ...]]) -> int:
    count = 1
    for one in options:
        count = min(count * max(len(one), 1), MOST_COMBINATIONS + 1)
    return count


class _Units:
    """The checks under one choice of the settings that units depend on."""

    def __init__(self, block: Block, names: Names, kinds: Kinds) -> None:
        self.block, self.names, self.kinds, self.problems = block, names, kinds, kinds.problems

    def check(self, reached: frozenset[Key]) -> None:
        """All entries."""
        for member in self.names.members:
            self._member(member)
        for balance in self.block.balances:
            self._balance(balance)
        for name in self.names:
            generic = next((one for one in self.names.of(name) if self.names.generic(one.key)), None)
            for member in self.names.of(name):
                if generic is not None and member.key in reached:
                    self._element(generic, member)

    def _element(self, generic: Member, single: Member) -> None:
        """A single element that formulas reach as one of all is of the same kind as they are."""
        try:
            one, other = self.kinds.member(generic), self.kinds.member(single)
        except Untold:
            return
        if not same(one.kind, other.kind) or {one.point, other.point} == {True, False}:
            what = f"'{shown(generic.key)}' is {_told(one)} but '{shown(single.key)}' is {_told(other)}"
            self.problems.add(what, single.where, "formulas read both as elements of one name")

    # ------------------------------------------------------------ entries
    def _member(self, member: Member) -> None:
        entry = member.entry
        match entry:
            case Parameter() if entry.table is not None:
                self._table(entry)
            case Parameter() if entry.names is None:
                self._entry(member, entry.default, "default", entry.bounds)
                self._time(member, entry)
            case Input():
                self._entry(member, entry.default, "default", Bounds())
                self._answers(member, entry)
                self._percent(member, entry)
            case Held():
                self._entry(member, entry.start, "start", entry.bounds)
            case Unknown():
                self._entry(member, entry.start, "start", Bounds())
                self._entry(member, entry.between, "range", Bounds())
                self._balance(entry.equation)
            case Output():
                self._output(member, entry)
            case Let():
                self._assigned(member, entry)
            case Balance():
                self._balance(entry)

    def _entry(self, member: Member, value: Value | None, what: str, bounds: Bounds) -> None:
        scale = self._scale(member)
        if scale is None:
            return
        name = member.key.name
        if value is not None:
            self._fits(scale, value, f"the {what} of '{name}'")
        limits = {"above": bounds.above, "at_least": bounds.at_least, "below": bounds.below, "at_most": bounds.at_most}
        for relation, limit in limits.items():
            if limit is not None:
                self._fits(scale, limit, f"'{relation}' of '{name}'")

    def _scale(self, member: Member) -> Scale | None:
        try:
            return self.kinds.scale(member)
        except Untold:
            return None

    def _time(self, member: Member, entry: Parameter) -> None:
        """`scan` and `phase` are times where the block has a scan."""
        scale = self._scale(member)
        if self.block.scan and member.key.name in ("scan", "phase") and scale is not None and scale.kind != SECOND:
            what = f"'{member.key.name}' is {describe(scale.kind)}, a time is wanted: it says when the scan is executed"
            self.problems.add(what, entry.where, "write unit: s")

    def _percent(self, member: Member, entry: Input) -> None:
        """`percent_of` names a range in the input's own unit."""
        own = self._scale(member)
        for pair in self.names.of(entry.percent_of, "parameter"):
            span = self._scale(pair)
            if own is not None and span is not None and own.kind != span.kind:
                what = f"'{member.key.name}' is in {own.text} but its range '{pair.key.name}' is in {span.text}"
                self.problems.add(what, entry.where, "give both one unit")

    def _answers(self, member: Member, entry: Input) -> None:
        scale = self._scale(member)
        if entry.answers is None or scale is None:
            return
        name, switch = member.key.name, Scale(ON_OFF, "on/off")
        for wanted, answer, which in (
            (scale, entry.answers.takes, "takes"),
            (switch, entry.answers.up, "up"),
            (switch, entry.answers.down, "down"),
        ):
            if answer is not None:
                self._fits(wanted, answer, f"'{which}' of '{name}'")

    def _output(self, member: Member, entry: Output) -> None:
        self._entry(member, entry.value, "value", entry.bounds)
        scale = self._scale(member)
        if entry.value is not None or scale is None:
            return
        if repeated := self._repeated(member):
            try:
                found = self.kinds.member(repeated[0])
            except Untold:
                return
            what = f"the output '{member.key.name}'"
            self._compare(scale, found.kind, found.point, what, entry.where, "what it shows")

    def _repeated(self, member: Member) -> list[Member]:
        """What an output of that name shows, faults last."""
        found = [one for one in self.names.of(member.key.name) if one.section != "output" and one.key == member.key]
        return sorted(found, key=lambda one: one.section == "fault")

    def _assigned(self, member: Member, entry: Let) -> None:
        """A let or an entry of a scan; one with a memory has its unit."""
        memories = [one for one in self.names.of(member.key.name, "memory") if member.section in ("scan", "continuous")]
        scale = self._scale(memories[0]) if memories else None
        if scale is not None:
            self._fits(scale, entry.value, f"'{member.key.name}'")
            return
        found = self.kinds.of(entry.value)
        if found is not None and isinstance(found.kind, Words | Curve):
            hint = f"use {describe(found.kind)} where it is needed"
            self.problems.add(f"'{member.key.name}' is neither a quantity nor a condition", entry.where, hint)

    def _balance(self, balance: Balance) -> None:
        """Both sides of an equation."""
        sides = [self.kinds.of_tree(tree, balance.where) for tree in (balance.left, balance.right)]
        if sides[0] is None or sides[1] is None or same(sides[0].kind, sides[1].kind):
            return
        texts = [
            f"`{shortened(tree)}` is {describe(side.kind)}"
            for tree, side in zip((balance.left, balance.right), sides, strict=True)
            if side is not None
        ]
        where = column_of(balance.where, place(balance.right))
        self.problems.add(f"{texts[0]} but {texts[1]}: they cannot be equal", where, BY_FACTOR)

    def _table(self, parameter: Parameter) -> None:
        value = parameter.default
        if not isinstance(value, TableValue) or parameter.table is None:
            return
        for unit, points in zip(parameter.table, (value.x, value.y), strict=True):
            for point in points:
                if point.unit is not None and point.unit.dimension != unit.dimension:
                    what = f"{point.text} where {unit.text} is wanted"
                    self.problems.add(what, point.where, f"write it in {unit.text}")

    # ------------------------------------------------------------ values against a scale
    def _fits(self, scale: Scale, value: Value, what: str) -> None:
        """A number, word, formula, pair or choice against the scale of what it stands for."""
        match value:
            case Quantity():
                self._quantity(scale, value, what)
            case Word():
                if value.text not in SWITCHED or not isinstance(scale.kind, OnOff):
                    hint = "write on or off" if isinstance(scale.kind, OnOff) else f"write a number in {scale.text}"
                    self.problems.add(f"'{value.text}' where {what} is wanted", value.where, hint)
            case Formula():
                found = self.kinds.of_tree(value.tree, value.where)
                if found is not None:
                    self._compare(scale, found.kind, found.point, what, value.where, f"`{shortened(value.tree)}`")
            case PairValue():
                self._fits(scale, value.low, what)
                self._fits(scale, value.high, what)
            case ByChoice():
                self._chosen(scale, value, what)

    def _chosen(self, scale: Scale, value: ByChoice, what: str) -> None:
        for name, option in value.options.items():
            if self.kinds.choices.get(value.setting, name) == name:
                self._fits(scale, option, what)

    def _compare(self, scale: Scale, kind: Kind, point: bool | None, what: str, where: Where, given: str) -> None:
        if not isinstance(kind, Dimension | OnOff) and kind != ZERO:
            self.problems.add(f"{what} is {describe(scale.kind)}, not a choice or a curve", where)
        elif not same(scale.kind, kind):
            hint = BY_FACTOR if isinstance(kind, Dimension) and isinstance(scale.kind, Dimension) else ""
            self.problems.add(f"{what} is {describe(scale.kind)} but {given} is {describe(kind)}", where, hint)
        elif point is not None and scale.point is not None and point != scale.point:
            told = ("a difference", "a point on a scale")
            text = f"{what} is {told[scale.point]} ({scale.text}) but {given} is {told[point]}"
            self.problems.add(text, where, "differences are in K or bar, points in degC, bar(a) or bar(g)")
        elif kind == ZERO and scale.point:
            self._zero_point(scale, what, where)

    def _quantity(self, scale: Scale, value: Quantity, what: str) -> None:
        unit = value.unit
        if unit is None:
            self._bare(scale, value, what)
        elif not same(scale.kind, unit.dimension):
            hint = "write on or off" if isinstance(scale.kind, OnOff) else f"write it in {scale.text}"
            self.problems.add(f"{value.text} where {what} is in {scale.text}", value.where, hint)
        elif scale.point is not None and unit.point != scale.point:
            self.problems.add(f"{value.text} where {what} is in {scale.text}", value.where, _point_hint(unit, scale))

    def _bare(self, scale: Scale, value: Quantity, what: str) -> None:
        """A number without unit: 0 fits every dimension, others where there is none; `%` wants its sign."""
        if value.value == 0 and isinstance(scale.kind, Dimension):
            if scale.point:
                self._zero_point(scale, what, value.where)
        elif not scale.bare:
            switch = isinstance(scale.kind, OnOff)
            hint = "write on or off" if switch else f"write {value.text} {scale.text}"
            if isinstance(scale.kind, Dimension) and any(name.startswith("?") for name, _ in scale.kind.powers):
                hint = "write its unit"
            self.problems.add(f"the bare number {value.text} where {what} is in {scale.text}", value.where, hint)
        elif scale.whole and value.value != int(value.value):
            self.problems.add(f"{value.text} where {what} is a count", value.where, "write a whole number")

    def _zero_point(self, scale: Scale, what: str, where: Where) -> None:
        text = f"0 where {what} is a point on a scale ({scale.text})"
        self.problems.add(text, where, f"write 0 {scale.text}, in a formula as a let of its own")


def _told(found: Found) -> str:
    return f"{describe(found.kind)}{', a point on a scale' if found.point else ''}"


def _point_hint(unit: Unit, scale: Scale) -> str:
    if scale.point:
        return f"{unit.text} is a difference; write a point, in {scale.text}"
    return f"{unit.text} is a point on a scale; write a difference, in {difference_of(unit).text}"

"""What every name of a block is, under one choice of the settings that its units depend on."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from loopsim.documents.namespace import Member, Names, column_of, near
from loopsim.documents.types import (
    ByChoice,
    Definition,
    Fault,
    Formula,
    Held,
    Input,
    Let,
    Output,
    Parameter,
    Quantity,
    Setting,
    UnitSpec,
    UnitText,
    Unknown,
    Word,
)
from loopsim.errors import Problems, Where
from loopsim.language.dimensions import NONE, Dimension, unknown
from loopsim.language.functions import CONSTANTS
from loopsim.language.kinds import ON_OFF, ZERO, Curve, Kind, KindError, Words, describe, kind_of, same
from loopsim.language.parse import parse_key
from loopsim.language.points import is_point
from loopsim.language.tree import Call, Expression, Index, Name, Operation, transform
from loopsim.language.units import difference_of, parse_unit
from loopsim.language.write import write

SWITCHED = ("on", "yes", "true", "off", "no", "false")


class Untold(KindError):
    """A kind that cannot be told, because of a problem that is told already."""

    def __init__(self) -> None:
        super().__init__("cannot be told")


@dataclass(frozen=True, slots=True)
class Scale:
    """What an entry's `unit:` says: its kind, whether it is a point or a difference, how people read it.

    `point` is None where the wire decides; `bare`: a number alone is accepted; `whole`: a whole number is wanted.
    """

    kind: Kind
    text: str
    point: bool | None = None
    bare: bool = False
    whole: bool = False


@dataclass(frozen=True, slots=True)
class Found:
    """What a definition gives: its kind and whether it is a point on a scale."""

    kind: Kind
    point: bool | None = None


class Kinds:
    """Kinds of the names and formulas of a block; what is wrong is noted in `problems`, at its place, once."""

    def __init__(
        self, names: Names, choices: Mapping[str, str], problems: Problems, circles: frozenset[str] = frozenset()
    ) -> None:
        """`circles`: names whose formulas are known to go round in a circle."""
        self.names, self.choices, self.problems, self.circles = names, choices, problems, circles
        self._scales: dict[Member, Scale | None] = {}
        self._found: dict[Member, Found | None] = {}
        self._going: list[Member] = []
        self.untold: list[Where] = []  # formulas that could not be looked at, for a problem that is told elsewhere

    # ------------------------------------------------------------ names in formulas
    def kind(self, name: Name) -> Kind:
        """The kind of a name in a formula."""
        return self._named(name).kind

    def point(self, name: Name) -> bool | None:
        """Whether a name in a formula is a point on a scale; None also for a choice that stands beside its setting."""
        try:
            return self._named(name).point
        except Untold:
            return None

    def _named(self, name: Name) -> Found:
        stem, _, dotted = name.name.partition(".")
        if dotted in ("up", "down"):
            return Found(ON_OFF)
        if stem in CONSTANTS:
            return Found(parse_unit(CONSTANTS[stem][1]).dimension)
        member = self._member(stem, name, "output" if dotted == "takes" else "")
        return self.member(member, pair=dotted in ("low", "high"))

    def _member(self, stem: str, name: Name, section: str) -> Member:
        """The entry that says most about a name in a formula."""
        entries = self.names.of(stem, section)
        says = [one for one in entries if not (isinstance(one.entry, Output) and one.entry.value is None)]
        found = self._nearest(says, name.index) or self._nearest(entries, name.index)
        if not found:
            raise Untold
        return found[0]

    def _nearest(self, entries: list[Member], index: Index | None) -> list[Member]:
        """Entries that repeat or not as an index does: its own first, then that of all elements."""

        def order(one: Member) -> tuple[bool, bool, bool, bool]:
            own, generic = one.key.index == index, self.names.generic(one.key)
            return not own, not generic, one.section == "fault", not hasattr(one.entry, "unit")

        return sorted((one for one in entries if (one.key.index is None) == (index is None)), key=order)

    def member(self, member: Member, pair: bool = False) -> Found:
        """What an entry is. Raises `Untold`."""
        entry = member.entry
        if isinstance(entry, Setting):
            return Found(Words(entry.name, entry.choices))
        if isinstance(entry, Fault):
            return Found(ON_OFF)
        if isinstance(entry, Parameter) and entry.table is not None:
            x, y = entry.table
            return Found(Curve(x.dimension, y.dimension))
        if isinstance(entry, Parameter) and (entry.names is not None or entry.pair != pair):
            raise Untold
        if isinstance(entry, Parameter | Input | Held | Unknown | Output):
            scale = self.scale(member)
            return Found(scale.kind, scale.point)
        return self._derived(member)

    def _derived(self, member: Member) -> Found:
        """What a let or an entry of a scan is, from its formula."""
        if member in self._going:
            return self._first_element(member)
        if member not in self._found:
            self._going.append(member)
            self._found[member] = self.of(member.entry.value) if isinstance(member.entry, Let) else None
            self._going.pop()
        found = self._found[member]
        if found is None:
            raise Untold
        return found

    def _first_element(self, member: Member) -> Found:
        """What `x[i]` is that follows from `x[i-1]`: what the element is that it starts from, such as `x[0]`."""
        name = member.key.name
        others = [one for one in self.names.of(name, member.section) if one not in self._going]
        if others and member.key.index is not None:
            return self.member(others[0])
        if name not in self.circles:
            hint = f"give it a unit: memory: {name}: {{unit: …, start: …}}" if member.section == "scan" else ""
            self.problems.add(f"the unit of '{name}' cannot be told: its formula leads back to it", member.where, hint)
        raise Untold

    # ------------------------------------------------------------ units
    def scale(self, member: Member) -> Scale:
        """The scale of an entry that has a unit. Raises `Untold`."""
        if member not in self._scales:
            self._scales[member] = None
            entry = member.entry
            assert isinstance(entry, Parameter | Input | Held | Unknown | Output)
            self._scales[member] = self._scale(entry.unit, member)
        scale = self._scales[member]
        if scale is None:
            raise Untold
        return scale

    def _scale(self, spec: UnitSpec, member: Member) -> Scale | None:
        if isinstance(spec, ByChoice):
            option = spec.options.get(self.choices.get(spec.setting, ""))
            return self._scale(option, member) if isinstance(option, UnitText | ByChoice) else None
        match spec.kind:
            case "fixed":
                assert spec.unit is not None
                return Scale(spec.unit.dimension, spec.text, spec.unit.point, bare=spec.text == "dimensionless")
            case "on_off":
                return Scale(ON_OFF, spec.text)
            case "count":
                return Scale(NONE, spec.text, bare=True, whole=True)
            case "any":
                return Scale(unknown(member.key.name), f"the unit of {member.key.name}")
            case "like":
                return self._like(spec)
            case "change":
                return self._change(spec)
            case "quotient":
                return self._quotient(spec)
        return None

    def _like(self, spec: UnitText) -> Scale | None:
        member = self._port(spec)
        if member is None:
            return None
        if member in self._scales and self._scales[member] is None:
            self.problems.add(f"'{spec.text}' leads back to itself", spec.where, "write one of these units out")
            return None
        return self.scale(member)

    def _port(self, spec: UnitText) -> Member | None:
        """The entry that `like PORT` names."""
        name, index = parse_key(spec.port)
        entries = [one for one in self.names.of(name) if hasattr(one.entry, "unit")]
        with_unit = {one.key.name for one in self.names.members if hasattr(one.entry, "unit")}
        if not entries:
            hint = near(name, with_unit, "names with a unit")
            self.problems.add(f"'{spec.text}': nothing called '{name}' has a unit", spec.where, hint)
            return None
        fitting = self._nearest(entries, index)
        if not fitting:
            letter = self.names.letter
            hint = f"write like {name}[1], or like {name}[{letter}] where the entry repeats too" if not index else ""
            self.problems.add(f"'{spec.text}' does not fit '{name}'", spec.where, hint or f"write like {name}")
            return None
        return fitting[0]

    def _change(self, spec: UnitText) -> Scale | None:
        scale = self._like(replace(spec, kind="like"))
        if scale is None:
            return None
        if not isinstance(scale.kind, Dimension):
            self.problems.add(f"'{spec.text}': '{spec.port}' has no differences", spec.where)
            return None
        text = difference_of(parse_unit(scale.text)).text if scale.point is not None else spec.text
        return replace(scale, text=text, point=False if scale.point is not None else None)

    def _quotient(self, spec: UnitText) -> Scale | None:
        assert spec.top is not None and spec.bottom is not None
        top = self._change(spec.top)
        bottom = self._change(spec.bottom) if spec.bottom.kind == "like" else None
        below = bottom.kind if bottom else spec.bottom.unit.dimension if spec.bottom.unit else None
        if top is None or not isinstance(top.kind, Dimension) or not isinstance(below, Dimension):
            return None
        return Scale(top.kind.divide(below), spec.text)

    # ------------------------------------------------------------ definitions
    def of(self, value: Definition) -> Found | None:
        """What a definition gives; None after a problem."""
        match value:
            case Quantity():
                return _of_quantity(value)
            case Word():
                return Found(ON_OFF) if value.text in SWITCHED else None
            case Formula():
                return self.of_tree(value.tree, value.where)
        return self._of_choices(value)

    def of_tree(self, tree: Expression, where: Where) -> Found | None:
        """What a formula gives; `where` is its place. None after a problem."""
        tree = pruned(tree, self.choices) if self.choices else tree
        try:
            return Found(kind_of(tree, self.kind), is_point(tree, self.point))
        except Untold:
            self.untold.append(where)
            return None
        except KindError as error:
            self.problems.add(error.what, column_of(where, error.at), error.hint)
            return None

    def _of_choices(self, value: ByChoice) -> Found | None:
        """A definition by setting: one option where the setting is known, else all of them, alike."""
        options = value.options
        if value.setting in self.choices:
            options = {name: one for name, one in options.items() if name == self.choices[value.setting]}
        first: tuple[str, Found] | None = None
        for name, option in options.items():
            assert not isinstance(option, UnitText)
            found = self.of(option)
            if found is None:
                return None
            if first is not None and not same(first[1].kind, found.kind):
                texts = [f"{describe(one.kind)} with {value.setting} {word}" for word, one in (first, (name, found))]
                hint = "every choice gives the same kind of quantity"
                self.problems.add(f"this is {texts[0]} but {texts[1]}", option.where, hint)
                return None
            if first is None or first[1].kind == ZERO:
                first = (name, found)
        return first[1] if first else None


def _of_quantity(value: Quantity) -> Found:
    if value.unit is None:
        return Found(ZERO if value.value == 0 else NONE)
    return Found(value.unit.dimension, value.unit.point)


# ---------------------------------------------------------------- settings that are known
def pruned(tree: Expression, choices: Mapping[str, str]) -> Expression:
    """The tree without the branches that the choices rule out."""
    return transform(tree, lambda node: _pruned(node, choices))


def _pruned(node: Expression, choices: Mapping[str, str]) -> Expression:
    if not (isinstance(node, Call) and node.function == "where"):
        return node
    kept: list[Expression] = []
    for condition, branch in zip(node.arguments[:-1:2], node.arguments[1::2], strict=True):
        decided = _decided(condition, choices)
        if decided:
            return replace(node, arguments=(*kept, branch)) if kept else branch
        if decided is None:
            kept += [condition, branch]
    return replace(node, arguments=(*kept, node.arguments[-1])) if kept else node.arguments[-1]


def _decided(condition: Expression, choices: Mapping[str, str]) -> bool | None:
    """Whether a condition on settings holds; None where it depends on more."""
    if not isinstance(condition, Operation):
        return None
    if condition.operator in ("==", "!="):
        for one, other in (condition.arguments, condition.arguments[::-1]):
            if isinstance(one, Name) and one.name in choices:
                return (choices[one.name] == write(other)) == (condition.operator == "==")
        return None
    sides = [_decided(part, choices) for part in condition.arguments]
    match condition.operator:
        case "not":
            return None if sides[0] is None else not sides[0]
        case "and":
            return False if False in sides else None if None in sides else True
        case "or":
            return True if True in sides else None if None in sides else False
    return None

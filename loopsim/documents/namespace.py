"""The names of a block and the kinds of quantity behind them, under one choice of its settings."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from loopsim.documents.types import (
    Block,
    ByChoice,
    Definition,
    Formula,
    Let,
    PairValue,
    Parameter,
    Quantity,
    UnitSpec,
    UnitText,
    Word,
)
from loopsim.errors import nearest
from loopsim.language.dimensions import NONE, Dimension, unknown
from loopsim.language.functions import CONSTANTS
from loopsim.language.kinds import ON_OFF, ZERO, Curve, Kind, KindError, Words, kind_of, same
from loopsim.language.parse import parse_key
from loopsim.language.tree import Name
from loopsim.language.units import parse_unit

ANSWERS = ("takes", "up", "down")


@dataclass(slots=True)
class Namespace:
    """Kinds of names under `choices`; kinds of lets and scanned names follow from their formulas, on demand."""

    block: Block
    choices: Mapping[str, str]
    units: dict[str, UnitSpec] = field(default_factory=dict)
    formulas: dict[str, Definition] = field(default_factory=dict)
    pairs: set[str] = field(default_factory=set)
    tables: dict[str, Parameter] = field(default_factory=dict)
    _known: dict[str, Kind] = field(default_factory=dict)
    _going: list[str] = field(default_factory=list)

    def __post_init__(self) -> None:
        block = self.block
        for entries in (block.continuous, block.scan, block.let):
            for entry in entries:
                if isinstance(entry, Let):
                    self.formulas.setdefault(entry.key.name, entry.value)
        for output in block.outputs:
            if output.value is not None:
                self.formulas.setdefault(output.key.name, output.value)
        for group in (block.outputs, block.inputs, block.solve, block.memory, block.states, block.parameters):
            for one in group:
                self.units[one.key.name] = one.unit
        for parameter in block.parameters:
            if parameter.pair:
                self.pairs.add(parameter.key.name)
            if parameter.table is not None:
                self.tables[parameter.key.name] = parameter

    # ------------------------------------------------------------ names
    def names(self) -> set[str]:
        """All names that a formula may use."""
        block = self.block
        return {*self.units, *self.formulas, *block.settings, *block.faults, *CONSTANTS}

    def kind(self, name: Name) -> Kind:
        """The kind of a name in a formula. Raises `KindError` for what there is not."""
        stem, _, last = name.name.partition(".")
        if last in ("low", "high") and stem in self.pairs:
            return self.of_entry(stem)
        if last in ANSWERS and any(one.key.name == stem for one in self.block.outputs):
            return ON_OFF if last != "takes" else self.kind(Name(stem, None, name.at))
        if last or (name.name in self.pairs):
            raise self._unknown(name)
        return self._plain(name)

    def _plain(self, name: Name) -> Kind:
        block = self.block
        if name.name in CONSTANTS:
            return parse_unit(CONSTANTS[name.name][1]).dimension
        if name.name in block.settings:
            return Words(block.settings[name.name].choices)
        if name.name in self.tables:
            x, y = self.tables[name.name].table or (None, None)
            assert x is not None and y is not None
            return Curve(x.dimension, y.dimension)
        if name.name in self.units:
            return self.of_entry(name.name)
        if name.name in self.formulas:
            return self._inferred(name)
        if name.name in block.faults:
            return ON_OFF
        choices = [setting.choices for setting in block.settings.values() if name.name in setting.choices]
        if choices:
            return Words(choices[0])
        raise self._unknown(name)

    def _unknown(self, name: Name) -> KindError:
        if name.name in self.pairs:
            return KindError(f"'{name.name}' is a pair", name.at, f"write {name.name}.low or {name.name}.high")
        choices = {choice for setting in self.block.settings.values() for choice in setting.choices}
        return KindError(
            f"there is no '{name.name}' in this block", name.at, nearest(name.name, self.names() | choices)
        )

    def _inferred(self, name: Name) -> Kind:
        """The kind of a formula's name; one that looks back at itself only counts as a quantity of its own."""
        if name.name not in self._known:
            if name.name in self._going:
                return unknown(name.name)
            self._going.append(name.name)
            try:
                self._known[name.name] = self.of(self.formulas[name.name])
            except KindError:
                self._known[name.name] = unknown(name.name)  # told at the formula itself
            finally:
                self._going.pop()
        return self._known[name.name]

    # ------------------------------------------------------------ units and definitions
    def unit(self, spec: UnitSpec) -> Kind:
        """The kind that a `unit:` text means."""
        if isinstance(spec, ByChoice):
            option = spec.options[self.choices[spec.setting]]
            assert isinstance(option, UnitText | ByChoice)
            return self.unit(option)
        match spec.kind:
            case "fixed":
                assert spec.unit is not None
                return spec.unit.dimension
            case "on_off":
                return ON_OFF
            case "count":
                return NONE
            case "like" | "change":
                return self._like(spec)
            case "quotient":
                assert spec.top is not None and spec.bottom is not None
                top, bottom = self.unit(spec.top), self.unit(spec.bottom)
                assert isinstance(top, Dimension) and isinstance(bottom, Dimension)
                return top.divide(bottom)
        return ZERO  # lists of names have no kind

    def _like(self, spec: UnitText) -> Kind:
        name, _ = parse_key(spec.port)
        if name not in self.units:
            raise KindError(f"'{spec.text}': there is no '{name}' in this block", 0, nearest(name, self.units))
        return self.of_entry(name)

    def of_entry(self, name: str) -> Kind:
        """The kind of an entry by name; `any` is an unknown dimension of its own."""
        spec = self.units[name]
        return unknown(name) if isinstance(spec, UnitText) and spec.kind == "any" else self.unit(spec)

    def of(self, value: Definition | PairValue) -> Kind:
        """The kind of a definition."""
        if isinstance(value, Quantity):
            if value.unit is None:
                return ZERO if value.value == 0 else NONE
            return value.unit.dimension
        if isinstance(value, Word):
            return ON_OFF if value.text in ("on", "off", "yes", "no", "true", "false") else self.kind(Name(value.text))
        if isinstance(value, Formula):
            return kind_of(value.tree, self.kind)
        if isinstance(value, PairValue):
            return self.of(value.low)
        return self._of_choices(value)

    def _of_choices(self, value: ByChoice) -> Kind:
        if value.setting in self.choices:
            option = value.options[self.choices[value.setting]]
            assert not isinstance(option, UnitText)
            return self.of(option)
        kinds = []
        for option in value.options.values():
            assert not isinstance(option, UnitText)
            kinds.append(self.of(option))
        for kind in kinds[1:]:
            if not same(kinds[0], kind) and kind != kinds[0]:
                raise KindError("the choices differ in kind", 0, "every choice gives the same kind of quantity")
        return kinds[0]

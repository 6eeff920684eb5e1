"""Values and units as people write them: numbers with their units, words, formulas, pairs, curves, lists of names."""

from __future__ import annotations

from dataclasses import dataclass

from loopsim.errors import Where
from loopsim.language.tree import Expression
from loopsim.language.units import Unit


# ---------------------------------------------------------------- values that people write
@dataclass(frozen=True, slots=True)
class Quantity:
    """A number as written and its unit; `unit` is None for a bare number."""

    value: float
    unit: Unit | None
    text: str
    where: Where


@dataclass(frozen=True, slots=True)
class Word:
    """A word: a choice of a setting, `on`, `off`, `none`, a name."""

    text: str
    where: Where


@dataclass(frozen=True, slots=True)
class Formula:
    """A formula; `where` is the place of its first character, nodes count columns from there."""

    tree: Expression
    text: str
    where: Where


@dataclass(frozen=True, slots=True)
class PairValue:
    """`[low, high]` for a parameter with `pair: true`; each a Quantity or, inside a block, a Formula."""

    low: Quantity | Formula
    high: Quantity | Formula
    where: Where


@dataclass(frozen=True, slots=True)
class TableValue:
    """`{x: [..], y: [..]}`: bare numbers are in the declared units of the table."""

    x: tuple[Quantity, ...]
    y: tuple[Quantity, ...]
    where: Where


@dataclass(frozen=True, slots=True)
class NameList:
    """A list of names to repeat over."""

    names: tuple[str, ...]
    where: Where


Value = Quantity | Word | Formula | PairValue | TableValue | NameList


@dataclass(frozen=True, slots=True)
class Given:
    """A value that a plant gives, with how well it is known.

    `tolerance` is uniform ±, `deviation` normal one sigma; both as written (`%` of the value, or absolute).
    """

    value: Value
    where: Where
    tolerance: Quantity | None = None
    deviation: Quantity | None = None
    assumed: bool = False
    about: str = ""


@dataclass(frozen=True, slots=True)
class ByChoice:
    """`{by: setting, choice: item, …}`: options are Formula, UnitText or ByChoice, every choice present."""

    setting: str
    options: dict[str, Formula | Quantity | UnitText | ByChoice]
    where: Where


Definition = Formula | Quantity | Word | ByChoice


# ---------------------------------------------------------------- units of ports
@dataclass(frozen=True, slots=True)
class UnitText:
    """What stands behind `unit:`.

    `kind` and what goes with it:
    `fixed` (unit); `any`; `like` (port); `change` (port: a difference on that port's scale);
    `quotient` (top: a UnitText of kind like, bottom: a UnitText of kind like or fixed, and `scale`: the number
    before a fixed bottom, 1 in `like pv per 1 h`); `on_off`; `count`; `none` (names, tables: no unit).
    """

    kind: str
    text: str
    where: Where
    unit: Unit | None = None
    port: str = ""
    top: UnitText | None = None
    bottom: UnitText | None = None
    scale: float = 1.0


UnitSpec = UnitText | ByChoice

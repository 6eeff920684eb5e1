"""Text to quantities, formulas, words, and values with how well they are known.

A number with an allowed unit is a quantity, a number alone a bare one; inside a block anything else is a formula.
"""

from __future__ import annotations

import itertools
import math
import re
from collections.abc import Callable
from functools import partial

from loopsim.documents.fields import Fields, items, leading_zero, name, scalar, sentence, yes_no
from loopsim.documents.nodes import Mapping, Node, Scalar, Sequence
from loopsim.documents.shapes import SPREAD, TABLE
from loopsim.documents.types import (
    Formula,
    Given,
    NameList,
    PairValue,
    Quantity,
    TableValue,
    Value,
    Word,
)
from loopsim.errors import Problems, Where, fail
from loopsim.language.parse import FormulaError, parse_formula
from loopsim.language.units import Unit, UnitError, difference_of, parse_unit, to_si

_NUMBER = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*")
_STARTS_AS_NUMBER = re.compile(r"[+-]?\.?\d")
_OPERATORS = tuple("+-*/^<>=!)(,")
_MIXED = re.compile(r"\S\s+[-+*/<>=!]|\s(?:and|or)\s")
_NAME = re.compile(r"[A-Za-z_]\w*", re.ASCII)
_WRITE_NUMBER = "write a number and its unit, such as 1.2 m^3"
_PLAIN_YES = frozenset({"yes", "no", "true", "false"})
_NOT_FINITE = re.compile(r"[+-]?\.?(inf|infinity|nan)\b", re.IGNORECASE)


# ---------------------------------------------------------------- numbers and units
def looks_like_number(text: str) -> bool:
    """The text starts as a number does."""
    return _STARTS_AS_NUMBER.match(text) is not None


def unit(node: Node) -> Unit:
    """A fixed unit."""
    found = scalar(node, "a unit")
    return unit_from(found.text, found.where)


def unit_from(text: str, where: Where) -> Unit:
    """A fixed unit from its text. Raises `InputError`."""
    try:
        return parse_unit(text)
    except UnitError as error:
        raise fail(error.what, where, error.hint) from None


def quantity(node: Node) -> Quantity:
    """A number with its unit, or a bare number."""
    found = scalar(node, "a number with its unit")
    if not looks_like_number(found.text):
        what = f"'{found.text}' is not a number"
        if _NOT_FINITE.match(found.text):
            what = f"'{found.text}' is not a finite number"
        raise fail(what, found.where, _WRITE_NUMBER)
    return quantity_from(found.text, found.where)


def quantity_from(text: str, where: Where) -> Quantity:
    """A quantity from text that starts as a number does. Raises `InputError`."""
    _refuse_misreadings(text, where)
    match = _NUMBER.match(text)
    assert match is not None
    value, rest = float(match[1]), text[match.end() :]
    if not math.isfinite(value):
        raise fail(f"'{match[1]}' is too large for a number", where, _WRITE_NUMBER)
    return Quantity(value, unit_from(rest, where.shifted(match.end())) if rest else None, text, where)


def _refuse_misreadings(text: str, where: Where) -> None:
    """Refuse what other readers or other countries read differently: 010, 1:30, 1,5, 1 200, 1_000."""
    clock = re.match(r"(\d+):(\d\d)(?::\d\d)?\b", text)
    if clock:
        number = int(clock[1][:9]) * 60 + int(clock[2])
        raise fail(f"'{text}' is read as {number} by some readers", where, f"write {number} min or {number} s")
    if re.match(r"[+-]?0\d", text):
        raise leading_zero(text, where)
    comma = re.match(r"[+-]?(\d+),(\d+)", text)
    if comma:
        point = f"{comma[1]}.{comma[2]}"
        both = len(comma[2]) == 3 and len(comma[1]) <= 3
        hint = f"write {comma[1]}{comma[2]} or {point}" if both else f"write {point}"
        raise fail(f"'{text}' has a comma in its number", where, hint)
    groups = re.match(r"[+-]?\d+([ _'’]\d{3})+(?![\d/^*.])", text)
    if groups:
        joined = re.sub(r"[ _'’]", "", groups[0])
        raise fail(f"'{text}' has a gap in its number", where, f"write {joined} in one piece")


def number(node: Node) -> Quantity:
    """A bare number."""
    found = quantity(node)
    if found.unit is not None:
        raise fail(f"'{found.text}' has a unit; a number alone is wanted", found.where, f"write {found.value:g}")
    return found


def duration(node: Node) -> Quantity:
    """A time that is not negative; a bare 0 is 0 s."""
    found = quantity(node)
    second = parse_unit("s")
    if found.unit is None and found.value == 0:
        return Quantity(0.0, second, found.text, found.where)
    if found.unit is None or found.unit.dimension != second.dimension:
        hint = f"write {found.value:g} s, {found.value:g} min or {found.value:g} h"
        raise fail(f"'{found.text}' is not a time", found.where, hint)
    if found.value < 0:
        raise fail(f"'{found.text}' is negative", found.where, "times count from the start of the run")
    return found


def positive_duration(node: Node) -> Quantity:
    """A time longer than 0 s."""
    found = duration(node)
    if found.value == 0:
        raise fail(f"'{found.text}' is no time at all", found.where, "write a time longer than 0 s")
    return found


def seconds(time: Quantity) -> float:
    """A duration in seconds."""
    return time.value * (time.unit.factor if time.unit else 1.0)


# ---------------------------------------------------------------- formulas, in blocks only
def formula(node: Node) -> Formula:
    """A formula, a name and a bare number among them."""
    found = scalar(node, "a formula")
    try:
        tree = parse_formula(found.text)
    except FormulaError as error:
        raise fail(error.what, found.where.shifted(error.at), error.hint) from None
    return Formula(tree, found.text, found.where)


def formula_or_quantity(node: Node) -> Formula | Quantity:
    """A number with an allowed unit is a quantity, a number alone a bare one; anything else a formula."""
    found = scalar(node, "a formula or a number")
    if not looks_like_number(found.text):
        return formula(found)
    match = _NUMBER.match(found.text)
    rest = found.text[match.end() :] if match else ""
    if rest.startswith(_OPERATORS) and not re.match(r",\d", rest):
        return formula(found)
    if _MIXED.search(rest):
        hint = "give the number with its unit a name of its own under let: one_bar: 1 bar"
        raise fail("numbers in a formula have no units", found.where, hint)
    return quantity_from(found.text, found.where)


def word_or_formula(node: Node) -> Formula | Quantity | Word:
    """As `formula_or_quantity`; on and off are words."""
    found = scalar(node, "a formula or a number")
    if found.text in ("on", "off"):
        return Word(found.text, found.where)
    return formula_or_quantity(found)


def pair(node: Node, end: Callable[[Node], Formula | Quantity]) -> PairValue:
    """`[low, high]`, rising where both are numbers of one unit."""
    ends = items(node, "two values")
    if len(ends) != 2:
        raise fail(f"two values are wanted, {len(ends)} stand here", node.where, "write [low, high]")
    low, high = end(ends[0]), end(ends[1])
    if isinstance(low, Quantity) and isinstance(high, Quantity) and _falls(low, high):
        raise fail(f"'{high.text}' is not above '{low.text}'", high.where, "write [low, high], rising")
    return PairValue(low, high, node.where)


def _falls(low: Quantity, high: Quantity) -> bool:
    """`high` is not above `low`; False where the two cannot be compared before the unit of the port is known."""
    if low.unit is None or high.unit is None:
        return (low.unit is high.unit or 0 in (low.value, high.value)) and low.value >= high.value
    if low.unit.dimension != high.unit.dimension:
        return False
    return to_si(low.value, low.unit) >= to_si(high.value, high.unit)


def table(node: Node) -> TableValue:
    """`{x: [..], y: [..]}`: as many y as x, x rising."""
    problems = Problems()
    fields = Fields(node, TABLE, "a table", problems)
    x, y = fields.every("x", quantity), fields.every("y", quantity)
    problems.raise_if_any()
    if len(x) != len(y) or len(x) < 2:
        hint = "give two points at least, and one y for each x"
        raise fail(f"the table has {len(x)} x and {len(y)} y", node.where, hint)
    for first, second in itertools.pairwise(x):
        if _falls(first, second):
            raise fail(f"x must rise: '{second.text}' is not above '{first.text}'", second.where, "sort the points")
    return TableValue(x, y, node.where)


# ---------------------------------------------------------------- what a plant gives
def given(node: Node) -> Given:
    """A value in a plant, strategy or scenario: quantity, word, pair, table, names; perhaps with its spread."""
    return _given(node, plain_value)


def passed(node: Node) -> Given:
    """A value inside a block made of blocks: as `given`, and formulas in the parameters of the outer block."""
    return _given(node, _passed_value)


def _given(node: Node, value: Callable[[Node], Value]) -> Given:
    if not isinstance(node, Mapping) or "x" in node.entries or "y" in node.entries:
        return Given(value(node), node.where)
    problems = Problems()
    fields = Fields(node, SPREAD, "a value", problems)
    read = fields.read("is", value)
    tolerance, deviation = fields.read("tolerance", quantity), fields.read("deviation", quantity)
    assumed, about = bool(fields.read("assumed", yes_no)), fields.read("about", sentence) or ""
    for spread in (tolerance, deviation):
        if spread is not None and read is not None:
            fields.attempt(partial(_check_spread, read, spread))
    if tolerance and deviation:
        what = "a value has a tolerance or a deviation, not both"
        problems.add(what, fields.place("deviation"), "keep one of them")
    problems.raise_if_any()
    assert read is not None
    return Given(read, read.where, tolerance, deviation, assumed, about)


def _check_spread(value: Value, spread: Quantity) -> None:
    """Relative spreads need a scale that starts at zero; absolute ones are differences in the value's dimension."""
    if not isinstance(value, Quantity):
        raise fail("only a single number can have a tolerance or a deviation", spread.where)
    if spread.value < 0:
        raise fail(f"'{spread.text}' is negative", spread.where, "write how far it may be off, to either side")
    if spread.unit is not None and spread.unit.text == "%":
        if value.unit is not None and value.unit.offset != 0:
            what = f"a percentage of '{value.text}' means nothing: its scale does not start at zero"
            raise fail(what, spread.where, f"write a difference, such as 2 {difference_of(value.unit).text}")
        return
    if spread.unit is not None and spread.unit.point:
        hint = f"write a difference, such as 2 {difference_of(spread.unit).text}"
        raise fail(f"'{spread.text}' is a point on a scale", spread.where, hint)
    own, other = (quantity.unit.dimension if quantity.unit else None for quantity in (value, spread))
    if own != other:
        hint = "write per cent of the value (5 %), or a difference in a unit of the same kind"
        raise fail(f"'{spread.text}' does not fit '{value.text}'", spread.where, hint)


def plain_value(node: Node) -> Value:
    """A value alone: a quantity, a word, a pair, a table or a list of names."""
    if isinstance(node, Mapping):
        return table(node)
    if isinstance(node, Sequence):
        return _pair_or_names(node, quantity)
    found = scalar(node, "a value")
    return quantity_from(found.text, found.where) if looks_like_number(found.text) else word(found)


def _passed_value(node: Node) -> Value:
    if isinstance(node, Mapping):
        return table(node)
    if isinstance(node, Sequence):
        return _pair_or_names(node, formula_or_quantity)
    found = scalar(node, "a value")
    return word(found) if _NAME.fullmatch(found.text) else formula_or_quantity(found)


def _pair_or_names(node: Sequence, end: Callable[[Node], Formula | Quantity]) -> PairValue | NameList:
    """Two values are a pair, names a list of names; inside a block two bare names are a pair."""
    texts = [item.text for item in node.items if isinstance(item, Scalar)]
    names = len(texts) == len(node.items) and all(_NAME.fullmatch(text) for text in texts)
    if names and not (len(texts) == 2 and end is formula_or_quantity):
        return name_list(node)
    return pair(node, end)


def name_list(node: Node) -> NameList:
    """A list of names, none of them twice."""
    found = [(name(item), item.where) for item in items(node, "names")]
    if not found:
        raise fail("the list of names is empty", node.where, "write at least one name")
    seen: set[str] = set()
    for text, where in found:
        if not _NAME.fullmatch(text):
            raise fail(f"'{text}' cannot be a name", where, "it starts with a letter; letters, digits and _ follow")
        if text in seen:
            raise fail(f"'{text}' stands twice in the list", where, "write each name once")
        seen.add(text)
    return NameList(tuple(text for text, _ in found), node.where)


def word(found: Scalar) -> Word:
    """A word of a setting, on, off or none."""
    if found.plain and found.text.lower() in _PLAIN_YES:
        raise fail(f"'{found.text}' is neither on nor off", found.where, "write on or off, or the word in quotes")
    if _NOT_FINITE.match(found.text):
        raise fail(f"'{found.text}' is not a finite number", found.where, _WRITE_NUMBER)
    if not _NAME.fullmatch(found.text):
        hint = "a value is a number with its unit (1.2 m^3), or a single word"
        raise fail(f"'{found.text}' is not a value", found.where, hint)
    return Word(found.text, found.where)

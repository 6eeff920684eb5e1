"""What stands behind the keys of a block: names with an index, units of ports, definitions, balances, choices."""

from __future__ import annotations

import re
from collections.abc import Callable

from loopsim.documents.fields import name, scalar
from loopsim.documents.nodes import Mapping, Node, Scalar
from loopsim.documents.types import (
    Balance,
    ByChoice,
    Definition,
    Formula,
    Key,
    PairValue,
    Quantity,
    TableValue,
    UnitSpec,
    UnitText,
    Word,
)
from loopsim.documents.values import formula, formula_or_quantity, pair, table, unit_from, word_or_formula
from loopsim.errors import Where, fail, nearest
from loopsim.language.names import check_name
from loopsim.language.parse import FormulaError, parse_balance, parse_key
from loopsim.language.tree import Name

_PORT = r"[A-Za-z]\w*(?:\[[^\]]*\])?"
_LIKE = re.compile(rf"like\s+({_PORT})", re.ASCII)
_CHANGE = re.compile(rf"change\s+of\s+({_PORT})", re.ASCII)
_QUOTIENT = re.compile(rf"like\s+({_PORT})\s+per\s+(?:({_PORT})|(\d\S*)\s+(.+))", re.ASCII)
_RELATIVE = re.compile(r"(like|change)\b")
_EQUALS = re.compile(r"(?<![<>=!])=(?!=)")
_KINDS = {"any": "any", "count": "count", "on/off": "on_off"}


def no_unit(where: Where) -> UnitText:
    """The unit of what has none: a list of names, a table."""
    return UnitText("none", "", where)


def key(found: Scalar) -> Key:
    """The name of an entry, with its index: `T`, `T[i]`, `T[0]`, `T[n+1]`."""
    text = name(found)
    try:
        base, index = parse_key(text)
    except FormulaError as error:
        raise fail(error.what, found.where.shifted(error.at), error.hint) from None
    return Key(base, index)


def new_key(found: Scalar) -> Key:
    """As `key`, for what the block names itself: reserved words are refused."""
    made = key(found)
    wrong = check_name(made.name)
    if wrong:
        raise fail(wrong, found.where, "choose another name")
    return made


def new_name(node: Node) -> str:
    """A name without index that the block gives itself."""
    text = name(node)
    wrong = check_name(text)
    if wrong:
        raise fail(wrong, node.where, "choose another name")
    return text


# ---------------------------------------------------------------- units of ports
def unit_spec(node: Node) -> UnitSpec:
    """What stands behind `unit:`: a unit, `any`, `like …`, `change of …`, `on/off`, `count`, or one by choice."""
    if isinstance(node, Mapping):
        return by_choice(node, _unit_text)
    return _unit_text(node)


def _unit_text(node: Node) -> UnitText:
    found = scalar(node, "a unit")
    text, where = found.text, found.where
    if text in _KINDS:
        return UnitText(_KINDS[text], text, where)
    if _RELATIVE.match(text):
        return _relative(text, where)
    return UnitText("fixed", text, where, unit=unit_from(text, where))


def _relative(text: str, where: Where) -> UnitText:
    """`like pv`, `change of pv`, `like out per u`, `like pv per 1 h`."""
    if like := _LIKE.fullmatch(text):
        return UnitText("like", text, where, port=like[1])
    if change := _CHANGE.fullmatch(text):
        return UnitText("change", text, where, port=change[1])
    quotient = _QUOTIENT.fullmatch(text)
    if not quotient:
        raise fail(f"'{text}' is not a unit", where, "write like pv, change of pv, like out per u or like pv per 1 h")
    top = UnitText("like", f"like {quotient[1]}", where, port=quotient[1])
    if quotient[2]:
        bottom = UnitText("like", f"like {quotient[2]}", where, port=quotient[2])
        return UnitText("quotient", text, where, top=top, bottom=bottom)
    below = where.shifted(quotient.start(4))
    bottom = UnitText("fixed", quotient[4], below, unit=unit_from(quotient[4], below))
    return UnitText("quotient", text, where, top=top, bottom=bottom, scale=_scale(quotient[3], where))


def _scale(text: str, where: Where) -> float:
    try:
        scale = float(text)
    except ValueError:
        scale = 0.0
    if not 0 < scale < float("inf"):
        raise fail(f"'{text}' is not a number above zero", where, "write like pv per 1 h")
    return scale


# ---------------------------------------------------------------- definitions
def definition(node: Node) -> Definition:
    """A formula, a quantity, on or off, or one of these by the choice of a setting."""
    if isinstance(node, Mapping):
        return by_choice(node, formula_or_quantity)
    return word_or_formula(node)


def formula_or_choice(node: Node) -> Formula | ByChoice:
    """A formula, or formulas by the choice of a setting."""
    return by_choice(node, formula) if isinstance(node, Mapping) else formula(node)


def by_choice(node: Mapping, option: Callable[[Node], Formula | Quantity | UnitText]) -> ByChoice:
    """`{by: setting, choice: item, …}`; an item may again be by choice."""
    setting = node.get("by")
    if setting is None:
        raise fail("a mapping stands here without 'by:'", node.where, "write {by: setting, choice: …, choice: …}")
    options: dict[str, Formula | Quantity | UnitText | ByChoice] = {}
    for entry in node:
        if entry.key.text != "by":
            inner = entry.value
            options[name(entry.key)] = by_choice(inner, option) if isinstance(inner, Mapping) else option(inner)
    if not options:
        raise fail("no choices stand beside 'by:'", node.where, "write {by: setting, choice: …, choice: …}")
    return ByChoice(name(setting), options, node.where)


def default_value(node: Node) -> Definition | PairValue | TableValue:
    """The default of a parameter: a definition, a pair or a table."""
    if isinstance(node, Mapping):
        return definition(node) if "by" in node.entries else table(node)
    if isinstance(node, Scalar):
        return definition(node)
    return pair(node, formula_or_quantity)


def between(node: Node) -> PairValue:
    """`[low, high]` of a `solve` entry."""
    return pair(node, formula_or_quantity)


def is_none(node: Node | None) -> bool:
    """The word `none`, without quotes."""
    return isinstance(node, Scalar) and node.plain and node.text == "none"


def is_equation(node: Node) -> bool:
    """The text has an equals sign that is no comparison."""
    return isinstance(node, Scalar) and _EQUALS.search(node.text) is not None


def balance(owner: Key, node: Node) -> Balance:
    """`left = right`."""
    found = scalar(node, "an equation, left = right")
    try:
        left, right = parse_balance(found.text)
    except FormulaError as error:
        raise fail(error.what, found.where.shifted(error.at), error.hint) from None
    return Balance(owner, left, right, found.text, found.where)


def setting_default(node: Node, choices: tuple[str, ...]) -> Word | Formula:
    """A choice as it stands, or a formula that gives one."""
    found = scalar(node, "a choice")
    if found.text in choices:
        return Word(found.text, found.where)
    made = formula_or_quantity(found)
    if isinstance(made, Quantity) or isinstance(made.tree, Name):
        raise fail(f"'{found.text}' is not one of the choices", found.where, nearest(found.text, choices, "choices"))
    return made

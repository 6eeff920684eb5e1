"""Rules of a scenario: what must hold."""

from __future__ import annotations

from loopsim.documents.fields import Fields, address, mapping, scalar, tag
from loopsim.documents.nodes import Mapping, Node, Scalar
from loopsim.documents.shapes import MARGINS, RULES
from loopsim.documents.types import Quantity, Rule
from loopsim.documents.values import duration, looks_like_number, number, positive_duration, quantity, quantity_from
from loopsim.errors import Problems, Where, fail, nearest

_LIMITS = {"reversals": number, "alarms": number, "outside": duration}
_NOT_NEGATIVE = ("within", "overshoot", "undershoot", "iae", "travel", "deviation", "reversals", "rate", "alarms")
_MARGINS = {
    "gain_margin": number,
    "phase_margin": quantity,
    "delay_margin": duration,
    "max_sensitivity": number,
    "max_complementary": number,
}


def rule(node: Node, problems: Problems) -> Rule:
    """One rule; its kind is the key that holds the limit. What is wrong is noted; then the rule is of no use."""
    tree = mapping(node, "a rule", "write {signal: tank.T, max: 70 degC}")
    if "loop" in tree.entries:
        return _margins(tree, problems)
    kinds = [key for key in RULES if key in tree.entries]
    if len(kinds) != 1:
        raise fail(*_unclear(kinds, tree))
    kind = kinds[0]
    fields = Fields(tree, RULES[kind], f"a rule with '{kind}'", problems)
    signal, limit = fields.read("signal", address), fields.read(kind, _LIMITS.get(kind, quantity))
    if limit and limit.value < 0 and kind in _NOT_NEGATIVE:
        problems.add(f"'{limit.text}' is negative", limit.where, f"{kind} is a size")
    after, until = fields.read("after", duration), fields.read("until", duration)
    return Rule(
        kind=kind,
        where=tree.where,
        text=_text(tree, ("signal", kind)),
        signal=signal or "",
        limit=limit,
        of=fields.read("of", _signal_or_value),
        by=fields.read("by", duration),
        after=after,
        until=until,
        band=fields.read("band", quantity),
        dwell=fields.read("dwell", positive_duration),
    )


def _margins(tree: Mapping, problems: Problems) -> Rule:
    fields = Fields(tree, MARGINS, "a rule with 'loop'", problems)
    margins: dict[str, Quantity] = {}
    for margin, reader in _MARGINS.items():
        found = fields.read(margin, reader)
        if found is not None:
            margins[margin] = found
            _check_margin(margin, found, problems)
    if not any(margin in fields for margin in _MARGINS):
        problems.add("this rule has no margin", fields.where, "write one of " + ", ".join(_MARGINS))
    loop = fields.read("loop", tag) or ""
    return Rule("margins", tree.where, _text(tree, ("loop",)), loop=loop, margins=margins)


def _check_margin(margin: str, found: Quantity, problems: Problems) -> None:
    if margin == "phase_margin" and found.unit is None:
        problems.add(f"'{found.text}' has no unit", found.where, f"write {found.value:g} deg")
    elif found.value <= 0:
        problems.add(f"'{found.text}' is not above zero", found.where, f"{margin} is a size")


def _unclear(kinds: list[str], tree: Mapping) -> tuple[str, Where, str]:
    if kinds:
        return f"a rule has one limit; this one has {' and '.join(kinds)}", tree.where, "write a rule for each"
    guesses = (nearest(key, RULES, "") for key in tree.entries if key not in ("signal", "after", "until", "of", "by"))
    guess = next((hint for hint in guesses if hint.startswith("did you mean")), "")
    return "this rule has no limit", tree.where, guess or "limits: " + ", ".join(RULES) + "; or loop: with its margins"


def _signal_or_value(node: Node) -> str | Quantity:
    found = scalar(node, "a signal or a value")
    return quantity_from(found.text, found.where) if looks_like_number(found.text) else address(found)


def _text(tree: Mapping, first: tuple[str, ...]) -> str:
    """The rule as a line: `line.T within 1.5 K of TIC-101.sp by 25 min after 20 min`."""
    words = [one.text for key in first[:1] if isinstance(one := tree.get(key), Scalar)]
    keys = [*first[1:], *(key for key in tree.entries if key not in first)]
    for key in keys:
        node = tree.get(key)
        if isinstance(node, Scalar):
            words.append(f"{key} {node.text}")
    return " ".join(words)

"""What a run waits for: watched levels, and the conditions of events."""

from __future__ import annotations

from loopsim.documents.types import Condition as WrittenCondition
from loopsim.documents.types import Quantity, Scenario, Word
from loopsim.errors import Problems, fail, nearest
from loopsim.language.tree import Expression, Name, Number
from loopsim.model.scales import FALSE_WORDS, ON_OFF, TRUE_WORDS, si_value
from loopsim.model.types import Bound, Model
from loopsim.simulation.analysis import Condition


def resolve(model: Model, name: str) -> str | None:
    """The model's name behind what people write: a signal, a set point in use, a single element, a stored value."""
    if name in model.in_use:
        return model.in_use[name]
    for items in (model.assignments, model.states, model.memory, model.slots, model.implicits):
        if name in items:
            return name
    elements = [one for one in model.signals if one.startswith(f"{name}.")]
    return elements[0] if len(elements) == 1 else None


def conditions_of(model: Model, scenario: Scenario, skipped: set[int]) -> tuple[tuple[Condition, ...], dict[int, int]]:
    """Watched levels first, then the conditions of events; `owners` maps a condition's place to its event."""
    found = [_bound_condition(bound) for bound in model.bounds]
    owners: dict[int, int] = {}
    for number, event in enumerate(scenario.events):
        if event.when is not None and number not in skipped:
            owners[len(found)] = number
            found.append(_event_condition(model, event.when))
    return tuple(found), owners


def _bound_condition(bound: Bound) -> Condition:
    """True once a watched level is passed."""
    sides: tuple[Expression, Expression] = (Name(bound.signal), bound.limit)
    if bound.relation in ("above", "at_least"):
        sides = (sides[1], sides[0])
    return Condition(*sides, bound.signal.rpartition(".")[0], bound.where)


def _event_condition(model: Model, when: WrittenCondition) -> Condition:
    name = resolve(model, when.signal)
    if name is None:
        raise fail(f"no signal is called '{when.signal}'", when.where, nearest(when.signal, model.signals))
    unit = model.signals[when.signal].unit if when.signal in model.signals else ON_OFF
    tag = when.signal.rpartition(".")[0]
    if when.relation == "is":
        return _word_condition(model, name, when, tag)
    problems = Problems()
    value: Quantity | Word = when.value
    limit = Number(si_value(value, unit, problems, model.air_pressure, f"'{when.signal}'"))
    problems.raise_if_any()
    if when.relation == "below":
        return Condition(limit, Name(name), tag, when.where)
    return Condition(Name(name), limit, tag, when.where)


def _word_condition(model: Model, name: str, when: WrittenCondition, tag: str) -> Condition:
    word = getattr(when.value, "text", "")
    if word in TRUE_WORDS:
        return Condition(Name(name), Number(0.5), tag, when.where)
    if word in FALSE_WORDS:
        return Condition(Number(0.5), Name(name), tag, when.where)
    raise fail(f"'{when.signal} is {word}': on or off is wanted", when.where, "settings cannot be waited for")

"""A scenario checked before anything runs: what its events address and to what, the names and units of its rules."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence

from loopsim.documents.types import Event, Quantity, Rule, Scenario
from loopsim.errors import Problems, nearest
from loopsim.language.dimensions import Dimension
from loopsim.language.units import ATMOSPHERE, Unit, difference_of, parse_unit, times_minute
from loopsim.model.scales import si_value
from loopsim.model.types import Model
from loopsim.simulation.actions import Actions, check_target, lacking, not_applicable, seconds
from loopsim.simulation.conditions import conditions_of
from loopsim.study.rules import per_step

# what the limit of a kind is, on the scale of its signal (kinds left out: a time or a plain number, checked on reading)
SCALES = {
    "max": "point",
    "min": "point",
    "within": "difference",
    "travel": "difference",
    "deviation": "difference",
    "overshoot": "step",
    "undershoot": "step",
    "iae": "times time",
    "rate": "per time",
}
MOST_ROWS = 2_000_000  # recorded rows of a run


def check_scenario(scenario: Scenario, models: Mapping[str, Model], problems: Problems) -> None:
    """Note what is wrong with the events and rules of a scenario; `models`: what is simulated for each strategy."""
    if not models:
        return
    for number, event in enumerate(scenario.events):
        _check_event(scenario, number, event, models, problems)
    for model in models.values():
        with problems.collecting():
            conditions_of(model, scenario, {k for k, one in enumerate(scenario.events) if not_applicable(one, model)})
    units: dict[str, Unit] = {}
    for model in models.values():
        units.update({name: signal.unit for name, signal in model.signals.items()})
        for items in (model.states, model.memory, model.slots):
            units.update({name: one.unit for name, one in items.items()})
    loops = {one.tag for model in models.values() for one in model.controllers}
    _check_record(scenario, units, problems)
    check_rules(scenario.accept, units, loops, problems, next(iter(models.values())).air_pressure)


def _check_record(scenario: Scenario, units: Mapping[str, Unit], problems: Problems) -> None:
    """What is recorded must be there, in a number of rows that can be kept."""
    for name in scenario.record_signals or ():
        elements = any(one.startswith(f"{name}.") for one in units)
        if name not in units and not elements:
            problems.add(f"no signal is called '{name}'", scenario.where, nearest(name, units, "signals"))
    every = scenario.record_every
    rows = seconds(scenario.lasts) / seconds(every) if every is not None else 0.0
    if every is not None and rows > MOST_ROWS:
        problems.add(
            f"a row every {every.text} makes {rows:.3g} rows", every.where, f"at most {MOST_ROWS:.0e} are kept"
        )


def _check_event(
    scenario: Scenario, number: int, event: Event, models: Mapping[str, Model], problems: Problems
) -> None:
    """An event must do something in one strategy at least, and be possible wherever what it addresses is there."""
    having = [model for model in models.values() if not not_applicable(event, model)]
    if not having:
        tag = lacking(event, next(iter(models.values())))
        tags = {one.tag for model in models.values() for one in model.signals.values() if one.tag}
        problems.add(f"no strategy has a block '{tag}'", event.where, nearest(tag, tags, "tags"))
    for model in having:
        if check_target(event, model, problems):
            with problems.collecting():
                Actions(model, scenario.events).of(number, 0.0)


def check_rules(
    rules: Sequence[Rule],
    units: Mapping[str, Unit],
    loops: Collection[str],
    problems: Problems,
    air_pressure: float = ATMOSPHERE,
) -> None:
    """Note what is wrong with the names and units of rules.

    `units`: every signal that any of the strategies has, and the unit it is read in; `loops`: every controller's tag.
    """
    for rule in rules:
        if rule.kind == "margins":
            if rule.loop not in loops:
                problems.add(f"no controller is called '{rule.loop}'", rule.where, nearest(rule.loop, loops, "loops"))
        elif _known(rule, units, problems):
            _check_units(rule, units, problems, air_pressure)


def _known(rule: Rule, units: Mapping[str, Unit], problems: Problems) -> bool:
    names = [rule.signal, rule.of] if isinstance(rule.of, str) else [rule.signal]
    unknown = [name for name in names if name not in units]
    for name in unknown:
        problems.add(f"no signal is called '{name}'", rule.where, nearest(name, units, "signals"))
    return not unknown


def _check_units(rule: Rule, units: Mapping[str, Unit], problems: Problems, air_pressure: float) -> None:
    unit = units[rule.signal]
    if rule.limit is not None and rule.kind in SCALES:
        _check_limit(rule, rule.limit, unit, problems, air_pressure)
    if isinstance(rule.of, Quantity):
        si_value(rule.of, unit, problems, air_pressure, f"'of' beside '{rule.signal}'")
    elif isinstance(rule.of, str) and (units[rule.of].dimension, units[rule.of].point) != (unit.dimension, unit.point):
        what = f"'{rule.signal}' is in {unit.text}, '{rule.of}' in {units[rule.of].text}: there is no difference"
        problems.add(what, rule.where, "compare signals of one kind")
    if rule.band is not None:
        si_value(rule.band, difference_of(unit), problems, air_pressure, f"the band round '{rule.signal}'")


def _check_limit(rule: Rule, limit: Quantity, unit: Unit, problems: Problems, air_pressure: float) -> None:
    scale, what = SCALES[rule.kind], f"{rule.kind} of '{rule.signal}'"
    difference = difference_of(unit)
    if scale == "step" and per_step(limit):
        return
    if scale in ("times time", "per time"):
        _check_product(limit, difference, "*" if scale == "times time" else "/", what, problems)
    else:
        si_value(limit, unit if scale == "point" else difference, problems, air_pressure, what)


def _check_product(limit: Quantity, difference: Unit, sign: str, what: str, problems: Problems) -> None:
    second = parse_unit("s").dimension
    own = difference.dimension
    wanted = own.multiply(second) if sign == "*" else own.divide(second)
    found = limit.unit.dimension if limit.unit else Dimension()
    if found == wanted or (limit.unit is None and limit.value == 0):
        return
    plain = difference.text in ("dimensionless", "count", "on/off")
    if sign == "*":
        time = "min" if plain else times_minute(difference).text
    else:
        time = "1/min" if plain else f"{difference.text}/min"
    problems.add(f"{limit.text} where {what} wants {time}", limit.where, f"write it in {time}")

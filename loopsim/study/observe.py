"""A simulated case as the judging sees it: what happened, what it reaches, loops, graph."""

from __future__ import annotations

from collections.abc import Iterable

import networkx as nx

from loopsim.documents.types import Event, Rule, Scenario
from loopsim.model.graph import influences, reached_from
from loopsim.model.types import Model
from loopsim.simulation.actions import target_of
from loopsim.simulation.case import Case
from loopsim.simulation.conditions import resolve
from loopsim.simulation.run import Happened, RunResult
from loopsim.study.types import Happening, Loop, LoopMargins, Run
from loopsim.study.windows import seconds


def names_to_judge(case: Case) -> tuple[str, ...]:
    """The signals that rules and figures look at: what a run has to keep at full resolution."""
    names = rule_names(case.scenario)
    names += [name for one in case.model.controllers for name in (one.pv, one.sp, one.out)]
    return tuple(dict.fromkeys(names))


def rule_names(scenario: Scenario) -> list[str]:
    """The signals that a scenario's rules speak of."""
    return [name for rule in scenario.accept for name in (rule.signal, rule.of) if isinstance(name, str) and name]


def run_of(
    case: Case,
    result: RunResult,
    computing: Iterable[str] = (),
    margins: dict[str, LoopMargins] | None = None,
) -> Run:
    """A run ready to be judged.

    `computing`: tags of blocks that only compute, with or without controllers; `margins` of each loop where the linear
    side was asked.
    """
    model, events, graph = case.model, case.scenario.events, influences(case.model)
    judged = names_to_judge(case)
    happenings = tuple(_happening(one, events[one.number], model, graph, judged) for one in result.happened)
    if case.scenario.starts == "given":
        start = Happening(0.0, "start", "", "start from given values", frozenset(judged))
        happenings = (start, *happenings)
    return Run(
        strategy=case.name,
        trends=result.trends,
        lasts=seconds(case.scenario.lasts),
        happenings=happenings,
        scheduled=tuple(seconds(one.at) for one in events if one.at is not None),
        not_applicable=frozenset(name for rule in case.scenario.accept for name in _lacking(rule, model)),
        skipped=tuple(event_text(events[number]) for number in sorted(result.not_applicable)),
        spans=_spans(model),
        loops=tuple(Loop(one.tag, one.pv, one.sp, one.out, one.ff) for one in model.controllers),
        graph=graph,
        computing=frozenset(computing) - {one.tag for one in model.controllers},
        margins=margins,
        air_pressure=model.air_pressure,
        remarks=tuple(one.sentence for one in case.point.unreached) if case.point is not None else (),
    )


def _happening(one: Happened, event: Event, model: Model, graph: nx.DiGraph[str], judged: tuple[str, ...]) -> Happening:
    reached = reached_from(graph, one.target)
    names = frozenset(name for name in judged if name in reached or resolve(model, name) in reached)
    stepped = event.kind == "step" and one.target in {controller.sp for controller in model.controllers}
    steps = (one.before, one.after) if stepped else (None, None)
    return Happening(one.time, event.kind, one.target, event_text(event), names, event.where, *steps)


def event_text(event: Event) -> str:
    """An event in a few words: `step feed_q by 30 %`, `fault TT-101 frozen`."""
    for word, value in (("to", event.to), ("by", event.by), ("times", event.times)):
        text = getattr(value, "text", "")
        if text:
            return f"{event.kind} {event.target} {word} {text}"
    return f"{event.kind} {target_of(event) if not event.fault else f'{event.target} {event.fault}'}"


def _lacking(rule: Rule, model: Model) -> list[str]:
    """The names of a rule that this strategy does not have."""
    signals = [name for name in (rule.signal, rule.of) if isinstance(name, str) and name]
    missing = [name for name in signals if resolve(model, name) is None]
    if rule.loop and rule.loop not in {one.tag for one in model.controllers}:
        missing.append(rule.loop)
    return missing


def _spans(model: Model) -> dict[str, float | None]:
    """The width of each controller's range [SI], for its measured value."""
    found: dict[str, float | None] = {}
    for one in model.controllers:
        low, high = (model.slots.get(f"{one.tag}.range.{end}") for end in ("low", "high"))
        found[one.pv] = high.value - low.value if low is not None and high is not None else None
    return found

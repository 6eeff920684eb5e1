"""What a run's picture shows: the controlled signals of all strategies, what controllers do, what disturbs."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from loopsim.documents.types import Scenario
from loopsim.language.units import Unit, from_si, to_si
from loopsim.results import Curve, Figure, FloatArray, Panel, Trends
from loopsim.study.types import Judged

MOST = {"controlled": 2, "outputs": 3, "upsets": 2}  # panels of each sort


def run_figure(scenario: Scenario, judged: Sequence[Judged]) -> Figure | None:
    """The comparison of all strategies of one scenario; None when none of them ran."""
    ran = [one for one in judged if len(one.run.trends.time)]
    if not ran:
        return None
    runs = {one.run.strategy: one.run.trends for one in ran}
    scale, word = _time_scale(ran[0].run.trends.time)
    outputs = list(dict.fromkeys(loop.out for one in ran for loop in one.run.loops))
    upsets = list(dict.fromkeys(happening.target for one in ran for happening in one.run.happenings))
    controlled = _controlled(scenario, ran)
    panels = _panels(controlled[: MOST["controlled"]], runs, scenario, scale, _set_points(ran))
    panels += _panels(outputs[: MOST["outputs"]], runs, scenario, scale, {})
    others = [name for name in upsets if name not in controlled]
    panels += _panels(others[: MOST["upsets"]], runs, scenario, scale, {})
    marks = tuple((one.time / scale, one.text) for one in ran[0].run.happenings if one.kind != "start")
    return Figure(scenario.name.replace("_", " "), f"time [{word}]", tuple(panels), marks)


def _controlled(scenario: Scenario, ran: Sequence[Judged]) -> list[str]:
    """The judged signals that are not shares: temperatures, levels, concentrations."""
    units = ran[0].run.trends.units
    names = dict.fromkeys(rule.signal for rule in scenario.accept if rule.signal)
    found = [name for name in names if name in units and units[name].text != "%"]
    return found or list(dict.fromkeys(loop.pv for one in ran for loop in one.run.loops))


def _set_points(ran: Sequence[Judged]) -> dict[str, str]:
    """Unit text -> a set point in use that belongs beside signals in that unit, that of the first loop."""
    found: dict[str, str] = {}
    for one in ran:
        for loop in one.run.loops:
            unit = one.run.trends.units.get(loop.sp)
            if unit is not None:
                found.setdefault(unit.text, loop.sp)
    return found


def _panels(
    names: Sequence[str], runs: Mapping[str, Trends], scenario: Scenario, scale: float, set_points: Mapping[str, str]
) -> list[Panel]:
    """A panel for each name: one curve for each strategy that has it, or one alone where all agree."""
    panels = []
    for name in names:
        having = {strategy: trends for strategy, trends in runs.items() if name in trends.columns}
        if not having:
            continue
        unit = next(iter(having.values())).units[name]
        curves = [_curve(strategy, trends, name, unit, scale) for strategy, trends in having.items()]
        if len(curves) == len(runs) and all(np.array_equal(curve.y, curves[0].y) for curve in curves):
            curves = [Curve("", curves[0].x, curves[0].y)]
        set_point = set_points.get(unit.text)
        first = next(iter(having.values()))
        if set_point is not None and set_point in first.columns:
            curves.append(Curve("set point", first.time / scale, _shown(first.columns[set_point], unit), dashed=True))
        panels.append(Panel(f"{name} [{unit.text}]", tuple(curves), _levels(name, unit, scenario)))
    return panels


def _curve(strategy: str, trends: Trends, name: str, unit: Unit, scale: float) -> Curve:
    return Curve(strategy, trends.time / scale, _shown(trends.columns[name], unit))


def _levels(name: str, unit: Unit, scenario: Scenario) -> tuple[tuple[str, float], ...]:
    """Limits of the rules that lie on the scale of a signal."""
    found = []
    for rule in scenario.accept:
        limit = rule.limit
        if rule.signal == name and rule.kind in ("max", "min") and limit is not None and limit.unit is not None:
            found.append((rule.kind, from_si(to_si(limit.value, limit.unit), unit)))
    return tuple(dict.fromkeys(found))


def _shown(column: FloatArray, unit: Unit) -> FloatArray:
    return (column - unit.offset) / unit.factor


def _time_scale(time: FloatArray) -> tuple[float, str]:
    last = float(time[-1]) if len(time) else 0.0
    if last <= 600:
        return 1.0, "s"
    return (60.0, "min") if last <= 6 * 3600 else (3600.0, "h")

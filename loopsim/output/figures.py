"""What a run's picture shows: the controlled signal of all strategies, what they do for it, and what disturbs it."""

from __future__ import annotations

from collections.abc import Mapping

from loopsim.language.units import Unit, from_si, to_si
from loopsim.results import Curve, Figure, FloatArray, Panel, Trends
from loopsim.study.types import StrategyVerdict


def run_figure(scenario: str, verdicts: Mapping[str, StrategyVerdict]) -> Figure | None:
    """The comparison of all strategies of one scenario; None when none of them ran."""
    runs = {name: one.run.trends for name, one in verdicts.items() if one.run.trends is not None}
    if not runs:
        return None
    first = next(one for one in verdicts.values() if one.run.trends is not None)
    scale, word = _time_scale(next(iter(runs.values())).time)
    judged = list(dict.fromkeys(rule.signal for rule in first.run.scenario.accept if rule.signal))
    outputs = list(dict.fromkeys(loop.out for one in verdicts.values() for loop in one.run.loops))
    upset = list(dict.fromkeys(one.target for verdict in verdicts.values() for one in verdict.run.happenings))
    panels = []
    for names in (_controlled(judged, runs), outputs, [name for name in upset if name not in judged]):
        panels += _panels(names, runs, verdicts, scale)
    marks = tuple((one.time / scale, one.text) for one in first.run.happenings)
    return Figure(scenario.replace("_", " "), f"time [{word}]", tuple(panels), marks)


def _controlled(judged: list[str], runs: Mapping[str, Trends]) -> list[str]:
    """The judged signals that are not shares: temperatures, levels, concentrations."""
    units = next(iter(runs.values())).units
    return [name for name in judged if name in units and units[name].text != "%"][:2]


def _panels(
    names: list[str], runs: Mapping[str, Trends], verdicts: Mapping[str, StrategyVerdict], scale: float
) -> list[Panel]:
    """A panel for each name: one curve for each strategy that has it, or one alone where all agree."""
    panels = []
    for name in names[:3]:
        having = {strategy: trends for strategy, trends in runs.items() if name in trends.columns}
        if not having:
            continue
        unit = next(iter(having.values())).units[name]
        curves = [
            Curve(strategy, one.time / scale, _shown(one.columns[name], unit)) for strategy, one in having.items()
        ]
        if all((curve.y == curves[0].y).all() for curve in curves if curve.y.shape == curves[0].y.shape):
            curves = [Curve("all", curves[0].x, curves[0].y)]
        panels.append(Panel(f"{name} [{unit.text}]", tuple(curves), _levels(name, unit, verdicts)))
    return panels


def _levels(name: str, unit: Unit, verdicts: Mapping[str, StrategyVerdict]) -> tuple[tuple[str, float], ...]:
    """Limits of the rules that lie on the scale of a signal."""
    rules = next(iter(verdicts.values())).run.scenario.accept
    found = []
    for rule in rules:
        if (
            rule.signal == name
            and rule.kind in ("max", "min")
            and rule.limit is not None
            and rule.limit.unit is not None
        ):
            found.append((rule.kind, from_si(to_si(rule.limit.value, rule.limit.unit), unit)))
    return tuple(found)


def _shown(column: FloatArray, unit: Unit) -> FloatArray:
    return (column - unit.offset) / unit.factor


def _time_scale(time: FloatArray) -> tuple[float, str]:
    last = float(time[-1]) if len(time) else 0.0
    if last <= 600:
        return 1.0, "s"
    return (60.0, "min") if last <= 6 * 3600 else (3600.0, "h")

"""What a run's picture shows: the controlled signals of all strategies, what controllers do, what disturbs."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from loopsim.documents.types import Quantity, Rule, Scenario
from loopsim.language.units import Unit, from_si, to_si
from loopsim.output.smoothing import running_median
from loopsim.results import Band, Curve, Figure, FloatArray, Panel
from loopsim.study.rules import in_si, size
from loopsim.study.types import Judged, Run
from loopsim.study.windows import window

MOST = {"controlled": 2, "outputs": 3, "upsets": 2}  # panels of each sort
STEPWISE = frozenset({"step", "pulse", "mode", "fault"})  # kinds of event that hold a value until the next


def run_figure(scenario: Scenario, judged: Sequence[Judged]) -> Figure | None:
    """The comparison of all strategies of one scenario; None when none of them ran or nothing was recorded."""
    runs = {one.run.strategy: one.run for one in judged if len(one.run.trends.time)}
    if not runs:
        return None
    scale, word = _time_scale(next(iter(runs.values())).trends.time)
    view = _View(scenario, runs, scale)
    marks = {
        (one.time / scale, one.text): None for run in runs.values() for one in run.happenings if one.kind != "start"
    }
    panels = tuple(view.panels())
    if not panels:
        return None
    notes = [scenario.about] if scenario.about else []
    if any(curve.faint for panel in panels for curve in panel.curves):
        notes.append("Noisy signals: pale as recorded, strong their running median.")
    return Figure(judged[0].scenario, f"time [{word}]", panels, tuple(sorted(marks)), tuple(notes))


class _View:
    """The runs of one scenario (strategy -> run), seen on a time scale of `scale` [s]."""

    def __init__(self, scenario: Scenario, runs: Mapping[str, Run], scale: float) -> None:
        self.scenario, self.runs, self.scale = scenario, runs, scale
        self.set_points = self._set_points()

    def panels(self) -> list[Panel]:
        """The panels from top to bottom."""
        controlled = self._controlled()[: MOST["controlled"]]
        outputs = list(dict.fromkeys(loop.out for run in self.runs.values() for loop in run.loops))
        shown = {*controlled, *outputs, *(self.set_points.get(self._unit(name).text, "") for name in controlled)}
        upsets = {one.target: None for run in self.runs.values() for one in run.happenings if one.target not in shown}
        outputs = [name for name in outputs if self._having(name)][: MOST["outputs"]]
        upset = [name for name in upsets if self._having(name)][: MOST["upsets"]]
        found = [self._controlled_panel(name) for name in controlled]
        found += [Panel(self._label(name), self._curves(name, True, len(self.runs) > 1)) for name in outputs]
        found += [Panel(self._label(name), self._curves(name, self._is_stepwise(name), True)) for name in upset]
        return found or [Panel(self._label(name), self._curves(name, False, True)) for name in self._recorded()]

    def _recorded(self) -> list[str]:
        """The first signals that were recorded, where those that a picture is made of were not."""
        names = dict.fromkeys(name for run in self.runs.values() for name in run.trends.columns)
        return list(names)[: MOST["outputs"]]

    def _having(self, name: str) -> dict[str, Run]:
        return {strategy: run for strategy, run in self.runs.items() if name in run.trends.columns}

    def _unit(self, name: str) -> Unit:
        return next(iter(self._having(name).values())).trends.units[name]

    def _controlled(self) -> list[str]:
        """The judged signals that are not shares: temperatures, levels, concentrations."""
        names = dict.fromkeys(rule.signal for rule in self.scenario.accept if rule.signal)
        found = [name for name in names if self._having(name) and self._unit(name).text != "%"]
        measured = dict.fromkeys(loop.pv for run in self.runs.values() for loop in run.loops)
        return found or [name for name in measured if self._having(name)]

    def _set_points(self) -> dict[str, str]:
        """Unit text -> the set point in use that belongs beside signals in that unit, that of the first loop."""
        found: dict[str, str] = {}
        for run in self.runs.values():
            for loop in run.loops:
                if loop.sp in run.trends.columns:
                    found.setdefault(run.trends.units[loop.sp].text, loop.sp)
        return found

    def _is_stepwise(self, name: str) -> bool:
        kinds = {one.kind for run in self.runs.values() for one in run.happenings if one.target == name}
        return kinds <= STEPWISE

    # ------------------------------------------------------------ one panel
    def _label(self, name: str) -> str:
        return f"{name} [{self._unit(name).text}]"

    def _controlled_panel(self, name: str) -> Panel:
        unit = self._unit(name)
        drawn = self._curves(name, False, len(self.runs) > 1)
        set_point = self.set_points.get(unit.text, "")
        for run in list(self._having(set_point).values())[:1]:
            drawn += (Curve("set point", *self._line(run, set_point, unit), step=True, dashed=True),)
        return Panel(self._label(name), drawn, self._levels(name, unit), self._bands(name, unit))

    def _curves(self, name: str, step: bool, joined: bool) -> tuple[Curve, ...]:
        """A curve for each strategy that has the signal; `joined`: one without a name where all agree."""
        unit, having = self._unit(name), self._having(name)
        curves = [Curve(strategy, *self._line(run, name, unit), step=step) for strategy, run in having.items()]
        first = curves[0]
        if joined and len(curves) == len(self.runs) and all(np.array_equal(one.y, first.y) for one in curves):
            curves = [replace(first, name="")]
        return tuple(each for one in curves for each in _told_from_noise(one))

    def _line(self, run: Run, name: str, unit: Unit) -> tuple[FloatArray, FloatArray]:
        return run.trends.time / self.scale, _shown(run, run.trends.columns[name], unit)

    def _levels(self, name: str, unit: Unit) -> tuple[tuple[str, float], ...]:
        """Limits of the rules that lie on the scale of a signal."""
        run, found = next(iter(self.runs.values())), []
        for rule in self.scenario.accept:
            limit = rule.limit
            if rule.signal == name and rule.kind in ("max", "min") and limit is not None and limit.unit is not None:
                level = to_si(limit.value, limit.unit, run.air_pressure)
                found.append((f"{rule.kind} {limit.text}", from_si(level, unit, run.air_pressure)))
        return tuple(dict.fromkeys(found))

    def _bands(self, name: str, unit: Unit) -> tuple[Band, ...]:
        """Where rules ask the signal to stay, over their windows."""
        rules = [rule for rule in self.scenario.accept if rule.kind == "within" and rule.signal == name]
        found = [self._band(rule, run, unit) for rule in rules for run in list(self._having_middle(rule).values())[:1]]
        return tuple(band for band in found if len(band.x) > 1)

    def _having_middle(self, rule: Rule) -> Mapping[str, Run]:
        return self._having(rule.of) if isinstance(rule.of, str) else self.runs

    def _band(self, rule: Rule, run: Run, unit: Unit) -> Band:
        assert rule.limit is not None
        frame, time = window(rule, run), run.trends.time
        inside = (time >= frame.begin) & (time <= frame.end)
        middle = np.full(len(time), in_si(rule.of, run)) if isinstance(rule.of, Quantity) else _column(run, rule.of)
        half = size(rule.limit, unit)
        low, high = (_shown(run, middle[inside] + way * half, unit) for way in (-1.0, 1.0))
        return Band(f"within {rule.limit.text}", time[inside] / self.scale, low, high)


def _column(run: Run, name: str | None) -> FloatArray:
    assert name is not None
    return run.trends.columns[name]


def _shown(run: Run, column: FloatArray, unit: Unit) -> FloatArray:
    return (column - (run.air_pressure if unit.gauge else unit.offset)) / unit.factor


def _told_from_noise(curve: Curve) -> list[Curve]:
    """The curve; or, where it is noisy, faintly the curve and its running median."""
    smooth = running_median(curve.y)
    if smooth is None:
        return [curve]
    return [replace(curve, faint=True), replace(curve, y=smooth)]


def _time_scale(time: FloatArray) -> tuple[float, str]:
    last = float(time[-1]) if len(time) else 0.0
    if last <= 600:
        return 1.0, "s"
    return (60.0, "min") if last <= 6 * 3600 else (3600.0, "h")

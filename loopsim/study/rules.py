"""Kinds of rule: each measures a run and says whether it passed.

To add a kind: write one function that takes a `Measured` and gives a `Finding`, put it into `KINDS`, and describe its
key in `documents/shapes.py`. On the limit is passed (rounding of one part in 10^9 is on the limit).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

from loopsim.documents.types import Quantity, Rule
from loopsim.language.units import PERCENT, Unit, difference_of, parse_unit, to_si
from loopsim.study.course import Course
from loopsim.study.types import Finding, Run

ROUNDING = 1e-9


@dataclass(frozen=True, slots=True)
class Measured:
    """A rule's signal over its window, the difference to its `of` where it has one, and what else a kind may need."""

    rule: Rule
    run: Run
    course: Course
    difference: Course | None
    begin: float
    end: float
    unit: Unit

    def limit(self, difference: bool = False) -> float:
        """The rule's limit in SI."""
        assert self.rule.limit is not None
        return si(self.rule.limit, self.run, difference_of(self.unit) if difference else self.unit)


def si(quantity: Quantity, run: Run, unit: Unit) -> float:
    """A written number in SI; a bare number counts in `unit`."""
    return to_si(quantity.value, quantity.unit or unit, run.air_pressure)


def on_or_under(value: float, limit: float) -> bool:
    """Whether a value keeps below a limit."""
    return value <= limit + ROUNDING * max(abs(limit), abs(value))


def greatest(measured: Measured) -> Finding:
    """`max`: the signal never goes above."""
    value, when = measured.course.maximum()
    limit = measured.limit()
    return Finding(on_or_under(value, limit), value, limit, measured.unit, when)


def least(measured: Measured) -> Finding:
    """`min`: the signal never goes below."""
    value, when = measured.course.minimum()
    limit = measured.limit()
    return Finding(on_or_under(-value, -limit), value, limit, measured.unit, when)


def within(measured: Measured) -> Finding:
    """`within … of … by …`: inside a band from `by` after the window's start until its end."""
    rule, limit = measured.rule, measured.limit(difference=True)
    begin = measured.begin + (si(rule.by, measured.run, SECONDS) if rule.by is not None else 0.0)
    unit = difference_of(measured.unit)
    if begin > measured.end:
        return Finding(None, None, limit, unit, None, "the run ends before the time by which the signal must be inside")
    assert measured.difference is not None
    part = measured.difference.within(begin, measured.end)
    value, when = part.largest()
    return Finding(on_or_under(abs(value), limit), value, limit, unit, when)


def overshoot(measured: Measured) -> Finding:
    """Per cent of the last set-point step beyond its end."""
    return _beyond(measured, 1.0)


def undershoot(measured: Measured) -> Finding:
    """Per cent of the last set-point step before its beginning: the inverse response."""
    return _beyond(measured, -1.0)


def _beyond(measured: Measured, way: float) -> Finding:
    limit = measured.limit()
    step = _last_step(measured)
    if step is None:
        return Finding(
            None, None, limit, PERCENT, None, "no step of a set point that reaches the signal comes before it"
        )
    before, after = step
    size = after - before
    if size == 0:
        return Finding(None, None, limit, PERCENT, None, "the step before it has no size")
    edge = after if way > 0 else before
    share = Course(measured.course.start, measured.course.length, way * (measured.course.samples - edge) / size)
    value, when = share.maximum()
    value = max(value, 0.0)
    return Finding(on_or_under(value, limit), value, limit, PERCENT, when)


def _last_step(measured: Measured) -> tuple[float, float] | None:
    """The set-point step that a rule speaks of: the last one up to the window's start (or the first in it)."""
    set_points = {loop.sp for loop in measured.run.loops}
    steps = [
        one
        for one in measured.run.happenings
        if one.kind == "step" and one.target in set_points and measured.rule.signal in one.reaches
    ]
    early = [one for one in steps if one.time <= measured.begin + 1e-9]
    found = early[-1:] or steps[:1]
    return (found[0].before, found[0].after) if found else None


def absolute_error(measured: Measured) -> Finding:
    """`iae`: the integral of the absolute deviation."""
    assert measured.difference is not None
    value = measured.difference.absolute_integral()
    limit = measured.limit(difference=True)
    unit = measured.rule.limit.unit if measured.rule.limit else None
    return Finding(on_or_under(value, limit), value, limit, unit)


def travel(measured: Measured) -> Finding:
    """The sum of all movements, through the play that `band` gives."""
    value, limit = measured.course.travel(_band(measured, 0.0)), measured.limit(difference=True)
    return Finding(on_or_under(value, limit), value, limit, difference_of(measured.unit))


def deviation(measured: Measured) -> Finding:
    """One sigma over the window."""
    value, limit = measured.course.deviation(), measured.limit(difference=True)
    return Finding(on_or_under(value, limit), value, limit, difference_of(measured.unit))


def reversals(measured: Measured) -> Finding:
    """How often the signal turns round; swings inside `band` (else a thousandth of its unit) are not counted."""
    dead_zone = _band(
        measured, 0.1 * measured.unit.factor if measured.unit.text == "%" else 1e-3 * measured.unit.factor
    )
    value = float(measured.course.reversals(dead_zone))
    assert measured.rule.limit is not None
    return Finding(value <= measured.rule.limit.value, value, measured.rule.limit.value, COUNT)


def _band(measured: Measured, otherwise: float) -> float:
    band = measured.rule.band
    return si(band, measured.run, difference_of(measured.unit)) if band is not None else otherwise


def rate(measured: Measured) -> Finding:
    """The largest rate of change."""
    value, when = measured.course.steepest()
    assert measured.rule.limit is not None
    limit = si(measured.rule.limit, measured.run, measured.unit)
    return Finding(on_or_under(value, limit), value, limit, measured.rule.limit.unit, when)


def outside(measured: Measured) -> Finding:
    """Time outside a band round `of`."""
    assert measured.rule.band is not None and measured.difference is not None
    band = si(measured.rule.band, measured.run, difference_of(measured.unit))
    value = measured.difference.time_outside(band)
    assert measured.rule.limit is not None
    limit = si(measured.rule.limit, measured.run, SECONDS)
    return Finding(on_or_under(value, limit), value, limit, measured.rule.limit.unit or SECONDS)


def alarms(measured: Measured) -> Finding:
    """How often an on/off signal comes on."""
    path = measured.course.path()
    value = float(((path[1:] > 0.5) & (path[:-1] <= 0.5)).sum() + (len(path) > 0 and path[0] > 0.5))
    assert measured.rule.limit is not None
    return Finding(value <= measured.rule.limit.value, value, measured.rule.limit.value, COUNT)


SECONDS = parse_unit("s")
COUNT = Unit("count", 1.0, 0.0, PERCENT.dimension)
KINDS: dict[str, Callable[[Measured], Finding]] = {
    "max": greatest,
    "min": least,
    "within": within,
    "overshoot": overshoot,
    "undershoot": undershoot,
    "iae": absolute_error,
    "travel": travel,
    "deviation": deviation,
    "reversals": reversals,
    "rate": rate,
    "outside": outside,
    "alarms": alarms,
}


def finite(value: float | None) -> float | None:
    """A number that can be printed, or None."""
    return value if value is not None and math.isfinite(value) else None

"""Figures of every controlled signal against its set point in use: over the run, and after each event."""

from __future__ import annotations

from collections.abc import Sequence

from loopsim.documents.types import Rule
from loopsim.language.units import Unit, difference_of, parse_unit, times_minute
from loopsim.study.path import (
    Path,
    between,
    duration,
    farthest,
    integral_of_size,
    minus,
    path_of,
    reversals,
    stays_outside,
    travel,
)
from loopsim.study.rules import size, value_at
from loopsim.study.steps import Settling, rest_of, step_figures, swing
from loopsim.study.types import EventMetrics, Happening, Loop, LoopMetrics, Measure, Run
from loopsim.study.windows import first_instant, last_instant, next_event, reaches, seconds, tie
from loopsim.study.words import clock

BAND = 0.02  # of the measuring range, where no rule gives a band
QUIET = 0.05  # of the run: a stretch before the first event must be this long to show what noise does
DEAD_ZONE = 0.001  # of the output's scale: smaller movements are no reversals


def metrics_of(run: Run, rules: Sequence[Rule] = ()) -> tuple[LoopMetrics, ...]:
    """The figures of each loop whose signals the run has kept, in the order of the loops.

    Bands and dwells for settling come from the rules on the same signal or set point.
    """
    known = run.trends.pieces.names
    if not len(run.trends.pieces.start):
        return ()
    return tuple(_loop(run, loop, rules) for loop in run.loops if {loop.pv, loop.sp, loop.out} <= set(known))


def _loop(run: Run, loop: Loop, rules: Sequence[Rule]) -> LoopMetrics:
    pieces = run.trends.pieces
    unit = run.trends.units.get(loop.pv) or run.trends.units.get(loop.sp)
    difference = difference_of(unit) if unit else None
    error = minus(path_of(pieces, loop.pv), path_of(pieces, loop.sp))
    output = path_of(pieces, loop.out)
    settling = _settling(run, loop, rules, unit)
    whole = (
        *_deviation(error, difference),
        _outside(error, settling, difference),
        *_output(output, run.trends.units.get(loop.out)),
        _noise(run, output, run.trends.units.get(loop.out)),
    )
    return LoopMetrics(loop.tag, loop.pv, whole, _events(run, loop, error, settling, difference))


def _settling(run: Run, loop: Loop, rules: Sequence[Rule], unit: Unit | None) -> Settling:
    """The narrowest band that a rule gives for this signal, with that rule's dwell; else a share of the range."""
    bands = []
    for rule in rules:
        quantity = rule.limit if rule.kind == "within" else rule.band if rule.kind == "outside" else None
        if quantity is not None and (rule.of == loop.sp or rule.signal == loop.pv):
            bands.append((size(quantity, unit), seconds(rule.dwell) if rule.dwell is not None else None))
    if bands:
        return Settling(*min(bands, key=lambda one: one[0]))
    span = run.spans.get(loop.pv)
    return Settling(BAND * span if span is not None else None)


# ---------------------------------------------------------------- over a stretch
def _deviation(error: Path, unit: Unit | None) -> tuple[Measure, Measure]:
    peak = farthest(error)
    product = times_minute(unit) if unit else None
    return Measure("peak_deviation", peak.value, unit, peak.at), Measure("iae", integral_of_size(error), product)


def _outside(error: Path, settling: Settling, unit: Unit | None) -> Measure:
    if settling.band is None:
        return Measure("time_outside", None, reason="no rule gives a band, and the measuring range is not known")
    stays = stays_outside(error, settling.band * (1 + 1e-9))
    total = sum(stay.end - stay.begin for stay in stays)
    return Measure("time_outside", total, parse_unit("min"), stays[-1].end if stays else None)


def _output(output: Path, unit: Unit | None) -> tuple[Measure, Measure]:
    scale = 1.0 if unit is not None and unit.text == "%" else 0.0
    return (
        Measure("output_travel", travel(output), difference_of(unit) if unit else None),
        Measure("output_reversals", float(reversals(output, DEAD_ZONE * scale))),
    )


def _noise(run: Run, output: Path, unit: Unit | None) -> Measure:
    """What noise moves the output by (one sigma): told where nothing else moves it."""
    difference = difference_of(unit) if unit else None
    begin, end = first_instant(run.trends.pieces), last_instant(run.trends.pieces)
    first = min((one.time for one in run.happenings), default=end)
    if first - begin >= QUIET * (end - begin) and first > begin:
        return Measure("output_noise", swing(between(output, begin, first, closing=first >= end)), difference)
    tail = between(output, end - 0.2 * (end - begin), end, closing=True)
    rest = rest_of(output, difference)
    if not len(tail) or rest.value is None:
        reason = "no stretch of the run is without events, and the output does not come to rest"
        return Measure("output_noise", None, difference, reason=reason)
    return Measure("output_noise", swing(tail), difference)


# ---------------------------------------------------------------- after each event
def _events(run: Run, loop: Loop, error: Path, settling: Settling, unit: Unit | None) -> tuple[EventMetrics, ...]:
    """One entry for each instant at which something happened that reaches the signal or its set point."""
    found: list[EventMetrics] = []
    relevant = sorted((one for one in run.happenings if reaches(one, (loop.pv, loop.sp))), key=lambda one: one.time)
    for number, first in enumerate(relevant):
        if number and first.time <= relevant[number - 1].time + tie(first.time):
            continue
        together = [one for one in relevant if abs(one.time - first.time) <= tie(first.time)]
        found.append(_after(run, loop, error, settling, unit, together))
    return tuple(found)


def _after(
    run: Run, loop: Loop, error: Path, settling: Settling, unit: Unit | None, events: list[Happening]
) -> EventMetrics:
    begin = events[0].time
    known = last_instant(run.trends.pieces)
    following = next_event(run, begin)
    end = min(following if following is not None else known, known)
    text = ", ".join(one.text for one in events)
    stretch = between(error, begin, end, closing=following is None)
    if not len(stretch) or duration(stretch) == 0:
        reason = f"the run has nothing after {clock(begin)}"
        return EventMetrics(text, begin, end, (Measure("peak_deviation", None, unit, reason=reason),))
    figures = _figures(run, loop, stretch, settling, unit, events)
    return EventMetrics(text, begin, end, (*_deviation(stretch, unit), *figures))


def _figures(
    run: Run, loop: Loop, stretch: Path, settling: Settling, unit: Unit | None, events: list[Happening]
) -> tuple[Measure, ...]:
    """Figures of the error; a step of the set point makes it a response from where the signal was to 0."""
    step = next((one for one in events if one.target == loop.sp and one.set_point_to is not None), None)
    if step is None or step.set_point_to is None or step.set_point_from is None:
        return step_figures(stretch, 0.0, 0.0, settling, unit)
    start = value_at(run, loop.pv, step.time) - step.set_point_to
    return step_figures(stretch, start, 0.0, settling, unit, abs(step.set_point_to - step.set_point_from))

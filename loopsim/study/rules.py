"""The kinds of rule: each a pure function from a `Case` to a `Finding`.

To add a kind: write its function here, put it in `KINDS`, give it a shape in `documents.shapes.RULES` (its keys) and a
line in `study.checks.SCALES` (the unit of its limit). A function measures over the window that it is given; whether the
run covers the window, and whether anything disturbed the signal, is judged once for all kinds in `study.judge`.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

from loopsim.documents.types import Quantity, Rule
from loopsim.language.units import Unit, difference_of, to_si
from loopsim.study.path import (
    Path,
    Point,
    Stay,
    between,
    farthest,
    highest,
    integral_of_size,
    largest_jump,
    lowest,
    minus,
    path_of,
    reversals,
    standard_deviation,
    stays_above,
    stays_outside,
    steepest,
    times,
    travel,
)
from loopsim.study.types import LoopMargins, Run
from loopsim.study.windows import Window, seconds, set_point_step
from loopsim.study.words import clock, pair, shown

ROUNDING = 1e-9  # relative: a value this near its limit is on it, and on the limit is passed


@dataclass(frozen=True, slots=True)
class Case:
    """A rule over its window: the signal there, its error (signal minus `of`) where the rule has one, the limit [SI].

    `unit` is what people read the signal in, `frame` the window. Neither path is empty.
    """

    rule: Rule
    run: Run
    frame: Window
    signal: Path
    error: Path | None
    limit: float
    unit: Unit | None

    def of_error(self) -> Path:
        """The error; rules whose kind needs one have `of`, which reading the file has made sure."""
        assert self.error is not None
        return self.error

    def shown(self, value: float) -> str:
        """A difference on the signal's scale, in its unit."""
        return shown(value, difference_of(self.unit) if self.unit else None, self.run.air_pressure)


@dataclass(frozen=True, slots=True)
class Finding:
    """What a kind found: the value and limit [SI], their unit, when [s], whether the rule is passed, its margin.

    `passed` None: it cannot be judged, for the `reason`. `reason` is a sentence where the rule is not passed.
    """

    passed: bool | None
    value: float | None
    limit: float
    unit: Unit | None
    at: float | None = None
    reason: str = ""
    margin: float | None = None


def on_or_under(value: float, limit: float) -> bool:
    """Whether a size keeps below a limit, on the limit being passed: value <= limit * (1 + 1e-9)."""
    return bool(value <= limit * (1 + ROUNDING))  # numpy's own truth values are not True and False


def share_left(value: float, limit: float) -> float:
    """The margin of a size: 1 - value/limit; with a limit of 0 it is 1 for nothing at all, else minus infinity."""
    if limit == 0:
        return 1.0 if value == 0 else float("-inf")
    return 1.0 - value / limit


# ---------------------------------------------------------------- levels
def greatest(case: Case) -> Finding:
    """`max`: never above the limit."""
    return _level(case, highest(case.signal), 1.0)


def least(case: Case) -> Finding:
    """`min`: never below the limit."""
    return _level(case, lowest(case.signal), -1.0)


def _level(case: Case, extreme: Point, way: float) -> Finding:
    """The margin is the part of the way from the signal's first value of the run to the limit that was not gone.

    Where the run starts on the wrong side of the limit, the signal's measuring range stands for that way, if known.
    """
    excess = way * (extreme.value - case.limit)
    passed = excess <= ROUNDING * abs(case.limit)
    pieces, name = case.run.trends.pieces, case.rule.signal
    room = way * (case.limit - float(pieces.samples[0, 0, pieces.names.index(name)]))
    room = room if room > ROUNDING * abs(case.limit) else case.run.spans.get(name) or 0.0
    margin = -excess / room if room > 0 else None
    unit = case.rule.limit.unit if case.rule.limit else None
    value, limit = pair(extreme.value, case.limit, unit or case.unit, case.run.air_pressure)
    limits = f"no {'more' if way > 0 else 'less'} than {limit} is allowed"
    reason = "" if passed else f"{name} comes to {value} at {clock(extreme.at)}; {limits}"
    return Finding(passed, extreme.value, case.limit, unit or case.unit, extreme.at, reason, margin)


# ---------------------------------------------------------------- keeping to a set point
def within(case: Case) -> Finding:
    """`within … of … by …`: inside the band from `by` after the window's start until it ends.

    With `dwell` it is enough to come inside by then and to stay for that long.
    """
    if case.rule.dwell is not None:
        return _settled(case, seconds(case.rule.dwell))
    return _inside(case, case.of_error())


def _inside(case: Case, error: Path) -> Finding:
    worst = farthest(error)
    passed = on_or_under(abs(worst.value), case.limit)
    unit = case.rule.limit.unit if case.rule.limit else case.unit
    value, limit = pair(abs(worst.value), case.limit, unit, case.run.air_pressure)
    side = "above" if worst.value > 0 else "below"
    reason = f"{case.rule.signal} is {value} {side} {of_text(case.rule)} at {clock(worst.at)}; {limit} is allowed"
    margin = share_left(abs(worst.value), case.limit)
    return Finding(passed, abs(worst.value), case.limit, unit, worst.at, "" if passed else reason, margin)


def _settled(case: Case, dwell: float) -> Finding:
    """The first stay inside that is long enough, if it begins in time; else what the error is just after `by`."""
    error, frame = case.of_error(), case.frame
    end = min(float(error.ends()[-1]), frame.end)
    outside = stays_outside(error, case.limit * (1 + ROUNDING))
    for stay in _gaps(outside, frame.after, end):
        if stay.begin <= frame.begin and stay.end - stay.begin >= dwell * (1 - ROUNDING):
            found = _inside(case, between(error, stay.begin, stay.begin + dwell))
            return replace(found, passed=True, reason="")  # its ends lie on the limit, to the last bit or one beyond
    judged = between(error, frame.begin, min(frame.begin + dwell, end), closing=True)
    unit = case.rule.limit.unit if case.rule.limit else case.unit
    if not len(judged):
        return Finding(None, None, case.limit, unit, None, "the run ends before the signal must have settled")
    finding = _inside(case, judged)
    if finding.passed:  # what is known of the stay is inside, but too little of it is known
        reason = f"less than {clock(dwell)} is left after the signal comes inside the band"
        return Finding(None, finding.value, case.limit, finding.unit, finding.at, reason)
    return finding


def _gaps(stays: tuple[Stay, ...], begin: float, end: float) -> list[Stay]:
    """What lies between the stays, from `begin` to `end`."""
    edges = [begin, *(edge for stay in stays for edge in (stay.begin, stay.end)), end]
    return [Stay(low, high) for low, high in zip(edges[::2], edges[1::2], strict=True) if high > low]


def of_text(rule: Rule) -> str:
    """What a rule's error counts from, as written."""
    return rule.of.text if isinstance(rule.of, Quantity) else rule.of or ""


def absolute_error(case: Case) -> Finding:
    """`iae`: the integral of the absolute error."""
    return _sum(case, integral_of_size(case.of_error()), "the absolute error adds up to {value}")


def outside(case: Case) -> Finding:
    """`outside`: time outside `band` of `of`."""
    stays = stays_outside(case.of_error(), _band(case) * (1 + ROUNDING))
    total = math.fsum(stay.end - stay.begin for stay in stays)
    at = stays[-1].end if stays else None
    return _sum(case, total, f"{case.rule.signal} is outside for {{value}}", at)


# ---------------------------------------------------------------- steps of the set point
def overshoot(case: Case) -> Finding:
    """`overshoot`: how far past the set point, per cent of its last step before `after` (or as a difference)."""
    return _past(case, past_end=True)


def undershoot(case: Case) -> Finding:
    """`undershoot`: how far the wrong way from where the signal was at the step (inverse response), as `overshoot`."""
    return _past(case, past_end=False)


def _past(case: Case, past_end: bool) -> Finding:
    rule, run = case.rule, case.run
    assert rule.limit is not None
    of = rule.of if isinstance(rule.of, str) else ""
    step = set_point_step(run, rule.signal, of, rule, case.frame.after)
    if step is None or step.set_point_from is None or step.set_point_to is None:
        before = "in the run" if rule.after is None else f"up to {clock(case.frame.after)}"
        return _open(case, f"no step of a set point {before} reaches {rule.signal}")
    change = step.set_point_to - step.set_point_from
    if abs(change) <= ROUNDING * max(abs(step.set_point_to), abs(step.set_point_from)):
        return _open(case, f"the step of {step.target} at {clock(step.time)} has no size")
    judged = between(case.signal, max(step.time, case.frame.begin), case.frame.end, case.frame.closing)
    target = in_si(rule.of, run) if isinstance(rule.of, Quantity) else step.set_point_to
    edge = target if past_end else value_at(run, rule.signal, step.time)
    if not len(judged):
        return _open(case, f"{rule.signal} has no values after the step at {clock(step.time)}")
    way = math.copysign(1.0, change) * (1.0 if past_end else -1.0)
    worst = highest(times(minus(judged, edge), way))
    worst = Point(max(worst.value, 0.0), worst.at)
    if not per_step(rule.limit):
        return _amount(case, worst.value, rule.limit.unit, worst.at, _past_words(case, past_end))
    return _amount(case, worst.value / abs(change), rule.limit.unit, worst.at, _past_words(case, past_end))


def _past_words(case: Case, past_end: bool) -> str:
    return f"{case.rule.signal} goes {{value}} {'past the set point' if past_end else 'the wrong way'} at {{at}}"


def in_si(quantity: Quantity, run: Run) -> float:
    """A written place on a scale, or a bare number, in SI."""
    return to_si(quantity.value, quantity.unit, run.air_pressure) if quantity.unit else quantity.value


def per_step(limit: Quantity) -> bool:
    """Whether a limit of overshoot is a share of the step, and not a difference of the signal."""
    return limit.unit is None or limit.unit.text in ("%", "dimensionless")


def value_at(run: Run, signal: str, time: float) -> float:
    """The signal just before an instant [s]; at the run's first instant the first value."""
    whole = path_of(run.trends.pieces, signal)
    earlier = between(whole, float(whole.start[0]), time)
    return float(earlier.last()[-1]) if len(earlier) else float(whole.first()[0])


# ---------------------------------------------------------------- movement
def movement(case: Case) -> Finding:
    """`travel`: the sum of all movements up and down, of something driven through a play of `band`."""
    return _sum(case, travel(case.signal, _band(case)), f"{case.rule.signal} moves {{value}} in all")


def deviation(case: Case) -> Finding:
    """`deviation`: the standard deviation over time; it tells what noise does while nothing else happens."""
    return _sum(case, standard_deviation(case.signal), f"{case.rule.signal} swings by {{value}} (one sigma)")


def turns(case: Case) -> Finding:
    """`reversals`: changes of direction, movements smaller than `band` not counted."""
    count = float(reversals(case.signal, _band(case)))
    return _sum(case, count, f"{case.rule.signal} changes direction {{value}} times")


def _band(case: Case) -> float:
    return size(case.rule.band, case.unit) if case.rule.band is not None else 0.0


def rate(case: Case) -> Finding:
    """`rate`: never faster than the limit, up or down; a jump is faster than any limit."""
    fastest = steepest(case.signal)
    if math.isinf(fastest.value):
        jump = largest_jump(case.signal)
        words = f"{case.rule.signal} jumps by {case.shown(jump.value)} at {clock(jump.at)}, which no rate describes"
        unit = case.rule.limit.unit if case.rule.limit else None
        return Finding(False, float("inf"), case.limit, unit, jump.at, words, float("-inf"))
    return _sum(case, fastest.value, f"{case.rule.signal} changes by {{value}} at {{at}}", fastest.at)


def alarms(case: Case) -> Finding:
    """`alarms`: how many times an on/off signal is on; one that is on from the start counts."""
    stays = stays_above(case.signal, 0.5)
    at = stays[0].begin if stays else None
    return _sum(case, float(len(stays)), f"{case.rule.signal} is on {{value}} times", at)


# ---------------------------------------------------------------- findings
def _sum(case: Case, value: float, words: str, at: float | None = None) -> Finding:
    return _amount(case, value, case.rule.limit.unit if case.rule.limit else None, at, words)


def _amount(case: Case, value: float, unit: Unit | None, at: float | None, words: str) -> Finding:
    """A size against its limit; `words` say what it is where the limit is passed over."""
    passed = on_or_under(value, case.limit)
    told, limit = pair(value, case.limit, unit, case.run.air_pressure)
    sentence = f"{words.format(value=told, at=clock(at) if at is not None else '')}; {limit} is allowed"
    return Finding(passed, value, case.limit, unit, at, "" if passed else sentence, share_left(value, case.limit))


def _open(case: Case, reason: str) -> Finding:
    unit = case.rule.limit.unit if case.rule.limit else None
    return Finding(None, None, case.limit, unit, None, reason)


def size(quantity: Quantity, unit: Unit | None) -> float:
    """A written difference in SI; a bare number counts in the signal's unit."""
    given = quantity.unit or (difference_of(unit) if unit else None)
    return quantity.value * (given.factor if given else 1.0)


# ---------------------------------------------------------------- margins of a loop
AT_LEAST = frozenset({"gain_margin", "phase_margin", "delay_margin"})


def loop_margins(rule: Rule, known: LoopMargins | None) -> Finding:
    """`loop:` with margins: all of them kept; the one with the least to spare gives value and limit."""
    findings = [_one_margin(rule.loop, name, limit, known) for name, limit in rule.margins.items()]
    for finding in findings:
        if finding.passed is None:
            return finding
    return min(findings, key=lambda one: one.margin if one.margin is not None else float("-inf"))


def _one_margin(loop: str, name: str, limit: Quantity, known: LoopMargins | None) -> Finding:
    bound, title = size(limit, None), name.replace("_", " ")
    if known is None:
        return Finding(None, None, bound, limit.unit, None, "this version does not compute margins")
    if not known.stable:
        return Finding(False, None, bound, limit.unit, None, f"the closed loop of {loop} is not stable", float("-inf"))
    if name not in known.values:
        return Finding(None, None, bound, limit.unit, None, f"the {title} of {loop} is not known")
    value = known.values[name]
    least_wanted = name in AT_LEAST
    passed = value >= bound * (1 - ROUNDING) if least_wanted else on_or_under(value, bound)
    margin = share_left(bound, value) if least_wanted and value != 0 else share_left(value, bound)
    told, wanted = pair(value, bound, limit.unit)
    sentence = f"the {title} of {loop} is {told}; at {'least' if least_wanted else 'most'} {wanted} is wanted"
    return Finding(passed, value, bound, limit.unit, None, "" if passed else sentence, margin)


KINDS: dict[str, Callable[[Case], Finding]] = {
    "max": greatest,
    "min": least,
    "within": within,
    "overshoot": overshoot,
    "undershoot": undershoot,
    "iae": absolute_error,
    "travel": movement,
    "deviation": deviation,
    "reversals": turns,
    "rate": rate,
    "outside": outside,
    "alarms": alarms,
}

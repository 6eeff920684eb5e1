"""Figures of one response: offset, overshoot, undershoot, settling time, swing.

They hold for falling, inverse, integrating and noisy responses and for set points of 0; where a figure would mean
nothing there is a reason in its place.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from loopsim.language.units import PERCENT, Unit, parse_unit
from loopsim.study.path import (
    Path,
    between,
    duration,
    farthest,
    highest,
    mean,
    minus,
    reversals,
    standard_deviation,
    stays_outside,
    times,
)
from loopsim.study.types import Measure
from loopsim.study.words import clock, shown

TAIL = 0.1  # share of the response that tells where it comes to rest
CREEP = 0.005  # of the largest movement: more between the last two tails is no rest
SWING = 0.1  # of the largest movement: a larger swing (one sigma) in the tail is no rest, unless it is noise
TURNS = 20  # changes of direction in the tail: what turns round less often swings, what does it more often is noise
FIGURES = ("offset", "overshoot", "undershoot", "settling_time")
HIDDEN = 5.0  # sigmas: a hundred thousand normal draws stay within; a peak below is not told from noise


@dataclass(frozen=True, slots=True)
class Rest:
    """Where a response comes to rest [SI] (None: nowhere, for the `reason`), and the swing that is left (one sigma)."""

    value: float | None
    sigma: float
    reason: str = ""


@dataclass(frozen=True, slots=True)
class Settling:
    """What counts as settled: inside ± `band` [SI], for `dwell` [s] at least; None where nothing says it."""

    band: float | None
    dwell: float | None = None


def swing(path: Path) -> float:
    """One sigma of what is left [SI] when a straight line through the two halves' means is taken away."""
    begin, end = float(path.begins()[0]), float(path.ends()[-1])
    middle = 0.5 * (begin + end)
    first, second = between(path, begin, middle), between(path, middle, end, closing=True)
    if not len(first) or not len(second):
        return 0.0
    slope_part = (2.0 * (mean(second) - mean(first))) ** 2 / 12.0
    return math.sqrt(max(standard_deviation(path) ** 2 - slope_part, 0.0))


def rest_of(path: Path, unit: Unit | None = None) -> Rest:
    """Where a response comes to rest, told from its last two tenths; `unit` is for the words."""
    begin, end = float(path.begins()[0]), float(path.ends()[-1])
    width = TAIL * (end - begin)
    last, earlier = between(path, end - width, end, closing=True), between(path, end - 2 * width, end - width)
    if not len(last) or not len(earlier):
        return Rest(None, 0.0, "the response is too short to come to rest")
    largest = abs(farthest(minus(path, float(path.first()[0]))).value)
    creep, sigma = abs(mean(last) - mean(earlier)), swing(last)
    if largest > 0 and sigma > SWING * largest and reversals(last, sigma) < TURNS:
        return Rest(None, sigma, f"no steady state: it still swings by {shown(sigma, unit)} (one sigma) at the end")
    if creep > CREEP * largest + sigma:
        return Rest(
            None, sigma, f"no steady state: it still moves by {shown(creep, unit)} in {clock(width)} at the end"
        )
    return Rest(mean(last), sigma)


def step_figures(
    path: Path,
    start: float,
    target: float | None,
    settling: Settling,
    unit: Unit | None = None,
    size: float | None = None,
) -> tuple[Measure, ...]:
    """Offset, overshoot, undershoot and settling time of a response from `start` [SI] towards `target` [SI].

    `path` begins at the step. Without a target the value where the response comes to rest stands for it. `unit` is what
    differences of the signal are read in; overshoot and undershoot are shares of the step, whose `size` [SI] is the way
    from start to target unless a set point moved by another.
    """
    rest = rest_of(path, unit)
    goal = rest.value if target is None else target
    if goal is None:
        return tuple(Measure(name, None, reason=rest.reason) for name in FIGURES)
    way = math.copysign(size, goal - start) if size is not None else goal - start
    offset = rest.value - goal if rest.value is not None else None
    return (
        Measure("offset", offset, unit, reason=rest.reason if offset is None else ""),
        _past("overshoot", path, goal, way, rest.sigma, unit),
        _past("undershoot", path, start, -way, rest.sigma, unit),
        settling_time(minus(path, goal), settling, unit),
    )


def _past(name: str, path: Path, edge: float, way: float, sigma: float, unit: Unit | None) -> Measure:
    """How far the response goes past `edge` in the direction of `way`, as a share of the size of `way`."""
    if abs(way) <= 1e-9 * abs(edge):
        return Measure(name, None, PERCENT, reason="the set point did not move")
    peak = highest(times(minus(path, edge), math.copysign(1.0, way)))
    if sigma > 1e-6 * abs(way) and 0 < peak.value <= HIDDEN * sigma:
        reason = f"not told from what swings at the end ({shown(sigma, unit)}, one sigma)"
        return Measure(name, None, PERCENT, reason=reason)
    if peak.value <= 0:
        return Measure(name, 0.0, PERCENT)
    return Measure(name, peak.value / abs(way), PERCENT, peak.at)


def settling_time(error: Path, settling: Settling, unit: Unit | None = None) -> Measure:
    """How long [s] until the error stays inside the band to the end; at least `dwell` of that must have been seen.

    Without a dwell, a tenth of the response.
    """
    minute = parse_unit("min")
    if settling.band is None:
        return Measure(
            "settling_time", None, minute, reason="no rule gives a band, and the measuring range is not known"
        )
    begin, end = float(error.begins()[0]), float(error.ends()[-1])
    dwell = settling.dwell if settling.dwell is not None else TAIL * duration(error)
    stays = stays_outside(error, settling.band * (1 + 1e-9))
    inside_from = stays[-1].end if stays else begin
    if end - inside_from < dwell * (1 - 1e-9) or (stays and stays[-1].end >= end):
        band = shown(settling.band, unit)
        reason = f"does not stay within {band} for the last {clock(dwell)} up to {clock(end)}"
        return Measure("settling_time", None, minute, reason=reason)
    return Measure("settling_time", inside_from - begin, minute, inside_from)

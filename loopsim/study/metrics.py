"""Figures of each control loop in a run; None where a figure would have no meaning."""

from __future__ import annotations

import numpy as np

from loopsim.study.course import Course, course_of
from loopsim.study.types import Loop, Run

BAND = 0.02  # of the controller's span: what counts as settled
DWELL = 60.0  # s that a signal must stay inside to count as settled
MOVED = 1e-3  # share of full output that counts as a movement when reversals are counted


def metrics_of(run: Run) -> dict[str, dict[str, float | None]]:
    """Loop -> figure -> value: deviations in SI, times in seconds, output figures in shares of full output."""
    assert run.trends is not None
    names = run.trends.pieces.names
    return {loop.tag: _figures(run, loop) for loop in run.loops if {loop.pv, loop.sp, loop.out} <= set(names)}


def _figures(run: Run, loop: Loop) -> dict[str, float | None]:
    assert run.trends is not None
    pieces = run.trends.pieces
    error = course_of(pieces, loop.pv).minus(course_of(pieces, loop.sp))
    output = course_of(pieces, loop.out)
    peak, when = error.largest()
    band = BAND * loop.span
    figures: dict[str, float | None] = {
        "peak": peak,
        "peak_at_s": when,
        "iae": error.absolute_integral(),
        "time_outside_s": error.time_outside(band),
        "settling_s": _settling(run, error, band),
        "travel": output.travel(),
        "reversals": float(output.reversals(MOVED)),
    }
    return {**figures, **_step_figures(run, loop)}


def _settling(run: Run, error: Course, band: float) -> float | None:
    """From the last happening until the error stays inside the band; None where it does not stay for the dwell."""
    start = max((one.time for one in run.happenings), default=0.0)
    last = error.within(start, error.end).last_outside(band)
    if last is None:
        return 0.0
    return last - start if error.end - last >= DWELL else None


def _step_figures(run: Run, loop: Loop) -> dict[str, float | None]:
    """Overshoot and undershoot of the last set-point step, shares of its size."""
    assert run.trends is not None
    steps = [one for one in run.happenings if one.kind == "step" and one.target == loop.sp]
    if not steps or steps[-1].after == steps[-1].before or not np.isfinite(steps[-1].before):
        return {"overshoot": None, "undershoot": None}
    step = steps[-1]
    course = course_of(run.trends.pieces, loop.pv)
    course = course.within(step.time, course.end)
    size = step.after - step.before
    above = Course(course.start, course.length, (course.samples - step.after) / size).maximum()[0]
    below = Course(course.start, course.length, (step.before - course.samples) / size).maximum()[0]
    return {"overshoot": max(above, 0.0), "undershoot": max(below, 0.0)}

"""From when until when a rule is judged, and whether the run and its events allow it."""

from __future__ import annotations

from dataclasses import dataclass

from loopsim.documents.types import Quantity, Rule
from loopsim.results import Pieces
from loopsim.study.types import Happening, Run
from loopsim.study.words import clock


@dataclass(frozen=True, slots=True)
class Window:
    """Judged from `begin` to `end` [s]; the rule's window itself starts at `after`.

    `closing`: what happens at `end` belongs to it, as it does at the end of a run but not where the next event starts.
    """

    after: float
    begin: float
    end: float
    closing: bool


def tie(time: float) -> float:
    """Times [s] nearer than this are one instant."""
    return 1e-9 * max(1.0, abs(time))


def seconds(time: Quantity) -> float:
    """A written time in s."""
    return time.value * (time.unit.factor if time.unit else 1.0)


def first_instant(pieces: Pieces) -> float:
    """When the run began [s]."""
    return float(pieces.start[0]) if len(pieces.start) else 0.0


def last_instant(pieces: Pieces) -> float:
    """Until when there are values [s]; -inf where there are none."""
    return float(pieces.start[-1] + pieces.length[-1]) if len(pieces.start) else float("-inf")


def window(rule: Rule, run: Run) -> Window:
    """The window of a rule in one run.

    From `after` to `until`, which is the next event after `after`, or the end; without `after` the whole run. With `by`
    the rule is judged from that long after `after`.
    """
    after = seconds(rule.after) if rule.after is not None else first_instant(run.trends.pieces)
    begin = after + (seconds(rule.by) if rule.by is not None else 0.0)
    if rule.until is not None:
        end = seconds(rule.until)
        return Window(after, begin, end, end >= run.lasts - tie(end))
    following = next_event(run, after) if rule.after is not None else None
    if following is not None:
        return Window(after, begin, following, False)
    return Window(after, begin, run.lasts, True)


def next_event(run: Run, after: float) -> float | None:
    """When the next event after an instant comes [s], None when none does before the run's end."""
    times = [*run.scheduled, *(one.time for one in run.happenings)]
    return min((time for time in times if after + tie(after) < time <= run.lasts), default=None)


def not_covered(frame: Window, run: Run) -> str:
    """Why the run does not cover a window, '' when it does."""
    if frame.begin >= frame.end - tie(frame.end):
        when = clock(frame.end)
        return f"the window ends at {when}, before the signal is judged at all (from {clock(frame.begin)})"
    known = last_instant(run.trends.pieces)
    if known >= frame.end - tie(frame.end):
        return ""
    status = run.trends.status
    if status.code != "done":
        told = f": {status.sentence}" if status.sentence else ""
        return f"the run stopped at {clock(max(known, 0.0))}, before the window's end at {clock(frame.end)}{told}"
    return f"the run ends at {clock(max(known, 0.0))}, before the window's end at {clock(frame.end)}"


def undisturbed(names: tuple[str, ...], frame: Window, run: Run) -> str:
    """Why nothing disturbed any of the signals by the end of a window, '' when something did."""
    if any(reaches(one, names) and one.time < frame.end - tie(frame.end) for one in run.happenings):
        return ""
    what = " or ".join(names)
    return f"nothing that happened before {clock(frame.end)} reaches {what}, so holding the limit shows nothing"


def reaches(happening: Happening, names: tuple[str, ...]) -> bool:
    """Whether something that happened can be seen in one of the signals."""
    return any(name in happening.reaches for name in names)


def set_point_step(run: Run, signal: str, of: str, rule: Rule, after: float) -> Happening | None:
    """The set-point step that a rule speaks of: the last one up to `after`, or of the run where it has no `after`.

    Of the set point `of` where it is named, else of any set point that reaches the signal.
    """
    steps = [
        one
        for one in run.happenings
        if one.set_point_to is not None
        and one.set_point_from is not None
        and (one.target == of if of else signal in one.reaches)
        and (rule.after is None or one.time <= after + tie(after))
    ]
    return max(steps, key=lambda one: one.time, default=None)

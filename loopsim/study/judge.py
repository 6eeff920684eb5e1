"""Rules judged on runs: what makes a rule not applicable, inconclusive, passed or failed, the same for every kind.

What a run shows to be broken has failed, however little of the window it covers; but nothing passes on a window that is
not covered, or on signals that nothing disturbed.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from loopsim.documents.types import Quantity, Rule
from loopsim.errors import fail, nearest
from loopsim.language.units import Unit, difference_of, to_si
from loopsim.results import Pieces
from loopsim.study.metrics import metrics_of
from loopsim.study.path import Path, between, minus, path_of
from loopsim.study.rules import KINDS, Case, Finding, in_si, loop_margins, per_step
from loopsim.study.types import (
    FAILED,
    INCONCLUSIVE,
    NOT_APPLICABLE,
    NOT_JUDGED,
    PASSED,
    Judged,
    Run,
    Verdict,
)
from loopsim.study.windows import Window, not_covered, undisturbed, window
from loopsim.study.words import clock

POINTS = frozenset({"max", "min"})  # kinds whose limit is a place on the signal's scale, not a size
CALM = frozenset({"deviation"})  # kinds that ask what the signal does while nothing happens


def judge(scenario: str, run: Run, rules: Sequence[Rule]) -> Judged:
    """All rules of a scenario judged on one run, with the run's metrics. Raises `InputError` for unknown names."""
    verdicts = tuple(verdict_of(rule, run) for rule in rules)
    return Judged(scenario, run, overall(verdicts), verdicts, metrics_of(run, rules))


def overall(verdicts: Sequence[Verdict]) -> str:
    """failed before inconclusive before passed; not_judged where no rule applies."""
    found = {one.verdict for one in verdicts}
    return next((one for one in (FAILED, INCONCLUSIVE, PASSED) if one in found), NOT_JUDGED)


def verdict_of(rule: Rule, run: Run) -> Verdict:
    """One rule judged on one run. Raises `InputError` for names that the run does not know."""
    names = _names(rule)
    lacking = [name for name in names if name in run.not_applicable]
    if lacking:
        reason = f"{run.strategy} has no {lacking[0]}"
        return Verdict(rule.text, rule.kind, NOT_APPLICABLE, reason=reason, where=rule.where)
    if rule.kind == "margins":
        return _margins_verdict(rule, run)
    for name in names:
        if name not in run.trends.pieces.names and len(run.trends.pieces.start):
            raise fail(f"no signal is called '{name}'", rule.where, nearest(name, run.trends.pieces.names, "signals"))
    return _signal_verdict(rule, run, names)


def _names(rule: Rule) -> tuple[str, ...]:
    if rule.kind == "margins":
        return (rule.loop,)
    return (rule.signal, rule.of) if isinstance(rule.of, str) and rule.of != rule.signal else (rule.signal,)


def _margins_verdict(rule: Rule, run: Run) -> Verdict:
    return _verdict(rule, loop_margins(rule, (run.margins or {}).get(rule.loop)), "")


def _signal_verdict(rule: Rule, run: Run, names: tuple[str, ...]) -> Verdict:
    frame = window(rule, run)
    open_because = _too_short(rule, frame, run) or ("" if rule.kind in CALM else undisturbed(names, frame, run))
    case = _case(rule, run, frame)
    if case is None:
        unit = rule.limit.unit if rule.limit else None
        reason = not_covered(frame, run) or f"the run has no values from {clock(frame.begin)} on"
        return _verdict(rule, Finding(None, None, _limit(rule, run, unit), unit, None, reason), "")
    for path in (case.signal, case.error):
        gap = _without_value(path)
        if gap is not None:
            reason = f"{names[0] if path is case.signal else names[-1]} has no value at {clock(gap)}"
            return _verdict(rule, Finding(None, None, case.limit, case.unit, gap, reason), "")
    return _verdict(rule, KINDS[rule.kind](case), open_because)


def _too_short(rule: Rule, frame: Window, run: Run) -> str:
    """With `dwell` a stay that is long enough settles the matter before the window's end."""
    return "" if rule.dwell is not None else not_covered(frame, run)


def _case(rule: Rule, run: Run, frame: Window) -> Case | None:
    pieces = run.trends.pieces
    begin = frame.begin if rule.dwell is None else frame.after
    if not len(pieces.start) or begin >= frame.end:
        return None
    whole = path_of(pieces, rule.signal)
    signal = between(whole, begin, frame.end, frame.closing)
    if not len(signal):
        return None
    error = None
    if rule.of is not None:
        error = between(minus(whole, _reference(rule.of, pieces, run)), begin, frame.end, frame.closing)
    unit = run.trends.units.get(rule.signal)
    return Case(rule, run, frame, signal, error, _limit(rule, run, unit), unit)


def _reference(of: str | Quantity, pieces: Pieces, run: Run) -> Path | float:
    if isinstance(of, str):
        return path_of(pieces, of)
    return in_si(of, run)


def _limit(rule: Rule, run: Run, unit: Unit | None) -> float:
    """The limit in SI: a place on the scale for max and min, a size for all others."""
    assert rule.limit is not None
    given = rule.limit.unit
    if given is None:
        bare = rule.kind in ("reversals", "alarms") or per_step(rule.limit)
        own = None if bare and rule.kind not in POINTS else unit
        return rule.limit.value * (difference_of(own).factor if own else 1.0)
    return to_si(rule.limit.value, given, run.air_pressure)


def _without_value(path: Path | None) -> float | None:
    """When a path has no finite value [s], None when it always has."""
    if path is None:
        return None
    bad = ~np.isfinite(path.quartics).all(axis=1)
    return float(path.begins()[int(np.argmax(bad))]) if bad.any() else None


def _verdict(rule: Rule, finding: Finding, open_because: str) -> Verdict:
    """A finding as a verdict: broken is failed; kept is passed unless something leaves it open."""
    if finding.passed is not None and not finding.passed:
        verdict, reason = FAILED, finding.reason
    elif finding.passed is None or open_because:
        verdict, reason = INCONCLUSIVE, finding.reason or open_because
    else:
        verdict, reason = PASSED, ""
    return Verdict(
        rule.text,
        rule.kind,
        verdict,
        finding.value,
        finding.limit,
        finding.unit,
        finding.at,
        reason,
        finding.margin,
        rule.where,
    )

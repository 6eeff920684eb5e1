"""Rules judged on a run: windows, what cannot be judged and why, and the verdict of a strategy."""

from __future__ import annotations

from loopsim.documents.types import Quantity, Rule
from loopsim.language.units import PERCENT, Unit
from loopsim.study.course import Course, course_of
from loopsim.study.metrics import metrics_of
from loopsim.study.rules import KINDS, SECONDS, Measured, si
from loopsim.study.types import Finding, RuleVerdict, Run, StrategyVerdict

NEEDS_LINEAR = "margins need the linear side, which this version does not have yet"


def judge(run: Run) -> StrategyVerdict:
    """All rules of the scenario for one strategy, and its metrics."""
    if run.trends is None:
        return StrategyVerdict(run, "failed", ())
    rules = tuple(_judged(run, rule) for rule in run.scenario.accept)
    return StrategyVerdict(run, _together(rules), rules, metrics_of(run))


def _together(rules: tuple[RuleVerdict, ...]) -> str:
    verdicts = [one.verdict for one in rules if one.verdict != "not_applicable"]
    if not rules:
        return "not_judged"
    if "failed" in verdicts:
        return "failed"
    return "inconclusive" if "inconclusive" in verdicts or not verdicts else "passed"


def _judged(run: Run, rule: Rule) -> RuleVerdict:
    lacking = _lacking(run, rule)
    if lacking:
        return RuleVerdict(rule, "not_applicable", Finding(None, reason=f"this strategy has no '{lacking}'"))
    if rule.kind == "margins":
        return RuleVerdict(rule, "inconclusive", Finding(None, reason=NEEDS_LINEAR))
    finding = _finding(run, rule)
    verdict = {True: "passed", False: "failed", None: "inconclusive"}[finding.passed]
    return RuleVerdict(rule, verdict, finding)


def _lacking(run: Run, rule: Rule) -> str:
    """The first tag of the rule that this strategy does not have."""
    names = [rule.signal, rule.loop, rule.of if isinstance(rule.of, str) else ""]
    return next((name for name in names if name in run.lacking), "")


def _finding(run: Run, rule: Rule) -> Finding:
    trends = run.trends
    assert trends is not None
    begin, end = window(run, rule)
    covered = trends.pieces.start[-1] + trends.pieces.length[-1] if len(trends.pieces.start) else 0.0
    if covered < end * (1 - 1e-12) - 1e-9:
        return Finding(None, reason=f"the run ended at {covered:.6g} s, before the window did")
    if end <= begin:
        return Finding(None, reason="the window has no length: the run is too short")
    reason = _undisturbed(run, rule, end)
    if reason:
        return Finding(None, reason=reason)
    course = course_of(trends.pieces, rule.signal).within(begin, end)
    unit = trends.units.get(rule.signal, Unit("SI", 1.0, 0.0, PERCENT.dimension))
    return KINDS[rule.kind](
        Measured(rule, run, course, _difference(run, rule, course, begin, end, unit), begin, end, unit)
    )


def _difference(run: Run, rule: Rule, course: Course, begin: float, end: float, unit: Unit) -> Course | None:
    if rule.of is None:
        return course if rule.kind in ("iae", "within", "outside") else None
    if isinstance(rule.of, Quantity):
        return course.minus(si(rule.of, run, unit))
    assert run.trends is not None
    return course.minus(course_of(run.trends.pieces, rule.of).within(begin, end))


def window(run: Run, rule: Rule) -> tuple[float, float]:
    """Begin and end [s]: from `after` to `until`; else to the next event after `after`, or the end of the run."""
    lasts = si(run.scenario.lasts, run, SECONDS)
    begin = si(rule.after, run, SECONDS) if rule.after is not None else 0.0
    if rule.until is not None:
        return begin, si(rule.until, run, SECONDS)
    if rule.after is None:
        return 0.0, lasts
    later = [one.time for one in run.happenings if one.time > begin + 1e-9 * (1.0 + begin)]
    return begin, min([*later, lasts])


def _undisturbed(run: Run, rule: Rule, end: float) -> str:
    """A reason where nothing up to the window's end disturbs what the rule depends on."""
    if rule.kind == "deviation":
        return ""  # it asks what noise does while nothing else happens
    names = {rule.signal, rule.of} if isinstance(rule.of, str) else {rule.signal}
    for one in run.happenings:
        if one.time < end and names & one.reaches:
            return ""
    return "nothing in the scenario disturbs what this rule looks at"

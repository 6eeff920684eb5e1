"""Judging as plain data: the JSON document of a run, and suites of test cases."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from loopsim.language.units import Unit, from_si
from loopsim.study.types import (
    FAILED,
    NOT_APPLICABLE,
    NOT_JUDGED,
    PASSED,
    Comparison,
    Judged,
    LoopMetrics,
    Measure,
    Verdict,
)

Json = dict[str, object]


# ---------------------------------------------------------------- JSON
def to_json(
    run_id: str,
    judged: Sequence[Judged],
    trends: Mapping[str, str] | None = None,
    comparison: Comparison | None = None,
) -> Json:
    """The document of one scenario. `trends`: strategy -> name of the file with its trend, where one was written.

    Numbers are in the unit beside them. What is infinite or unknown is null with a `reason`. `passed` is null where
    nothing was judged.
    """
    files = trends or {}
    document: Json = {
        "scenario": judged[0].scenario,
        "run_id": run_id,
        "strategies": {one.run.strategy: _strategy(one, files.get(one.run.strategy)) for one in judged},
    }
    if comparison is not None:
        document["comparison"] = comparison_json(comparison)
    return document


def _strategy(one: Judged, trend: str | None) -> Json:
    status = one.run.trends.status
    return {
        "verdict": one.verdict,
        "passed": None if one.verdict == NOT_JUDGED else one.verdict == PASSED,
        "rules": [_rule(verdict, one.run.air_pressure) for verdict in one.verdicts],
        "metrics": {loop.tag: _loop(loop) for loop in one.metrics},
        "trend": trend,
        "status": {
            "code": status.code,
            "sentence": status.sentence,
            "at_s": status.time if status.code != "done" else None,
        },
        "steps": dict(one.run.trends.statistics),
        "events_not_applicable": list(one.run.skipped),
        "assumed": list(one.run.trends.assumed),
        "remarks": list(one.run.remarks),
        "log": [{"at_s": float(each.time), "what": each.text} for each in one.run.trends.log],
    }


def _rule(verdict: Verdict, air_pressure: float) -> Json:
    return {
        "rule": verdict.rule,
        "verdict": verdict.verdict,
        "value": _number(verdict.value, verdict.unit, air_pressure),
        "limit": _number(verdict.limit, verdict.unit, air_pressure),
        "unit": verdict.unit.text if verdict.unit is not None else None,
        "at_s": verdict.at,
        "margin": _number(verdict.margin, None),
        "reason": verdict.reason or None,
    }


def _number(value: float | None, unit: Unit | None, air_pressure: float | None = None) -> float | None:
    if value is None or not math.isfinite(value):
        return None
    if unit is None:
        return value
    return from_si(value, unit) if air_pressure is None else from_si(value, unit, air_pressure)


def _loop(loop: LoopMetrics) -> Json:
    found: Json = {"signal": loop.signal, **_measures(loop.measures)}
    found["events"] = [
        {"event": event.text, "from_s": event.begin, "to_s": event.end, **_measures(event.measures)}
        for event in loop.events
    ]
    return found


def _measures(measures: Sequence[Measure]) -> Json:
    return {one.name: _measure(one) for one in measures}


def _measure(one: Measure) -> Json:
    found: Json = {"value": _number(one.value, one.unit), "unit": one.unit.text if one.unit else None, "at_s": one.at}
    if one.reason:
        found["reason"] = one.reason
    return found


def comparison_json(comparison: Comparison) -> Json:
    """Winner, ties, the nearest, reasons and standings."""
    return {
        "winner": comparison.winner,
        "tied": list(comparison.tied),
        "nearest": comparison.nearest,
        "reasons": list(comparison.reasons),
        "standings": [
            {
                "strategy": one.strategy,
                "passed": one.passed,
                "failed": one.failed,
                "inconclusive": one.inconclusive,
                "smallest_margin": _number(one.margin, None),
                "rule": one.tightest or None,
                "scenario": one.scenario or None,
            }
            for one in comparison.standings
        ],
    }


# ---------------------------------------------------------------- test suites
@dataclass(frozen=True, slots=True)
class SuiteCase:
    """One rule for one strategy, or (`rule` is `run`) a run that could not be finished.

    `outcome` is passed, failure (broken or inconclusive), skipped (does not apply) or error (not finished).
    """

    strategy: str
    rule: str
    outcome: str
    message: str


@dataclass(frozen=True, slots=True)
class Suite:
    """One scenario: a case for each rule and strategy, and one for each run that could not be finished."""

    name: str
    cases: tuple[SuiteCase, ...]


def suites(judged: Sequence[Judged]) -> tuple[Suite, ...]:
    """A suite for each scenario, its cases in the order given."""
    names = dict.fromkeys(one.scenario for one in judged)
    return tuple(
        Suite(name, tuple(case for one in judged if one.scenario == name for case in _cases(one))) for name in names
    )


def _cases(one: Judged) -> list[SuiteCase]:
    status = one.run.trends.status
    stopped = [] if status.code == "done" else [SuiteCase(one.run.strategy, "run", "error", status.sentence)]
    return [*stopped, *(_case(one, verdict) for verdict in one.verdicts)]


def _case(one: Judged, verdict: Verdict) -> SuiteCase:
    outcome = {PASSED: "passed", NOT_APPLICABLE: "skipped"}.get(verdict.verdict, "failure")
    said = (
        verdict.reason
        if verdict.verdict in (FAILED, NOT_APPLICABLE) or not verdict.reason
        else f"inconclusive: {verdict.reason}"
    )
    return SuiteCase(one.run.strategy, verdict.rule, outcome, said)

"""Verdicts and comparisons as tables, JSON and test reports."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from loopsim.language.units import from_si, parse_unit
from loopsim.results import Cell, Table
from loopsim.study.compare import Comparison
from loopsim.study.rules import finite
from loopsim.study.types import Finding, RuleVerdict, StrategyVerdict

TONES = {"passed": "good", "failed": "bad", "inconclusive": "open", "not_applicable": "plain", "not_judged": "plain"}
FIGURES = {
    "peak": "peak deviation",
    "iae": "integral of |error|",
    "time_outside_s": "time outside 2 % of span",
    "settling_s": "settled after",
    "overshoot": "overshoot of the step",
    "undershoot": "undershoot of the step",
    "travel": "output travel",
    "reversals": "output reversals",
}


def rule_table(scenario: str, verdicts: Mapping[str, StrategyVerdict]) -> Table:
    """A column for each strategy, a row for each rule: value against limit, when, verdict."""
    names = list(verdicts)
    first = next(iter(verdicts.values()))
    rows = [[Cell(rule.text)] for rule in first.run.scenario.accept]
    for verdict in verdicts.values():
        for row, one in zip(rows, verdict.rules or [None] * len(rows), strict=True):
            row.append(_rule_cell(one) if one is not None else Cell("no run", "bad"))
    rows.append([Cell("together"), *(Cell(WORDS[one.verdict], TONES[one.verdict]) for one in verdicts.values())])
    notes = [f"{name}: {one.run.failure}" for name, one in verdicts.items() if one.run.failure]
    notes += list(dict.fromkeys(note for one in verdicts.values() for note in _reasons(one)))
    return Table(scenario, ("rule", *names), tuple(tuple(row) for row in rows), tuple(notes))


WORDS = {
    "passed": "PASSED",
    "failed": "FAILED",
    "inconclusive": "INCONCLUSIVE",
    "not_applicable": "does not apply",
    "not_judged": "not judged",
}


def _rule_cell(one: RuleVerdict) -> Cell:
    finding = one.finding
    if finding.value is None:
        return Cell(WORDS[one.verdict].lower(), TONES[one.verdict])
    when = f" at {duration(finding.at)}" if finite(finding.at) is not None else ""
    mark = {"passed": "ok", "failed": "FAILED"}.get(one.verdict, one.verdict)
    return Cell(f"{shown(finding)}{when}  {mark}", TONES[one.verdict])


def _reasons(verdict: StrategyVerdict) -> list[str]:
    found = []
    for one in verdict.rules:
        if one.verdict == "inconclusive":
            found.append(f"{verdict.run.strategy}: '{one.rule.text}' is inconclusive: {one.finding.reason}")
    return found


def shown(finding: Finding) -> str:
    """A value in the rule's unit with four digits."""
    assert finding.value is not None
    if finding.unit is None:
        return f"{finding.value:.4g}"
    return f"{from_si(finding.value, finding.unit):.4g} {finding.unit.text}".removesuffix(" count")


def duration(seconds: float | None) -> str:
    """A time as people read it: 45 s, 12.5 min, 3.2 h."""
    if seconds is None:
        return "-"
    if abs(seconds) < 100:
        return f"{seconds:.3g} s"
    return f"{seconds / 60:.3g} min" if abs(seconds) < 36000 else f"{seconds / 3600:.3g} h"


def metrics_table(scenario: str, verdicts: Mapping[str, StrategyVerdict]) -> Table:
    """A row for each figure of each loop, a column for each strategy."""
    names = list(verdicts)
    tags = list(dict.fromkeys(tag for one in verdicts.values() for tag in one.metrics))
    rows = []
    for tag in tags:
        for figure, words in FIGURES.items():
            cells = [_figure_cell(one, tag, figure) for one in verdicts.values()]
            if any(cell.text != "-" for cell in cells):
                rows.append((Cell(f"{tag}: {words}"), *cells))
    return Table(f"{scenario}: figures of the loops", ("figure", *names), tuple(rows))


def _figure_cell(verdict: StrategyVerdict, tag: str, figure: str) -> Cell:
    value = verdict.metrics.get(tag, {}).get(figure)
    if value is None:
        return Cell("-")
    loop = next(one for one in verdict.run.loops if one.tag == tag)
    if figure in ("time_outside_s", "settling_s"):
        return Cell(duration(value))
    if figure in ("overshoot", "undershoot", "travel"):
        return Cell(f"{100 * value:.3g} %")
    if figure == "reversals":
        return Cell(f"{value:.0f}")
    size = value / loop.unit.factor
    return Cell(f"{size:+.3g} {loop.unit.text}" if figure == "peak" else f"{size / 60:.3g} {loop.unit.text}*min")


def comparison_table(comparison: Comparison) -> Table:
    """The winner and the reasons as sentences."""
    return Table("Comparison", (), (), (comparison.sentence, *comparison.reasons))


# ---------------------------------------------------------------- JSON
def strategy_json(verdict: StrategyVerdict, trend: str | None) -> dict[str, Any]:
    """One strategy's part of the JSON of `run`."""
    status = verdict.run.trends.status if verdict.run.trends is not None else None
    return {
        "verdict": verdict.verdict,
        "passed": verdict.verdict in ("passed", "not_judged") and not verdict.run.failure,
        "rules": [_rule_json(one) for one in verdict.rules],
        "metrics": {tag: dict(figures) for tag, figures in verdict.metrics.items()},
        "status": {"code": status.code, "sentence": status.sentence} if status is not None else None,
        "failure": verdict.run.failure or None,
        "log": [
            {"time_s": one.time, "text": one.text} for one in (verdict.run.trends.log if verdict.run.trends else ())
        ],
        "trend": trend,
    }


def _rule_json(one: RuleVerdict) -> dict[str, Any]:
    finding = one.finding
    unit = finding.unit or parse_unit("dimensionless")
    convert = [
        None if finite(value) is None else from_si(value or 0.0, unit) for value in (finding.value, finding.limit)
    ]
    found: dict[str, Any] = {
        "rule": one.rule.text,
        "verdict": one.verdict,
        "value": convert[0],
        "limit": convert[1],
        "unit": unit.text,
        "at_s": finite(finding.at),
    }
    return {**found, "reason": finding.reason} if finding.reason else found

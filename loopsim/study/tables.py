"""Judging as tables: verdicts, figures, comparison, a column for each strategy."""

from __future__ import annotations

from collections.abc import Sequence

from loopsim.results import Cell, Table
from loopsim.study.types import (
    FAILED,
    INCONCLUSIVE,
    NOT_APPLICABLE,
    PASSED,
    Comparison,
    Judged,
    LoopMetrics,
    Measure,
    Verdict,
)
from loopsim.study.words import clock, rounded, shown

TONES = {PASSED: "good", FAILED: "bad", INCONCLUSIVE: "open"}
DASH = Cell("–")
TOLD = 6  # entries of a log in a table; JSON has all of them


# ---------------------------------------------------------------- verdicts
def verdict_table(judged: Sequence[Judged]) -> Table:
    """The strategies of one scenario: a row for each rule with its limit; value, time and verdict for each strategy."""
    first = judged[0]
    rows = [
        (Cell(rule.rule), Cell(_limit(judged, number)), *(_cell(one, one.verdicts[number]) for one in judged))
        for number, rule in enumerate(first.verdicts)
    ]
    rows.append(
        (Cell("all rules"), Cell(""), *(Cell(_spoken(one.verdict), TONES.get(one.verdict, "plain")) for one in judged))
    )
    heads = ("rule", "limit", *(one.run.strategy for one in judged))
    return Table(first.scenario, heads, tuple(rows), tuple(_notes(judged)))


def _limit(judged: Sequence[Judged], number: int) -> str:
    """The limit of a rule, from the first strategy in which it applies."""
    for one in judged:
        verdict = one.verdicts[number]
        if verdict.limit is not None:
            return shown(verdict.limit, verdict.unit, one.run.air_pressure)
    return ""


def _cell(one: Judged, verdict: Verdict) -> Cell:
    if verdict.verdict == NOT_APPLICABLE:
        return Cell("does not apply")
    words = []
    if verdict.value is not None:
        words.append("jumps" if verdict.value == float("inf") and verdict.kind == "rate" else _value(one, verdict))
    if verdict.at is not None:
        words.append(f"at {clock(verdict.at)}")
    text = " ".join(words)
    return Cell(f"{text}, {verdict.verdict}" if text else verdict.verdict, TONES.get(verdict.verdict, "plain"))


def _value(one: Judged, verdict: Verdict) -> str:
    assert verdict.value is not None
    return shown(verdict.value, verdict.unit, one.run.air_pressure)


def _spoken(verdict: str) -> str:
    return verdict.replace("_", " ")


def _notes(judged: Sequence[Judged]) -> list[str]:
    """Why rules are not passed, what does not apply, how runs ended, what was assumed; each once."""
    notes = []
    for one in judged:
        name = one.run.strategy
        notes += [
            f"{name}, '{each.rule}': {each.verdict.replace('_', ' ')}; {each.reason}"
            for each in one.verdicts
            if each.reason
        ]
        notes += [f"{name}: the event '{text}' does not apply" for text in one.run.skipped]
        status = one.run.trends.status
        if status.code != "done":
            notes.append(f"{name}: the run stopped at {clock(status.time)}: {status.sentence}")
        notes += [f"{name}: at the start {remark}" for remark in one.run.remarks]
        notes += _told(one)
    notes += [f"assumed: {text}" for one in judged for text in one.run.trends.assumed]
    return list(dict.fromkeys(notes))


def _told(one: Judged) -> list[str]:
    """What the run's log tells beside the events: a tank that empties, an alarm; the first few."""
    events = {(happening.time, happening.target) for happening in one.run.happenings}
    told = [
        f"{each.text} at {clock(each.time)}" for each in one.run.trends.log if (each.time, each.block) not in events
    ]
    more = [f"and {len(told) - TOLD} more"] if len(told) > TOLD else []
    return [f"{one.run.strategy}: {'; '.join([*told[:TOLD], *more])}"] if told else []


# ---------------------------------------------------------------- figures
def metrics_table(judged: Sequence[Judged]) -> Table:
    """The strategies of one scenario: a row for each figure of each controlled signal that has a value in any."""
    rows: dict[tuple[str, str, str], dict[str, Measure]] = {}
    for one in judged:
        for loop in one.metrics:
            for event, measure in _measures(loop):
                rows.setdefault((loop.tag, event, measure.name), {})[one.run.strategy] = measure
    names = [one.run.strategy for one in judged]
    shown_rows = {key: found for key, found in rows.items() if any(one.value is not None for one in found.values())}
    cells = tuple(
        (Cell(_row_title(*key)), *(_measure_cell(found.get(name)) for name in names))
        for key, found in shown_rows.items()
    )
    notes = dict.fromkeys(
        f"{name}, {_row_title(*key)}: {measure.reason}"
        for key, found in shown_rows.items()
        for name, measure in found.items()
        if measure.value is None and measure.reason
    )
    return Table(f"{judged[0].scenario}: figures", ("figure", *names), cells, tuple(notes))


def _measures(loop: LoopMetrics) -> list[tuple[str, Measure]]:
    """Figures of the whole run, then of each event; a single event's deviation says nothing that the whole does not."""
    found = [("", measure) for measure in loop.measures]
    for event in loop.events:
        found += [
            (event.text, measure)
            for measure in event.measures
            if len(loop.events) > 1 or measure.name not in ("peak_deviation", "iae")
        ]
    return found


def _row_title(tag: str, event: str, name: str) -> str:
    title = f"{tag} {name.replace('_', ' ')}"
    return f"{title} after {event}" if event else title


def _measure_cell(measure: Measure | None) -> Cell:
    if measure is None or measure.value is None:
        return DASH
    in_time = measure.unit is not None and measure.unit.text == "min"
    text = clock(measure.value) if in_time else shown(measure.value, measure.unit)
    timed = measure.at is not None and measure.name in ("peak_deviation", "overshoot", "undershoot")
    return Cell(f"{text} at {clock(measure.at)}" if timed and measure.at is not None else text)


# ---------------------------------------------------------------- comparison
def comparison_table(comparison: Comparison) -> Table:
    """How the strategies stand, with the reasons below."""
    some = any(one.lacking for one in comparison.standings)
    rows = tuple(
        (
            Cell(one.strategy, "good" if one.strategy == comparison.winner else "plain"),
            Cell(str(one.passed)),
            Cell(str(one.failed), "bad" if one.failed else "plain"),
            Cell(str(one.inconclusive), "open" if one.inconclusive else "plain"),
            *((Cell(str(one.lacking)),) if some else ()),
            Cell("–" if one.margin is None else f"{rounded(100 * one.margin, 3)} %"),
            Cell(one.tightest),
        )
        for one in comparison.standings
    )
    missing = ("does not apply",) if some else ()
    heads = ("strategy", "passed", "failed", "inconclusive", *missing, "smallest margin", "in rule")
    return Table(_title(comparison), heads, rows, comparison.reasons)


def _title(comparison: Comparison) -> str:
    if comparison.winner is not None:
        return f"Best: {comparison.winner}"
    if comparison.tied:
        return f"Tied: {', '.join(comparison.tied)}"
    return f"None passes; nearest: {comparison.nearest}" if comparison.nearest is not None else "Nothing to compare"

"""What judging must not depend on: how a run is cut into pieces, when the clock starts, the scale of the signal."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from judging_builders import happened, recut, rule, run

from loopsim.documents.types import Quantity, Rule
from loopsim.language.units import parse_unit
from loopsim.results import FloatArray, Pieces
from loopsim.study.judge import verdict_of
from loopsim.study.types import Happening, Run, Verdict

END = 12.0
RULES = [
    "signal: x, max: 20 %",
    "signal: x, min: -20 %",
    "signal: x, within: 15 %, of: sp, by: 2 s",
    "signal: x, within: 15 %, of: sp, by: 3 s, dwell: 2 s",
    "signal: x, within: 15 %, of: 5 %",
    "signal: x, iae: 150 %*s, of: sp",
    "signal: x, travel: 150 %",
    "signal: x, reversals: 3, band: 4 %",
    "signal: x, rate: 30 %/s",
    "signal: x, outside: 3 s, band: 10 %, of: sp",
    "signal: x, overshoot: 60 %, of: sp",
    "signal: x, undershoot: 60 %, of: sp",
    "signal: x, alarms: 2",
]
WINDOWS = ["", ", until: 9 s", ", after: 3 s", ", after: 3 s, until: 10 s"]
levels = st.integers(-30, 30).map(lambda one: one / 100)


@st.composite
def two_signals(draw: st.DrawFn) -> Pieces:
    """A few pieces of two signals; each goes on smoothly or jumps to the next."""
    count = draw(st.integers(1, 4))
    lengths = np.array(draw(st.lists(st.integers(1, 5).map(float), min_size=count, max_size=count)))
    lengths *= END / lengths.sum()
    samples = np.array(draw(st.lists(levels, min_size=count * 10, max_size=count * 10))).reshape(count, 5, 2)
    if draw(st.booleans()):
        samples[1:, 0] = samples[:-1, 4]
    return Pieces(("x", "sp"), np.concatenate([[0.0], np.cumsum(lengths)[:-1]]), lengths, samples)


def events() -> tuple[Happening, ...]:
    return happened(1.0, "x", "sp", target="sp", step=(0.0, 0.1)), happened(8.0, "x")


def at_once(pieces: Pieces) -> Run:
    """A run that lasts exactly 12 s whatever the lengths add up to."""
    return run(pieces, *events(), lasts=END)


def same(one: Verdict, other: Verdict) -> None:
    assert one.verdict == other.verdict
    assert (one.value is None) == (other.value is None)
    if one.value is not None and other.value is not None:
        assert one.value == pytest.approx(other.value, rel=1e-7, abs=1e-7)
    if one.margin is not None and other.margin is not None:
        assert one.margin == pytest.approx(other.margin, rel=1e-6, abs=1e-6)


def clear_of_its_limit(found: Verdict) -> bool:
    """Rounding may tip a value that lies on its limit by chance."""
    return found.value is None or found.limit is None or abs(found.value - found.limit) > 1e-6


@settings(max_examples=150)
@given(two_signals(), st.sampled_from(RULES), st.sampled_from(WINDOWS), st.lists(st.floats(0.1, 11.9), max_size=6))
def test_how_a_run_is_cut_does_not_matter(pieces: Pieces, text: str, window: str, cuts: list[float]) -> None:
    judged_rule = rule("{" + text + window + "}")
    first = verdict_of(judged_rule, at_once(pieces))
    if clear_of_its_limit(first):
        same(first, verdict_of(judged_rule, at_once(recut(pieces, cuts))))


def later(judged_rule: Rule, shift: float) -> Rule:
    """The same rule with its window moved; a rule without `after` starts with the run."""

    def moved(time: Quantity | None) -> Quantity | None:
        return replace(time, value=time.value + shift) if time is not None else None

    return replace(judged_rule, after=moved(judged_rule.after), until=moved(judged_rule.until))


@settings(max_examples=100)
@given(two_signals(), st.sampled_from(RULES), st.sampled_from(WINDOWS), st.sampled_from([1.0, 37.5, 86400.0]))
def test_when_the_clock_starts_does_not_matter(pieces: Pieces, text: str, window: str, shift: float) -> None:
    judged_rule = rule("{" + text + window + "}")
    first = verdict_of(judged_rule, at_once(pieces))
    moved = Pieces(pieces.names, pieces.start + shift, pieces.length, pieces.samples)
    happenings = tuple(replace(one, time=one.time + shift) for one in events())
    second = verdict_of(later(judged_rule, shift), run(moved, *happenings, lasts=END + shift))
    if clear_of_its_limit(first):
        same(first, second)
        if first.at is not None and second.at is not None and judged_rule.kind != "rate":
            assert second.at - shift == pytest.approx(first.at, abs=1e-4)


KINDS_OF_SIZE = [one for one in RULES if "reversals" not in one and "alarms" not in one]


def scaled(text: str, factor: float) -> Rule:
    """The same rule on a signal that is `factor` times as large."""
    found = rule("{" + text + "}")
    timed = found.kind in ("outside",)
    share = found.kind in ("overshoot", "undershoot")

    def times(quantity: Quantity | None) -> Quantity | None:
        return replace(quantity, value=quantity.value * factor) if quantity is not None else None

    of = times(found.of) if isinstance(found.of, Quantity) else found.of
    return replace(found, limit=found.limit if timed or share else times(found.limit), of=of, band=times(found.band))


@settings(max_examples=100)
@given(two_signals(), st.sampled_from(KINDS_OF_SIZE), st.sampled_from([1e-3, 0.5, 1e4]))
def test_the_scale_of_the_signal_does_not_matter(pieces: Pieces, text: str, factor: float) -> None:
    first = verdict_of(rule("{" + text + "}"), at_once(pieces))
    larger = Pieces(pieces.names, pieces.start, pieces.length, factor * pieces.samples)
    set_point, load = events()
    stepped = replace(set_point, set_point_from=0.0, set_point_to=0.1 * factor)
    second = verdict_of(scaled(text, factor), run(larger, stepped, load, lasts=END))
    if clear_of_its_limit(first):
        assert first.verdict == second.verdict
        if first.margin is not None and second.margin is not None and np.isfinite(first.margin):
            assert second.margin == pytest.approx(first.margin, rel=1e-6, abs=1e-6)


@settings(max_examples=60)
@given(two_signals(), st.sampled_from([0.0, 4.0, 330.0]))
def test_errors_do_not_depend_on_where_the_scale_starts(pieces: Pieces, zero: float) -> None:
    lifted: FloatArray = pieces.samples + zero
    for text in (RULES[2], RULES[5], RULES[6], RULES[9]):
        first = verdict_of(rule("{" + text + "}"), at_once(pieces))
        raised = Pieces(pieces.names, pieces.start, pieces.length, lifted)
        if clear_of_its_limit(first):
            same(first, verdict_of(rule("{" + text + "}"), at_once(raised)))


@settings(max_examples=60)
@given(two_signals(), st.sampled_from(RULES))
def test_a_wider_limit_is_never_worse(pieces: Pieces, text: str) -> None:
    found = rule("{" + text + "}")
    assert found.limit is not None
    wider = replace(found, limit=replace(found.limit, value=found.limit.value * 1.7))
    first, second = verdict_of(found, at_once(pieces)), verdict_of(wider, at_once(pieces))
    assert not (first.verdict == "passed" and second.verdict == "failed")


def test_the_unit_of_a_limit_does_not_matter() -> None:
    pieces = Pieces(("x",), np.array([0.0]), np.array([60.0]), np.linspace(0, 1.0, 5)[None, :, None])
    for one, other in (("2.5 min", "150 s"), ("90 s", "1.5 min")):
        texts = [f"{{signal: x, iae: {time.replace(' ', ' %*')}, of: 0 %}}" for time in (one, other)]
        same(*(verdict_of(rule(text), run(pieces, happened(0.0, "x"))) for text in texts))
    assert parse_unit("%*min").factor == pytest.approx(0.6)

"""Every kind of rule: on the limit, just over, too short, undisturbed; windows; awkward signals."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from judging_builders import happened, held, judged, rule, run, sampled

from loopsim.documents.shapes import RULES
from loopsim.documents.types import Rule
from loopsim.errors import InputError
from loopsim.results import Pieces, Status
from loopsim.study.judge import overall, verdict_of
from loopsim.study.rules import KINDS
from loopsim.study.types import LoopMargins, Verdict, not_run

RAMP = sampled({"x": lambda t: t / 100, "sp": lambda t: 0 * t}, [0.0, 3.0, 10.0])  # 0 to 10 % in 10 s


# ---------------------------------------------------------------- on the limit, just over
# value of each kind on RAMP by hand: the ramp ends at 10 %; |x| integrates to 50 %*s; above 4 % for 6 s; 1 %/s
@pytest.mark.parametrize(
    ("on", "over", "value"),
    [
        ("{signal: x, max: 10 %}", "{signal: x, max: 9.999 %}", 0.1),
        ("{signal: x, min: 0 %}", "{signal: x, min: 0.001 %}", 0.0),
        ("{signal: x, within: 10 %, of: sp}", "{signal: x, within: 9.999 %, of: sp}", 0.1),
        ("{signal: x, within: 8 %, of: 2 %}", "{signal: x, within: 7.999 %, of: 2 %}", 0.08),
        ("{signal: x, iae: 50 %*s, of: sp}", "{signal: x, iae: 49.99 %*s, of: sp}", 0.5),
        ("{signal: x, travel: 10 %}", "{signal: x, travel: 9.999 %}", 0.1),
        ("{signal: x, rate: 1 %/s}", "{signal: x, rate: 0.9999 %/s}", 0.01),
        ("{signal: x, outside: 6 s, band: 4 %, of: sp}", "{signal: x, outside: 5.999 s, band: 4 %, of: sp}", 6.0),
    ],
)
def test_on_the_limit_is_passed_and_just_over_is_failed(on: str, over: str, value: float) -> None:
    kept, broken = judged(on, RAMP), judged(over, RAMP)
    assert (kept.verdict, broken.verdict) == ("passed", "failed")
    assert kept.value == pytest.approx(value, abs=1e-8)  # a band is widened by a billionth, as limits are
    assert kept.margin == pytest.approx(0.0, abs=1e-9) or value == 0.0
    assert broken.margin is None or broken.margin < 0
    assert kept.reason == "" and broken.reason.startswith(("x ", "the absolute error"))


@pytest.mark.parametrize(
    ("text", "verdict"),
    [
        ("{signal: x, reversals: 3}", "passed"),
        ("{signal: x, reversals: 2}", "failed"),
        ("{signal: x, reversals: 0, band: 101 %}", "passed"),
        ("{signal: x, alarms: 2}", "passed"),
        ("{signal: x, alarms: 1}", "failed"),
        ("{signal: x, alarms: 0}", "failed"),
    ],
)
def test_counts(text: str, verdict: str) -> None:
    assert judged(text, held("x", [0, 1, 0, 1, 0])).verdict == verdict


def test_an_alarm_that_stands_from_the_start_counts_and_one_that_clears_then_does_not() -> None:
    pieces = held("x", [1, 1, 0, 1])
    assert judged("{signal: x, alarms: 5, after: 1 s}", pieces).value == 2
    assert judged("{signal: x, alarms: 5, after: 2 s}", pieces).value == 1


def test_rounding_of_a_billionth_is_on_the_limit() -> None:
    pieces = held("x", [0.3 + 1e-11])
    assert judged("{signal: x, max: 30 %}", pieces).verdict == "passed"
    assert judged("{signal: x, max: 30 %}", held("x", [0.3 + 1e-8])).verdict == "failed"


def test_every_kind_that_files_know_is_judged() -> None:
    assert set(KINDS) == set(RULES)


def test_deviation_is_judged_while_nothing_happens() -> None:
    square = held("x", [0.01, -0.01] * 10)  # one sigma of a square wave is its amplitude
    assert judged("{signal: x, deviation: 1 %, until: 10 s}", square, happened(10.0, "x")).verdict == "passed"
    found = judged("{signal: x, deviation: 0.9 %, until: 10 s}", square, happened(10.0, "x"))
    assert found.reason == "x swings by 1 % (one sigma); 0.9 % is allowed"
    assert judged("{signal: x, deviation: 1 %, until: 30 s}", square).verdict == "inconclusive"


@pytest.mark.parametrize("play", [0, 2, 9.9, 10, 12])
def test_travel_through_a_play(play: float) -> None:
    # by hand: the first movement of 10 % is taken up by half the play, each later one by the whole
    found = judged(f"{{signal: x, travel: 60 %, band: {play} %}}", held("x", [0, 0.1, 0, 0.1, 0, 0.1, 0]))
    assert found.value == pytest.approx((10 - play / 2 + 5 * max(10 - play, 0)) / 100, abs=1e-9)


# ---------------------------------------------------------------- not covered, not disturbed, not there
SIGNAL_RULES = [
    "signal: x, max: 50 %",
    "signal: x, min: -50 %",
    "signal: x, within: 50 %, of: sp",
    "signal: x, iae: 1000 %*s, of: sp",
    "signal: x, travel: 100 %",
    "signal: x, reversals: 3",
    "signal: x, rate: 10 %/s",
    "signal: x, outside: 30 s, band: 1 %, of: sp",
    "signal: x, alarms: 3",
    "signal: x, overshoot: 500 %, of: sp",
    "signal: x, undershoot: 500 %, of: sp",
]
STEP = happened(0.0, "x", "sp", target="sp", step=(0.0, 0.05))


@pytest.mark.parametrize("text", SIGNAL_RULES)
def test_passed_only_when_covered_and_disturbed(text: str) -> None:
    assert judged("{" + text + "}", RAMP, STEP).verdict == "passed"
    short = judged("{" + text + ", until: 11 s}", RAMP, STEP)
    assert short.verdict == "inconclusive" and "ends at 10 s, before the window's end at 11 s" in short.reason
    stopped = judged("{" + text + "}", RAMP, STEP, lasts=20.0)
    assert stopped.verdict == "inconclusive"
    calm = judged("{" + text + "}", RAMP, happened(0.0, "y"))
    assert calm.verdict == "inconclusive" and calm.reason
    late = judged("{" + text + ", until: 5 s}", RAMP, happened(5.0, "x", "sp", target="sp", step=(0.0, 0.05)))
    assert late.verdict in ("inconclusive", "passed")
    if "shoot" not in text:
        assert late.verdict == "inconclusive" and "nothing that happened before 5 s reaches x" in late.reason


@pytest.mark.parametrize("text", SIGNAL_RULES[:-2])
def test_a_limit_seen_to_be_broken_is_failed_however_short_the_run(text: str) -> None:
    wild = sampled({"x": lambda t: 40 * np.sin(t * 9), "sp": lambda t: 0 * t}, list(np.linspace(0, 60, 601)))
    assert judged("{" + text + ", until: 300 s}", wild, happened(0.0, "y")).verdict == "failed"


def test_a_run_that_stopped_says_why() -> None:
    made = run(RAMP, happened(0.0, "x"), lasts=60.0)
    object.__setattr__(made.trends, "status", Status("stopped", "'tank.h' must be at least 0 m; it passed it", 10.0))
    found = verdict_of(rule("{signal: x, max: 50 %}"), made)
    assert found.verdict == "inconclusive"
    assert found.reason == (
        "the run stopped at 10 s, before the window's end at 60 s: 'tank.h' must be at least 0 m; it passed it"
    )


def test_a_run_without_values_is_inconclusive() -> None:
    nothing = Pieces(("x",), np.zeros(0), np.zeros(0), np.zeros((0, 5, 1)))
    made = run(held("x", [0.0]), happened(0.0, "x"))
    object.__setattr__(made.trends, "pieces", nothing)
    assert verdict_of(rule("{signal: x, max: 50 %}"), made).verdict == "inconclusive"


def test_a_strategy_that_could_not_be_computed_is_inconclusive_and_says_why() -> None:
    for text in ("{signal: x, max: 50 %}", "{signal: x, within: 1 %, of: sp, by: 1 min, after: 5 min}"):
        found = verdict_of(rule(text), not_run("feedback", "there is no steady state", 600.0))
        assert found.verdict == "inconclusive" and found.reason.endswith("there is no steady state")


def test_a_signal_without_a_value_is_inconclusive() -> None:
    found = judged("{signal: x, max: 50 %}", held("x", [0.0, math.nan, 0.0]))
    assert found.verdict == "inconclusive" and found.reason == "x has no value at 1 s"


def test_a_disturbance_of_the_set_point_disturbs_the_rule() -> None:
    assert judged("{signal: x, within: 50 %, of: sp}", RAMP, happened(1.0, "sp")).verdict == "passed"
    assert judged("{signal: x, max: 50 %}", RAMP, happened(1.0, "sp")).verdict == "inconclusive"


def test_what_a_strategy_lacks_does_not_apply() -> None:
    for text in ("{signal: TV-101.position, max: 50 %}", "{signal: x, within: 1 %, of: TV-101.position}"):
        found = judged(text, RAMP, not_applicable=frozenset({"TV-101.position"}))
        assert found.verdict == "not_applicable" and found.reason == "feedback has no TV-101.position"
    found = judged("{loop: TIC-101, gain_margin: 2}", RAMP, not_applicable=frozenset({"TIC-101"}))
    assert found.verdict == "not_applicable"


def test_an_unknown_signal_is_an_error_with_the_nearest_name() -> None:
    with pytest.raises(InputError, match="no signal is called 'spp'"):
        judged("{signal: spp, max: 50 %}", RAMP)


# ---------------------------------------------------------------- windows
SQUARE = held("x", [0, 5, 0, 3, 0, 9])


@pytest.mark.parametrize(
    ("window", "events", "value", "at"),
    [
        ("", (0,), 9, 5),
        (", after: 2 s", (0,), 9, 5),
        (", after: 2 s", (0, 5), 3, 3),  # up to the next event
        (", after: 2 s", (0, 2, 5), 3, 3),  # an event at `after` is not the next one
        (", after: 2 s, until: 6 s", (0, 5), 9, 5),
        (", until: 3 s", (0, 2), 5, 1),
        (", after: 2 s, until: 3 s", (0,), 0, 2),  # what jumps at `until` comes too late
        (", after: 1 s, until: 3 s", (0,), 5, 1),  # what jumps at `after` is in it
    ],
)
def test_windows(window: str, events: tuple[float, ...], value: float, at: float) -> None:
    found = judged("{signal: x, max: 1000 %" + window + "}", SQUARE, *(happened(one, "x") for one in events))
    assert (found.value, found.at) == (value, at)


def test_a_window_is_the_same_where_an_event_does_not_apply() -> None:
    without = judged("{signal: x, max: 1000 %, after: 2 s}", SQUARE, happened(0, "x"), scheduled=(0.0, 5.0))
    assert without.value == 3


DECAY = sampled({"x": lambda t: np.exp(-t / 60), "sp": lambda t: 0 * t}, list(np.linspace(0, 600, 301)))


def test_within_by_counts_from_after_and_holds_until_the_window_ends() -> None:
    # exp(-t/60 s) falls to 10 % at 60*ln(10) s = 138.2 s
    text = "{{signal: x, within: 10 %, of: sp, by: {} s, after: 0 s}}"
    assert judged(text.format(139), DECAY).verdict == "passed"
    assert judged(text.format(138), DECAY).verdict == "failed"
    late = "{signal: x, within: 10 %, of: sp, by: 39 s, after: 100 s}"
    found = judged(late, DECAY)
    assert found.verdict == "passed" and found.at == pytest.approx(139.0)
    assert found.value == pytest.approx(math.exp(-139 / 60), rel=1e-7)


@pytest.mark.parametrize("by", [600, 601])
def test_within_too_short_to_be_judged_at_all(by: float) -> None:
    found = judged(f"{{signal: x, within: 10 %, of: sp, by: {by} s}}", DECAY)
    assert found.verdict == "inconclusive" and found.value is None
    assert "before the signal is judged at all" in found.reason


def test_dwell_asks_for_one_long_enough_stay_that_begins_in_time() -> None:
    pieces = held("x", [5, 0, 0, 5, 0, 0, 0, 0, 5])
    text = "{{signal: x, within: 100 %, of: 0 %, by: {} s, dwell: {} s}}"
    assert judged(text.format(1, 2), pieces).verdict == "passed"
    assert judged(text.format(4, 4), pieces).verdict == "passed"
    assert judged(text.format(3, 4), pieces).verdict == "failed"  # the long stay begins at 4 s
    assert judged(text.format(4, 5), pieces).verdict == "failed"
    assert judged("{signal: x, within: 100 %, of: 0 %, by: 4 s}", pieces).verdict == "failed"


def test_dwell_of_which_too_little_is_seen_is_inconclusive() -> None:
    pieces = held("x", [5, 0, 0, 0])
    assert judged("{signal: x, within: 100 %, of: 0 %, by: 1 s, dwell: 3 s}", pieces).verdict == "passed"
    found = judged("{signal: x, within: 100 %, of: 0 %, by: 1 s, dwell: 4 s}", pieces)
    assert found.verdict == "inconclusive"


# ---------------------------------------------------------------- steps of the set point
def second_order(zeta: float, sign: float, offset: float) -> Pieces:
    """The unit step response of 1/(s^2 + 2 zeta s + 1), by its closed form."""
    root = math.sqrt(1 - zeta**2)

    def response(t: np.ndarray) -> np.ndarray:
        swing = np.cos(root * t) + zeta / root * np.sin(root * t)
        return offset + sign * (1 - np.exp(-zeta * t) * swing)

    return sampled({"x": response}, list(np.linspace(0, 40, 401)))


# Second-order facts: exp(-pi zeta/sqrt(1 - zeta^2)) at pi/sqrt(1 - zeta^2) (in any control handbook)
@pytest.mark.parametrize(("zeta", "wanted"), [(0.5, 0.16303), (0.4, 0.25383), (0.7071, 0.043214), (0.21545, 0.5)])
@pytest.mark.parametrize(("sign", "offset"), [(1.0, 0.0), (-1.0, 0.0), (1.0, 300.0), (-1.0, 1.0), (1.0, -1.0)])
def test_overshoot_of_a_second_order_response(zeta: float, wanted: float, sign: float, offset: float) -> None:
    step = happened(0.0, "x", target="sp", step=(offset, offset + sign))
    found = judged("{signal: x, overshoot: 100 %}", second_order(zeta, sign, offset), step)
    assert found.value == pytest.approx(wanted, abs=1e-5)
    assert found.at == pytest.approx(math.pi / math.sqrt(1 - zeta**2), rel=1e-3)
    assert judged("{signal: x, undershoot: 1 %}", second_order(zeta, sign, offset), step).value == pytest.approx(
        0, abs=1e-9
    )


def test_overshoot_in_the_signals_own_unit() -> None:
    step = happened(0.0, "x", target="sp", step=(300.0, 310.0))
    pieces = second_order(0.5, 1.0, 300.0)
    tenfold = Pieces(("x",), pieces.start, pieces.length, 300 + 10 * (pieces.samples - 300))
    for text, verdict in (("{signal: x, overshoot: 1.64 K}", "passed"), ("{signal: x, overshoot: 1.62 K}", "failed")):
        found = judged(text, tenfold, step, units={"x": "degC"})
        assert found.verdict == verdict and found.value == pytest.approx(1.6303, abs=1e-4)


def inverse(t: np.ndarray) -> np.ndarray:
    """Unit step response of (1 - s)/(s + 1)^2: 1 - exp(-t) - 2 t exp(-t)."""
    return 1 - np.exp(-t) - 2 * t * np.exp(-t)


def test_an_inverse_response_is_undershoot() -> None:
    # closed form: the derivative (2t - 1) exp(-t) is 0 at t = 1/2, where the response is 1 - 2 exp(-1/2) = -0.2131
    pieces = sampled({"x": inverse}, list(np.linspace(0, 20, 201)))
    step = happened(0.0, "x", target="sp", step=(0.0, 1.0))
    found = judged("{signal: x, undershoot: 21 %}", pieces, step)
    assert found.verdict == "failed" and found.value == pytest.approx(2 * math.exp(-0.5) - 1, abs=1e-6)
    assert found.at == pytest.approx(0.5, abs=1e-3)
    assert judged("{signal: x, overshoot: 1 %}", pieces, step).verdict == "passed"


def test_a_step_of_no_size_and_no_step_are_inconclusive_with_the_reason() -> None:
    found = judged("{signal: x, overshoot: 20 %}", RAMP, happened(0.0, "x", target="sp", step=(1.0, 1.0)))
    assert (found.verdict, found.value) == (
        "inconclusive",
        None,
    ) and found.reason == "the step of sp at 0 s has no size"
    found = judged("{signal: x, overshoot: 20 %}", RAMP, happened(0.0, "x"))
    assert found.verdict == "inconclusive" and found.reason == "no step of a set point in the run reaches x"


def test_a_step_to_zero_is_a_step() -> None:
    step = happened(0.0, "x", target="sp", step=(1.0, 0.0))
    found = judged("{signal: x, overshoot: 20 %}", second_order(0.5, -1.0, 1.0), step)
    assert found.verdict == "passed" and found.value == pytest.approx(0.16303, abs=1e-5)


def test_the_last_step_up_to_after_counts() -> None:
    steps = (happened(0.0, "x", target="sp", step=(0.0, 1.0)), happened(3.0, "x", target="sp", step=(1.0, 3.0)))
    pieces = held("x", [0, 1.5, 1, 1, 4, 3])
    assert judged("{signal: x, overshoot: 1 %, after: 0 s}", pieces, *steps).value == pytest.approx(0.5)
    assert judged("{signal: x, overshoot: 1 %, after: 3 s}", pieces, *steps).value == pytest.approx(0.5)
    assert judged("{signal: x, overshoot: 1 %, after: 5 s}", pieces, *steps).value == pytest.approx(0.0)
    assert judged("{signal: x, overshoot: 1 %}", pieces, *steps).value == pytest.approx(0.5)


# ---------------------------------------------------------------- units, jumps, margins
def test_temperatures_are_judged_as_points_and_as_differences() -> None:
    pieces = sampled({"x": lambda t: 333.15 + t / 10}, [0.0, 50.0, 100.0])  # 60 to 70 degC
    units = {"x": "degC"}
    assert judged("{signal: x, max: 70 degC}", pieces, units=units).verdict == "passed"
    found = judged("{signal: x, max: 69 degC}", pieces, units=units)
    assert found.reason == "x comes to 70 degC at 100 s; no more than 69 degC is allowed"
    assert judged("{signal: x, within: 5 K, of: 65 degC}", pieces, units=units).verdict == "passed"
    assert judged("{signal: x, iae: 250 K*s, of: 65 degC}", pieces, units=units).verdict == "passed"
    assert judged("{signal: x, rate: 6 K/min}", pieces, units=units).verdict == "passed"
    found = judged("{signal: x, rate: 5.9 K/min}", pieces, units=units)
    assert found.reason.startswith("x changes by 6 K/min at ")


def test_gauge_pressure_counts_from_the_plants_air_pressure() -> None:
    pieces, units = held("x", [290000.0]), {"x": "bar(g)"}
    assert judged("{signal: x, max: 2 bar(g)}", pieces, units=units, air_pressure=90000.0).verdict == "passed"
    assert judged("{signal: x, max: 2 bar(g)}", pieces, units=units, air_pressure=80000.0).verdict == "failed"


def test_a_jump_breaks_every_rate() -> None:
    found = judged("{signal: x, rate: 1000 %/s}", held("x", [0, 0, 0.03]))
    assert found.verdict == "failed" and math.isinf(found.value or 0.0)
    assert found.reason == "x jumps by 3 % at 2 s, which no rate describes"


def test_values_near_the_limit_are_told_apart() -> None:
    found = judged("{signal: x, within: 1.5 %, of: 0 %}", held("x", [0.0150002]))
    assert found.reason == "x is 1.50002 % above 0 % at 0 s; 1.5 % is allowed"


def margins(text: str, stable: bool = True, **values: float) -> Verdict:
    return judged(text, RAMP, margins={"TIC-101": LoopMargins(stable, values)})


def test_margins_of_loops() -> None:
    text = "{loop: TIC-101, gain_margin: 2.0, phase_margin: 40 deg, max_sensitivity: 1.9}"
    found = judged(text, RAMP)
    assert found.verdict == "inconclusive" and found.reason == "this version does not compute margins"
    good = margins(text, gain_margin=2.0, phase_margin=math.radians(40), max_sensitivity=1.9)
    assert good.verdict == "passed" and good.margin == pytest.approx(0.0)
    bad = margins(text, gain_margin=3.0, phase_margin=math.radians(30), max_sensitivity=1.8)
    assert bad.reason == "the phase margin of TIC-101 is 30 deg; at least 40 deg is wanted"
    assert bad.value == pytest.approx(math.radians(30)) and bad.margin == pytest.approx(1 - 40 / 30)
    endless = margins(text, gain_margin=math.inf, phase_margin=1.5, max_sensitivity=1.0)
    assert endless.verdict == "passed"
    unstable = margins(text, False, gain_margin=3.0, phase_margin=1.0, max_sensitivity=1.2)
    assert unstable.verdict == "failed" and unstable.reason == "the closed loop of TIC-101 is not stable"
    assert margins(text, gain_margin=3.0).verdict == "inconclusive"


@pytest.mark.parametrize(
    ("found", "wanted"),
    [
        (["passed", "failed", "inconclusive"], "failed"),
        (["passed", "inconclusive", "not_applicable"], "inconclusive"),
        (["passed", "not_applicable"], "passed"),
        (["not_applicable"], "not_judged"),
        ([], "not_judged"),
    ],
)
def test_the_verdict_on_all_rules(found: list[str], wanted: str) -> None:
    assert overall([Verdict("", "max", one) for one in found]) == wanted


@given(st.sampled_from(SIGNAL_RULES), st.floats(-0.4, 0.4))
def test_a_signal_that_never_moves_is_judged_without_trouble(text: str, level: float) -> None:
    pieces = sampled({"x": lambda t: level + 0 * t, "sp": lambda t: level + 0 * t}, [0.0, 1.0, 2.0])
    made: Rule = rule("{" + text + "}")
    assert verdict_of(made, run(pieces, STEP)).verdict in ("passed", "failed")

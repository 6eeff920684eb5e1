"""Figures of responses, held against closed forms; awkward responses give a reason in place of nonsense."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from judging_builders import happened, held, rule, run, sampled

from loopsim.language.units import parse_unit
from loopsim.results import FloatArray, Pieces
from loopsim.study.metrics import metrics_of
from loopsim.study.path import integral_of_size, minus, path_of
from loopsim.study.steps import Settling, rest_of, step_figures, swing
from loopsim.study.types import Loop, LoopMetrics, Measure

LOOP = Loop("TIC-101", "pv", "sp", "out")
KELVIN = parse_unit("K")


def figures(
    response: Callable[[FloatArray], FloatArray],
    end: float,
    target: float | None,
    start: float = 0.0,
    band: float | None = 0.02,
    edges: int = 800,
) -> dict[str, Measure]:
    path = path_of(sampled({"x": response}, list(np.linspace(0, end, edges + 1))), "x")
    return {one.name: one for one in step_figures(path, start, target, Settling(band), KELVIN)}


def second_order(zeta: float) -> Callable[[FloatArray], FloatArray]:
    root = math.sqrt(1 - zeta**2)
    return lambda t: 1 - np.exp(-zeta * t) * (np.cos(root * t) + zeta / root * np.sin(root * t))


# Second-order facts: overshoot exp(-pi zeta/sqrt(1 - zeta^2)), peak time pi/sqrt(1 - zeta^2) (any control handbook)
@pytest.mark.parametrize(("zeta", "wanted"), [(0.5, 0.16303), (0.4, 0.25383), (0.7071, 0.043214)])
def test_second_order_step_facts(zeta: float, wanted: float) -> None:
    for target in (1.0, None):
        found = figures(second_order(zeta), 60.0, target)
        assert found["overshoot"].value == pytest.approx(wanted, abs=1e-5)
        assert found["overshoot"].at == pytest.approx(math.pi / math.sqrt(1 - zeta**2), abs=1e-3)
        assert found["undershoot"].value == pytest.approx(0.0, abs=1e-6)
        assert found["offset"].value == pytest.approx(0.0, abs=1e-6)


# First-order lag: inside ± 2 % after tau*ln(50), ± 5 % after tau*ln(20), by the exponential itself
@pytest.mark.parametrize("band", [0.02, 0.05])
@pytest.mark.parametrize(("sign", "offset"), [(1.0, 0.0), (-1.0, 0.0), (-1.0, 1.0), (1.0, 330.0)])
def test_settling_of_a_lag(band: float, sign: float, offset: float) -> None:
    found = figures(lambda t: offset + sign * (1 - np.exp(-t / 5)), 60.0, offset + sign, offset, band)
    assert found["settling_time"].value == pytest.approx(-5 * math.log(band), abs=1e-6)
    assert found["overshoot"].value == pytest.approx(0.0, abs=1e-6)


# IAE of an open step of a first-order lag with dead time: gain times (dead time + time constant), by integration
@pytest.mark.parametrize(("dead_time", "lag"), [(0.0, 5.0), (3.0, 5.0), (10.0, 2.0)])
def test_iae_of_a_lag_with_dead_time(dead_time: float, lag: float) -> None:
    edges = sorted({0.0, dead_time, *np.linspace(dead_time, dead_time + 40 * lag, 1001)})

    def response(t: FloatArray) -> FloatArray:
        return np.where(t < dead_time, 0.0, 2 * (1 - np.exp(-np.maximum(t - dead_time, 0) / lag)))

    path = path_of(sampled({"x": response}, edges), "x")
    assert integral_of_size(minus(path, 2.0)) == pytest.approx(2 * (dead_time + lag), rel=1e-6)


# PI with Ti = tau on a first-order lag: a unit load at the input gives two exponentials, never negative, so that the
# IAE is the integral of the error, Ti/Kc (the output must move by 1 = Kc/Ti times that integral)
def test_iae_of_a_load_step_under_integral_action() -> None:
    gain, lag, loop_gain = 2.0, 10.0, 3.0
    fast = lag / (gain * loop_gain)

    def error(t: FloatArray) -> FloatArray:
        return gain / lag * (np.exp(-t / lag) - np.exp(-t / fast)) / (1 / fast - 1 / lag)

    path = path_of(sampled({"x": error}, list(np.linspace(0, 300, 3001))), "x")
    assert integral_of_size(path) == pytest.approx(lag / loop_gain, rel=1e-6)


# ---------------------------------------------------------------- awkward responses
def test_an_integrating_response_has_no_steady_state() -> None:
    found = figures(lambda t: 0.1 * t, 100.0, None)
    assert all(one.value is None for one in found.values())
    assert found["overshoot"].reason == "no steady state: it still moves by 1 K in 10 s at the end"
    aimed = figures(lambda t: 0.1 * t, 100.0, 5.0)
    assert aimed["offset"].value is None and aimed["settling_time"].value is None


def test_a_response_that_swings_on_has_no_steady_state() -> None:
    found = figures(lambda t: 1 - np.cos(t), 100.0, None)
    assert "it still swings by" in found["offset"].reason and found["overshoot"].value is None
    assert figures(lambda t: 1 - np.cos(t), 100.0, 1.0)["settling_time"].value is None


def test_an_inverse_response_is_undershoot_and_not_overshoot() -> None:
    # (1 - s)/(s + 1)^2: least value 1 - 2 exp(-1/2) at t = 1/2, by differentiation
    for sign in (1.0, -1.0):
        found = figures(lambda t, sign=sign: sign * (1 - np.exp(-t) - 2 * t * np.exp(-t)), 30.0, sign)  # type: ignore[misc]
        assert found["undershoot"].value == pytest.approx(2 * math.exp(-0.5) - 1, abs=1e-6)
        assert found["undershoot"].at == pytest.approx(0.5, abs=1e-2)
        assert found["overshoot"].value == pytest.approx(0.0, abs=1e-6)


def test_a_step_to_zero_has_an_overshoot_and_a_load_with_aim_zero_has_none() -> None:
    falling = figures(lambda t: 1 - second_order(0.5)(t), 60.0, 0.0, 1.0)
    assert falling["overshoot"].value == pytest.approx(0.16303, abs=1e-5)
    load = figures(lambda t: t * np.exp(-t), 60.0, 0.0, 0.0)
    assert load["overshoot"].value is None and load["overshoot"].reason == "the set point did not move"
    # t exp(-t) = 0.02 for the last time at t = 5.84; scipy's Lambert function as the reference
    from scipy.special import lambertw

    assert load["settling_time"].value == pytest.approx(float(-lambertw(-0.02, -1).real), abs=1e-3)


def test_noise_is_no_overshoot() -> None:
    draws = np.random.default_rng(3).normal(0, 0.01, 1200)
    times = np.arange(1200) + 0.5
    pieces = held("x", list(1 - np.exp(-times / 50) + draws))
    found = {one.name: one for one in step_figures(path_of(pieces, "x"), 0.0, 1.0, Settling(0.06), KELVIN)}
    assert found["overshoot"].value is None and "not told from what swings at the end" in found["overshoot"].reason
    assert found["offset"].value == pytest.approx(0.0, abs=0.005)
    assert found["settling_time"].value == pytest.approx(50 * math.log(1 / 0.06), rel=0.1)
    tight = {one.name: one for one in step_figures(path_of(pieces, "x"), 0.0, 1.0, Settling(0.01), KELVIN)}
    assert tight["settling_time"].value is None


def test_noise_that_outweighs_the_movement_has_a_mean_all_the_same() -> None:
    draws = np.random.default_rng(5).normal(0.3, 1.0, 3000)
    found = rest_of(path_of(held("x", list(draws)), "x"))
    assert found.value == pytest.approx(0.3, abs=3 / math.sqrt(300)) and found.sigma == pytest.approx(1.0, rel=0.15)


def test_settling_needs_to_be_seen_for_a_dwell() -> None:
    path = path_of(sampled({"x": lambda t: np.exp(-t / 5)}, list(np.linspace(0, 20, 201))), "x")
    inside_after = 5 * math.log(50)  # 19.56 s
    early = step_figures(path, 1.0, 0.0, Settling(0.02, 0.4), KELVIN)[-1]
    late = step_figures(path, 1.0, 0.0, Settling(0.02, 0.5), KELVIN)[-1]
    assert early.value == pytest.approx(inside_after, abs=1e-6)
    assert late.value is None and late.reason == "does not stay within 0.02 K for the last 0.5 s up to 20 s"


def test_a_response_too_short_to_rest() -> None:
    instant = Pieces(("x",), np.array([0.0]), np.array([0.0]), np.zeros((1, 5, 1)))
    assert rest_of(path_of(instant, "x")).value is None


@given(st.floats(0.0, 5.0), st.floats(-50, 50), st.floats(-3, 3))
def test_swing_is_what_a_straight_line_leaves(amplitude: float, level: float, slope: float) -> None:
    # a cosine over whole cycles, which no line resembles: amplitude/sqrt(2), whatever line it rides on
    path = path_of(
        sampled(
            {"x": lambda t: level + slope * t / 100 + amplitude * np.cos(2 * np.pi * t)},
            list(np.linspace(0, 40, 801)),
        ),
        "x",
    )
    assert swing(path) == pytest.approx(amplitude / math.sqrt(2), rel=1e-4, abs=1e-5)


# ---------------------------------------------------------------- of a run
def loop_pieces(end: float = 200.0, step_at: float = 50.0) -> Pieces:
    edges = sorted({*np.linspace(0, end, 401), step_at})

    def pv(t: FloatArray) -> FloatArray:
        return np.where(t < step_at, 0.2, 0.2 + 0.1 * second_order(0.5)(np.maximum(t - step_at, 0)))

    return sampled(
        {
            "pv": pv,
            "sp": lambda t: np.where(t < step_at, 0.2, 0.3),
            "out": lambda t: np.where(t < step_at, 0.5, 0.6),
        },
        edges,
    )


def of_run(pieces: Pieces, *happenings: object, rules: tuple[str, ...] = (), **others: object) -> LoopMetrics:
    made = run(pieces, *happenings, loops=(LOOP,), **others)  # type: ignore[arg-type]
    (found,) = metrics_of(made, tuple(rule(text) for text in rules))
    return found


def by_name(measures: tuple[Measure, ...]) -> dict[str, Measure]:
    return {one.name: one for one in measures}


def test_the_figures_of_a_set_point_step() -> None:
    step = happened(50.0, "pv", target="sp", step=(0.2, 0.3))
    found = of_run(loop_pieces(), step, spans={"pv": 1.0})
    whole, (event,) = by_name(found.measures), found.events
    after = by_name(event.measures)
    assert (event.begin, event.end) == (50.0, 200.0)
    assert whole["peak_deviation"].value == pytest.approx(-0.1) and whole["peak_deviation"].at == pytest.approx(50.0)
    assert after["overshoot"].value == pytest.approx(0.16303, abs=1e-4)
    assert whole["output_travel"].value == pytest.approx(0.1) and whole["output_reversals"].value == 0
    assert whole["output_noise"].value == pytest.approx(0.0, abs=1e-12)
    # 2 % of the span of 100 % is 2 %, a fifth of the step: inside for good when the first swing has come back
    assert after["settling_time"].value == pytest.approx(1.895, abs=0.01)
    assert whole["time_outside"].value == pytest.approx(after["settling_time"].value, abs=1e-6)


def test_the_band_comes_from_the_rules_and_is_missing_where_nothing_tells() -> None:
    step = happened(50.0, "pv", target="sp", step=(0.2, 0.3))
    none = of_run(loop_pieces(), step)
    assert by_name(none.events[0].measures)["settling_time"].reason.startswith("no rule gives a band")
    assert by_name(none.measures)["time_outside"].value is None
    narrow = of_run(loop_pieces(), step, rules=("{signal: pv, within: 0.5 %, of: sp}",))
    wide = of_run(loop_pieces(), step, rules=("{signal: pv, outside: 1 s, band: 2 %, of: sp}",))
    times = [by_name(one.events[0].measures)["settling_time"].value or 0.0 for one in (narrow, wide)]
    assert times[0] > times[1] > 0


def test_each_event_is_measured_up_to_the_next() -> None:
    pieces = held("pv", [0, 1, 0, 0, 3, 0, 0, 0], 10.0)
    both = Pieces(
        ("pv", "sp", "out"),
        pieces.start,
        pieces.length,
        np.concatenate([pieces.samples, 0 * pieces.samples] * 2, 2)[:, :, :3],
    )
    found = of_run(both, happened(10.0, "pv"), happened(40.0, "pv"), happened(60.0, "other"), spans={"pv": 10.0})
    peaks = [by_name(event.measures)["peak_deviation"].value for event in found.events]
    assert peaks == [1.0, 3.0] and [event.end for event in found.events] == [40.0, 60.0]


def test_what_noise_does_to_the_output_is_told_before_the_first_event() -> None:
    draws = np.random.default_rng(1).normal(0, 0.02, 4000)
    quiet = held("out", list(0.5 + draws + np.where(np.arange(4000) < 2000, 0.0, 0.3)))
    three = Pieces(("pv", "sp", "out"), quiet.start, quiet.length, np.repeat(quiet.samples, 3, axis=2))
    found = by_name(of_run(three, happened(2000.0, "pv")).measures)["output_noise"]
    assert found.value == pytest.approx(0.02, rel=0.05)


def test_an_output_that_never_rests_tells_nothing_of_noise() -> None:
    three = sampled({"pv": np.sin, "sp": lambda t: 0 * t, "out": lambda t: t / 100}, list(np.linspace(0, 100, 401)))
    found = by_name(of_run(three, happened(0.0, "pv")).measures)["output_noise"]
    assert found.value is None and "does not come to rest" in found.reason


def test_loops_whose_signals_were_not_kept_are_left_out() -> None:
    made = run(loop_pieces(), loops=(LOOP, Loop("FIC-1", "q", "sp", "out")))
    assert [one.tag for one in metrics_of(made)] == ["TIC-101"]

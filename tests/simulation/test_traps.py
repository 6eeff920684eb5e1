"""What a toy gets wrong: each trap of control practice as a test. Sources stand beside the values."""

from __future__ import annotations

import numpy as np
import pytest

from tests.conftest import Write, run_of, trends_of

LAG = """plant: lag
about: A first-order lag behind a dead time.
boundary:
  load: {is: 0 %}
blocks:
  push: {use: summing}
  lag:  {use: first_order_lag, time_constant: 60 s}
  dead: {use: dead_time, dead_time: 10 s}
wires:
  - load -> push.u.2
  - push.out -> lag.u
  - lag.y -> dead.u
"""


def controller(**settings: str) -> str:
    """A strategy that controls the lag; settings are laid over the defaults."""
    defaults = {
        "action": "reverse",
        "range": "[0 %, 100 %]",
        "gain": "3",
        "integral": "60 s",
        "scan": "0.5 s",
        "sp": "40 %",
    }
    lines = "\n".join(f"    {key}: {value}" for key, value in {**defaults, **settings}.items() if value)
    return f"strategy: feedback\nblocks:\n  C-1:\n    use: pid\n{lines}\nwires:\n  - dead.y -> C-1.pv\n  - C-1.out -> push.u.1\n"


def scenario(*events: str, lasts: str = "20 min", every: str = "0.5 s", starts: str = "steady") -> str:
    """A scenario of the lag under its controller."""
    lines = "\n".join(f"  - {{{event}}}" for event in events)
    return (
        "scenario: trap\nplant: plant.yaml\nstrategies: {feedback: [feedback.yaml]}\n"
        f"starts: {starts}\nlasts: {lasts}\nrecord: {{every: {every}}}\n" + (f"events:\n{lines}\n" if events else "")
    )


@pytest.mark.parametrize(("scan", "expected"), [("0.5 s", 0.49), ("5 s", 1.51), ("10 s", 3.07), ("15 s", 3.93)])
def test_sampled_control_done_honestly(write: Write, scan: str, expected: float) -> None:
    """Overshoot of a step of 10 at a scan instant. Source: the control law computed by hand for these four scans."""
    folder = write(
        {
            "plant.yaml": LAG,
            "feedback.yaml": controller(scan=scan),
            "scenario.yaml": scenario("at: 30 s, step: C-1.sp, by: 10 %"),
        }
    )
    lag = trends_of(folder).columns["lag.y"]
    assert 100 * (lag.max() - 0.5) == pytest.approx(expected, abs=0.02)


def test_no_event_is_flat(write: Write) -> None:
    """Ten time constants at rest: nothing moves by more than a millionth of the span."""
    folder = write({"plant.yaml": LAG, "feedback.yaml": controller(), "scenario.yaml": scenario()})
    for name, column in trends_of(folder).columns.items():
        assert np.ptp(column) <= 1e-6 * 0.01, name


def test_derivative_acts_on_the_measurement(write: Write) -> None:
    """A set-point step gives no derivative kick: P alone jumps, by gain times step."""
    folder = write(
        {
            "plant.yaml": LAG,
            "feedback.yaml": controller(derivative="10 s", gain="1.5"),
            "scenario.yaml": scenario("at: 30 s, step: C-1.sp, by: 10 %", lasts="60 s"),
        }
    )
    trends = trends_of(folder)
    out = trends.columns["C-1.out"]
    before, after = out[trends.time < 30][-1], out[trends.time >= 30][0]
    integral = 1.5 * 0.5 / 60 * 0.1
    assert after - before == pytest.approx(1.5 * 0.1 + integral, abs=1e-9)


def test_set_point_weight_takes_the_proportional_kick(write: Write) -> None:
    """With beta = 0 a set-point step moves the output by the first integral step alone."""
    folder = write(
        {
            "plant.yaml": LAG,
            "feedback.yaml": controller(beta="0"),
            "scenario.yaml": scenario("at: 30 s, step: C-1.sp, by: 10 %", lasts="60 s"),
        }
    )
    trends = trends_of(folder)
    out = trends.columns["C-1.out"]
    assert out[trends.time >= 30][0] - out[trends.time < 30][-1] == pytest.approx(3 * 0.5 / 60 * 0.1, abs=1e-9)


def test_windup_ends_at_once(write: Write) -> None:
    """Ten minutes at the limit: once the error has turned, the output leaves the limit within one dead time."""
    folder = write(
        {
            "plant.yaml": LAG,
            "feedback.yaml": controller(sp="60 %"),
            "scenario.yaml": scenario(
                "at: 60 s, step: load, to: -70 %", "at: 660 s, step: load, to: 0 %", lasts="20 min"
            ),
        }
    )
    trends = trends_of(folder)
    out, measured = trends.columns["C-1.out"], trends.columns["dead.y"]
    assert (out[(trends.time > 200) & (trends.time < 660)] == 1.0).all()
    turned = trends.time[(trends.time > 660) & (measured > 0.6)][0]
    left = trends.time[(trends.time > 660) & (out < 1.0)][0]
    assert left <= turned + 1e-9


def test_long_manual_does_not_count_as_scan_time(write: Write) -> None:
    """After an hour in manual with no error the return to auto moves the output by 0.1 % at most."""
    folder = write(
        {
            "plant.yaml": LAG,
            "feedback.yaml": controller(),
            "scenario.yaml": scenario(
                "at: 60 s, mode: C-1, to: manual", "at: 3660 s, mode: C-1, to: auto", lasts="70 min"
            ),
        }
    )
    assert np.ptp(trends_of(folder).columns["C-1.out"]) <= 0.001


def test_gain_change_is_bumpless(write: Write) -> None:
    """A change of gain while there is an error: the output goes on by its integral alone."""
    folder = write(
        {
            "plant.yaml": LAG,
            "feedback.yaml": controller(),
            "scenario.yaml": scenario(
                "at: 30 s, step: C-1.sp, by: 10 %", "at: 32 s, step: C-1.gain, to: 5", lasts="60 s"
            ),
        }
    )
    trends = trends_of(folder)
    out = trends.columns["C-1.out"]
    step = out[np.searchsorted(trends.time, 32.0)] - out[np.searchsorted(trends.time, 31.5)]
    assert step == pytest.approx(5 * 0.5 / 60 * 0.1, abs=1e-9)


def test_one_scan_pulse_late_in_a_long_run_is_not_missed(write: Write) -> None:
    """A pulse of one scan after an hour at rest changes the result, whatever the recording interval."""
    peaks = []
    for every in ("0.5 s", "60 s"):
        folder = write(
            {
                "plant.yaml": LAG,
                "feedback.yaml": controller(),
                "scenario.yaml": scenario(
                    "at: 3600.1 s, pulse: load, by: 20 %, lasts: 0.5 s", lasts="70 min", every=every
                ),
            }
        )
        result = run_of(folder)
        place = result.trends.pieces.names.index("lag.y")
        peaks.append(result.trends.pieces.samples[:, :, place].max())
    assert peaks[0] - 0.4 == pytest.approx(0.2 * (1 - np.exp(-0.5 / 60)), rel=1e-6)
    assert peaks[0] == peaks[1]


def test_controller_without_integral_leaves_an_offset(write: Write) -> None:
    """P control with its bias: offset = (sp - bias)/(1 + Kc), source: algebra."""
    folder = write(
        {"plant.yaml": LAG, "feedback.yaml": controller(integral="", bias="20 %"), "scenario.yaml": scenario()}
    )
    measured = trends_of(folder).columns["lag.y"][0]
    assert 0.4 - measured == pytest.approx((0.4 - 0.2) / (1 + 3.0), abs=1e-9)


def test_a_range_twice_as_wide_with_converted_gain_is_the_same(write: Write) -> None:
    """Twice the range and twice the gain: the same trajectory."""
    trends = []
    for span, gain in (("[0 %, 100 %]", "3"), ("[0 %, 200 %]", "6")):
        folder = write(
            {
                "plant.yaml": LAG,
                "feedback.yaml": controller(range=span, gain=gain),
                "scenario.yaml": scenario("at: 30 s, step: C-1.sp, by: 10 %"),
            }
        )
        trends.append(trends_of(folder).columns["lag.y"])
    assert np.abs(trends[0] - trends[1]).max() < 1e-9


def test_a_choice_between_constants_is_switched_during_the_run(write: Write) -> None:
    """A vessel that fills fast and then slowly; source: two straight lines, 2 m at 100 s, then 1 mm/s."""
    block = (
        "block: filled\nabout: A vessel filled fast up to a level, then slowly.\nassumes: [upright walls]\n"
        "parameters:\n  turn: {unit: m, about: where it turns slow}\n  fast: {unit: mm/s, about: rise at first}\n"
        "  slow: {unit: mm/s, about: rise later}\nstates:\n  h: {unit: m, about: level, start: 0 m}\n"
        "balances:\n  volume: dh/dt = where(h < turn, fast, slow)\noutputs:\n  h: {unit: m}\n"
    )
    plant = (
        "plant: vessel\nblocks:\n  V-1: {use: filled, turn: 2 m, fast: 20 mm/s, slow: 1 mm/s}\n"
        "  LT-1: {use: transmitter, lag: 10 s, range: [0 m, 4 m]}\nwires:\n  - V-1.h -> LT-1.x\n"
    )
    run = (
        "scenario: fill\nplant: plant.yaml\nstrategies: {none: []}\nstarts: given\n"
        "lasts: 200 s\nrecord: {every: 10 s}\n"
    )
    trends = trends_of(write({"blocks/filled.yaml": block, "plant.yaml": plant, "fill.yaml": run}), "fill")
    expected = np.where(trends.time < 100, 0.02 * trends.time, 2 + 0.001 * (trends.time - 100))
    assert trends.columns["V-1.h"] == pytest.approx(expected, abs=1e-9)


def test_a_wired_set_point_stays_in_manual(write: Write) -> None:
    """To manual, the wire steps, to auto: the set point of before still counts. Source: the control law as specified."""
    strategy = controller(sp="", mode="cascade").replace("wires:\n", "wires:\n  - wish -> C-1.sp\n")
    events = ["at: 1 min, mode: C-1, to: manual", "at: 2 min, step: wish, to: 55 %", "at: 3 min, mode: C-1, to: auto"]
    events.append("at: 4 min, mode: C-1, to: cascade")
    folder = write(
        {
            "plant.yaml": LAG.replace("  load: {is: 0 %}\n", "  load: {is: 0 %}\n  wish: {is: 40 %}\n"),
            "feedback.yaml": strategy,
            "scenario.yaml": scenario(*events, lasts="5 min"),
        }
    )
    columns = trends_of(folder).columns
    at = {minutes: columns["C-1.sp"][int(minutes * 120)] for minutes in (0.5, 1.5, 2.5, 3.5, 4.5)}
    assert list(at.values()) == pytest.approx([0.40, 0.40, 0.40, 0.40, 0.55], abs=1e-12)

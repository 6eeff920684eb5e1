"""Shipped instruments and machines over time: noise, faults, limits. Values by closed form; sources stand beside them."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tests.conftest import Write, run_of, trends_of


def scenario(*events: str, lasts: str, every: str, starts: str = "steady") -> str:
    """A scenario of a plant without strategies."""
    lines = "\n".join(f"  - {{{event}}}" for event in events)
    return (
        "scenario: trial\nplant: plant.yaml\nstrategies: {none: []}\n"
        f"starts: {starts}\nlasts: {lasts}\nrecord: {{every: {every}}}\n" + (f"events:\n{lines}\n" if events else "")
    )


def thermometer(settings: str) -> str:
    """A transmitter at a temperature that only events change."""
    return (
        "plant: trial\nboundary:\n  true_T: {is: 50 degC}\nblocks:\n"
        f"  TT-1: {{use: temperature_transmitter, range: [0 degC, 100 degC]{settings}}}\n"
        "wires:\n  - true_T -> TT-1.T\n"
    )


# ---------------------------------------------------------------- transmitters
def test_damping_filters_the_noise(write: Write) -> None:
    """The filter between draws n held for 1 s: d(k+1) = a*d(k) + (1 - a)*n(k), a = exp(-1/5). Source: closed form."""
    shown = []
    for damping in ("", ", damping: 5 s"):
        text = thermometer(f", noise: 0.5 K, noise_every: 1 s{damping}")
        folder = write({"plant.yaml": text, "scenario.yaml": scenario(lasts="300 s", every="1 s")})
        shown.append(trends_of(folder).columns["TT-1.pv"] - 323.15)
    plain, damped = shown
    keep, expected = math.exp(-1.0 / 5.0), 0.0
    for number in range(300):
        assert damped[number] == pytest.approx(expected, abs=1e-7)
        expected = keep * expected + (1.0 - keep) * plain[number]
    assert np.std(plain) > 0.4
    assert np.std(damped) < 0.25


def test_faults_of_a_transmitter(write: Write) -> None:
    """Frozen, lost, off by 3 K, wandering by 6 K/h; and what it says once each is over."""
    events = [
        "at: 10 s, fault: TT-1, kind: frozen, lasts: 20 s",
        "at: 15 s, step: true_T, to: 60 degC",
        "at: 50 s, fault: TT-1, kind: lost, lasts: 10 s",
        "at: 70 s, fault: TT-1, kind: bias, size: 3 K, lasts: 10 s",
        "at: 100 s, fault: TT-1, kind: drift, size: 6 K/h, lasts: 10 min",
    ]
    files = {
        "plant.yaml": thermometer(", failure: -5 degC"),
        "scenario.yaml": scenario(*events, lasts="720 s", every="1 s"),
    }
    shown = trends_of(write(files)).columns["TT-1.pv"] - 273.15
    expected = {
        9: 50.0,
        29: 50.0,
        31: 60.0,
        55: -5.0,
        61: 60.0,
        75: 63.0,
        81: 60.0,
        400: 60.5,
        699: 60.0 + 6 * 599 / 3600,
    }
    for time, value in (expected | {701: 60.0}).items():
        assert shown[time] == pytest.approx(value, abs=1e-7), time


# ---------------------------------------------------------------- valve
VALVE = """plant: trial
boundary:
  demand: {is: 60 %}
blocks:
  FV-1: {use: control_valve, q_max: 10 m^3/h, stroke_time: 20 s, fails: FAILS, increase: INCREASE}
wires:
  - demand -> FV-1.signal
"""


@pytest.mark.parametrize("increase", ["opens", "closes"])
@pytest.mark.parametrize(("fails", "end"), [("open", 100.0), ("closed", 0.0), ("last", None)])
def test_where_a_valve_goes_without_air(write: Write, fails: str, end: float | None, increase: str) -> None:
    """Where it fails to does not depend on what a rising signal does; the stroke takes its time."""
    files = {
        "plant.yaml": VALVE.replace("FAILS", fails).replace("INCREASE", increase),
        "scenario.yaml": scenario("at: 10 s, fault: FV-1, kind: lost, lasts: 40 s", lasts="100 s", every="1 s"),
    }
    position = 100 * trends_of(write(files)).columns["FV-1.position"]
    begin = 60.0 if increase == "opens" else 40.0
    there = begin if end is None else end
    way = np.sign(there - begin)
    assert position[9] == pytest.approx(begin, abs=1e-6)
    assert position[12] == pytest.approx(begin + way * 10.0, abs=1e-6)  # 2 s of 20 s for full travel
    assert position[49] == pytest.approx(there, abs=1e-3)
    assert position[99] == pytest.approx(begin, abs=1e-3)


def test_a_stuck_valve_stays_and_a_leaking_one_does_not_shut(write: Write) -> None:
    events = [
        "at: 10 s, fault: FV-1, kind: stuck, position: 40 %, lasts: 20 s",
        "at: 40 s, step: demand, to: 0 %",
        "at: 80 s, fault: FV-1, kind: leaking, size: 5 %, lasts: 10 s",
    ]
    plant = VALVE.replace("FAILS", "closed").replace("INCREASE", "opens")
    trends = trends_of(write({"plant.yaml": plant, "scenario.yaml": scenario(*events, lasts="100 s", every="1 s")}))
    position, flow = 100 * trends.columns["FV-1.position"], 3600 * trends.columns["FV-1.q"]
    assert position[9] == pytest.approx(60.0, abs=1e-9)
    assert position[11:30] == pytest.approx(np.full(19, 40.0), abs=1e-9)
    assert position[39] == pytest.approx(60.0, abs=1e-3)
    assert flow[[79, 85, 95]] == pytest.approx([0.0, 0.5, 0.0], abs=1e-6)


# ---------------------------------------------------------------- tanks and lines
def test_the_log_tells_when_a_tank_runs_dry_and_over(write: Write) -> None:
    """0.8 m^2, half of 2 m, 6 m^3/h more out than in: empty after 480 s; then 6 m^3/h more in: full after 960 s."""
    plant = """plant: trial
boundary:
  feed: {is: 8 m^3/h}
  draw: {is: 8 m^3/h}
blocks:
  tank: {use: level_tank, A: 0.8 m^2, h_max: 2 m}
wires:
  - feed -> tank.q_in
  - draw -> tank.q_out
"""
    events = ["at: 60 s, step: draw, to: 14 m^3/h", "at: 1000 s, step: draw, to: 2 m^3/h"]
    folder = write({"plant.yaml": plant, "scenario.yaml": scenario(*events, lasts="1 h", every="1 min")})
    result = run_of(folder)
    log = {entry.text: entry.time for entry in result.trends.log}
    assert log["tank.empty comes on"] == pytest.approx(60 + 480, abs=1e-6)
    assert log["tank.full comes on"] == pytest.approx(1000 + 960, abs=1e-6)
    row = {time: 3600 * result.trends.columns["tank.leaving"][time // 60] for time in (30, 300, 900, 3000)}
    assert row == pytest.approx({30: 8.0, 300: 14.0, 900: 8.0, 3000: 2.0}, abs=1e-9)


def test_a_tripped_pump_gives_no_flow(write: Write) -> None:
    """While it stands the non-return valve shuts; afterwards the flow is the same as before."""
    plant = """plant: trial
boundary:
  opening: {is: 100 %}
blocks:
  P-1: {use: pumped_line, curve: {x: [0, 20], y: [30, 20]}, rise: 5 m, K: 648000 s^2/m^5, Kv: 20 m^3/h}
wires:
  - opening -> P-1.opening
"""
    event = "at: 10 s, fault: P-1, kind: tripped, lasts: 10 s"
    flow = (
        3600
        * trends_of(write({"plant.yaml": plant, "scenario.yaml": scenario(event, lasts="30 s", every="1 s")})).columns[
            "P-1.q"
        ]
    )
    assert flow[[5, 15, 25]] == pytest.approx([15.1850096, 0.0, 15.1850096], abs=1e-6)

"""Shipped control blocks in loops: override, split range, limits of speed, on-off, programmes. Sources beside the values."""

from __future__ import annotations

import math

import numpy as np
import pytest

from loopsim.model.rest import rest
from tests.conftest import Write, run_of, source, trends_of


def scenario(*events: str, lasts: str, every: str = "1 s", starts: str = "steady") -> str:
    """A scenario of a plant under `control.yaml`."""
    lines = "\n".join(f"  - {{{event}}}" for event in events)
    return (
        "scenario: trial\nplant: plant.yaml\nstrategies: {control: [control.yaml]}\n"
        f"starts: {starts}\nlasts: {lasts}\nrecord: {{every: {every}}}\n" + (f"events:\n{lines}\n" if events else "")
    )


# ---------------------------------------------------------------- override
OVERRIDDEN = """plant: trial
about: An actuator moves a process value, and a pressure that must stay below a limit.
boundary:
  load: {is: 0 %}
blocks:
  actuator: {use: first_order_lag, time_constant: 1 s}
  process:  {use: first_order_lag, time_constant: 60 s}
  half:     {use: summing, weight.1: 0.5}
  pressure: {use: first_order_lag, time_constant: 10 s}
wires:
  - actuator.y -> process.u
  - actuator.y -> half.u.1
  - load -> half.u.2
  - half.out -> pressure.u
"""
OVERRIDE = """strategy: control
blocks:
  TIC-1: {use: pid, action: reverse, range: [0 %, 100 %], gain: 2, integral: 60 s, scan: 1 s, sp: 60 %}
  PIC-2: {use: pid, action: reverse, range: [0 %, 100 %], gain: 1, integral: 15 s, scan: 1 s, sp: 40 %}
  least: {use: low_select}
wires:
  - process.y -> TIC-1.pv
  - pressure.y -> PIC-2.pv
  - TIC-1.out -> least.u.1
  - PIC-2.out -> least.u.2
  - least.out -> actuator.u
"""


def test_a_controller_not_selected_stands_ready(write: Write) -> None:
    """Its output stands at what is taken plus its gain times its error, so it takes over as the error turns.

    Source: dI/dt = Kc/Ti*e + (taken - output)/Ti = 0.
    """
    values = rest(source(write({"plant.yaml": OVERRIDDEN, "control.yaml": OVERRIDE}), "control").law()).values
    assert values["TIC-1.out"] == pytest.approx(0.60, abs=1e-9)
    assert values["PIC-2.out"] == pytest.approx(0.60 + 1.0 * (0.40 - 0.30), abs=1e-9)


def test_override_takes_over_and_gives_back_without_windup(write: Write) -> None:
    """Half an hour under the limit: the pressure is held, and the first controller returns with hardly an overshoot."""
    events = ["at: 30 min, step: load, to: 20 %", "at: 60 min, step: load, to: 0 %"]
    files = {"plant.yaml": OVERRIDDEN, "control.yaml": OVERRIDE}
    files["scenario.yaml"] = scenario(*events, lasts="90 min")
    columns = trends_of(write(files)).columns
    before, under = 29 * 60, 59 * 60
    assert columns["least.selected"][[before, under, -1]].tolist() == [1.0, 2.0, 1.0]
    assert columns["process.y"][[before, -1]] == pytest.approx([0.60, 0.60], abs=1e-4)
    # under the limit: 40 % = 20 % + actuator/2, and the first controller stands ready
    assert columns["pressure.y"][under] == pytest.approx(0.40, abs=1e-4)
    assert columns["least.out"][under] == pytest.approx(0.40, abs=1e-4)
    assert columns["TIC-1.out"][under] == pytest.approx(0.40 + 2 * (0.60 - 0.40), abs=1e-3)
    assert columns["process.y"][before:].max() < 0.61
    # what is taken moves in a scan by no more than P and I of the limiting controller do: 20 % a tenth of the lag, 10 %/15
    assert np.abs(np.diff(columns["least.out"][before:])).max() < 0.20 * (1 - math.exp(-0.1)) + 0.10 / 15


# ---------------------------------------------------------------- split range over two flow controllers
JACKET = """plant: trial
boundary:
  load: {is: 0 %}
blocks:
  FV-1: {use: control_valve, q_max: 10 m^3/h}
  FV-2: {use: control_valve, q_max: 10 m^3/h}
  FT-1: {use: flow_transmitter, range: [0 m^3/h, 10 m^3/h]}
  FT-2: {use: flow_transmitter, range: [0 m^3/h, 10 m^3/h]}
  effect: {use: summing, n: 3, weight.1: 0.5, weight.2: -0.5}
  jacket: {use: first_order_lag, time_constant: 120 s}
wires:
  - FV-1.q -> FT-1.q
  - FV-2.q -> FT-2.q
  - FV-1.position -> effect.u.1
  - FV-2.position -> effect.u.2
  - load -> effect.u.3
  - effect.out -> jacket.u
"""
SPLIT = """strategy: control
blocks:
  TIC-1: {use: pid, action: reverse, range: [-100 %, 100 %], gain: 3, integral: 120 s, scan: 1 s, sp: 20 %}
  halves: {use: split_range}
  FIC-1: {use: pid, action: reverse, range: [0 m^3/h, 10 m^3/h], gain: 0.5, integral: 4 s, scan: 1 s}
  FIC-2: {use: pid, action: reverse, range: [0 m^3/h, 10 m^3/h], gain: 0.5, integral: 4 s, scan: 1 s}
wires:
  - jacket.y -> TIC-1.pv
  - TIC-1.out -> halves.u
  - halves.high -> FIC-1.sp
  - halves.low -> FIC-2.sp
  - FT-1.pv -> FIC-1.pv
  - FT-2.pv -> FIC-2.pv
  - FIC-1.out -> FV-1.signal
  - FIC-2.out -> FV-2.signal
"""


def test_a_split_range_passes_on_what_its_users_answer(write: Write) -> None:
    """While the flow controller above the seam is in manual the upper output follows its set point; the return is
    bumpless."""
    events = [
        "at: 60 s, mode: FIC-1, to: manual",
        "at: 70 s, step: load, to: -10 %",
        "at: 600 s, mode: FIC-1, to: cascade",
    ]
    files = {"plant.yaml": JACKET, "control.yaml": SPLIT, "scenario.yaml": scenario(*events, lasts="1 h")}
    columns = trends_of(write(files)).columns
    # 20 % = 0.5*position: 40 % of the upper half of the signal
    assert columns["TIC-1.out"][50] == pytest.approx(0.70, abs=1e-6)
    assert columns["FIC-1.sp"][50] * 3600 == pytest.approx(4.0, abs=1e-5)
    assert columns["TIC-1.out"][62:600] == pytest.approx(np.full(538, 0.70), abs=1e-6)
    assert columns["jacket.y"][590] < 0.12
    # the first cascade execution adds one integral step: 3/120*error
    error = (0.20 - columns["jacket.y"][600]) / 2.0
    assert columns["TIC-1.out"][601] - columns["TIC-1.out"][599] == pytest.approx(2 * 3 / 120 * error, rel=0.6)
    assert columns["jacket.y"][-1] == pytest.approx(0.20, abs=1e-4)


def test_with_nobody_answering_a_split_range_leaves_its_controller_alone(write: Write) -> None:
    """Across the gap of a split range a controller integrates as it does without: the same trajectory, shifted seam."""
    control = """strategy: control
blocks:
  TIC-1: {use: pid, action: reverse, range: [-100 %, 100 %], gain: 1, integral: 60 s, scan: 1 s, sp: 0 %}
  halves: {use: split_range, overlap: -20 %}
wires:
  - jacket.y -> TIC-1.pv
  - TIC-1.out -> halves.u
  - halves.high -> FV-1.signal
  - halves.low -> FV-2.signal
"""
    files = {
        "plant.yaml": JACKET,
        "control.yaml": control,
        "scenario.yaml": scenario("at: 10 s, step: load, to: -2 %", lasts="20 s"),
    }
    columns = trends_of(write(files)).columns
    out, error = columns["TIC-1.out"], -columns["jacket.y"] / 2.0
    # no flow on either side, so only the law moves the output: P + I
    for number in range(11, 20):
        step = (error[number] - error[number - 1]) + error[number] / 60.0
        assert out[number] - out[number - 1] == pytest.approx(step, abs=1e-12)
    assert out[0] == pytest.approx(0.5, abs=0.1 + 1e-9)


# ---------------------------------------------------------------- limits of speed
def test_a_velocity_limit_stops_the_integral_of_its_controller(write: Write) -> None:
    """While the output is led at 1 % a second, the integral term does not go on rising."""
    plant = """plant: trial
boundary:
  load: {is: 0 %}
blocks:
  slow:    {use: velocity_limit, rise: 1 %/s}
  process: {use: first_order_lag, time_constant: 30 s}
wires:
  - slow.out -> process.u
"""
    control = """strategy: control
blocks:
  TIC-1: {use: pid, action: reverse, range: [0 %, 100 %], gain: 1.5, integral: 30 s, scan: 1 s, sp: 20 %}
wires:
  - process.y -> TIC-1.pv
  - TIC-1.out -> slow.u
"""
    files = {
        "plant.yaml": plant,
        "control.yaml": control,
        "scenario.yaml": scenario("at: 10 s, step: TIC-1.sp, to: 60 %", lasts="10 min"),
    }
    columns = trends_of(write(files)).columns
    out, integral = columns["slow.out"], columns["TIC-1.out"] - 1.5 * (0.6 - columns["process.y"])
    assert np.diff(out[11:40]) == pytest.approx(np.full(28, 0.01), abs=1e-9)
    # the controller is told at the execution after the one in which the limit was met
    assert np.diff(integral[12:40]).max() <= 1e-9
    assert columns["process.y"].max() < 0.66
    assert columns["process.y"][-1] == pytest.approx(0.6, abs=1e-4)


# ---------------------------------------------------------------- on and off
def test_the_period_of_on_off_control(write: Write) -> None:
    """A lag between 45 and 55 %: closed and open for tau*ln(55/45) each. Source: first-order step responses."""
    plant = "plant: trial\nblocks:\n  tank: {use: first_order_lag, time_constant: 600 s, u: 0 %}\n"
    control = """strategy: control
blocks:
  TC-1: {use: on_off, dead_band: 10 %, scan: 0.1 s, sp: 50 %}
wires:
  - tank.y -> TC-1.pv
  - TC-1.out -> tank.u
"""
    files = {
        "plant.yaml": plant,
        "control.yaml": control,
        "scenario.yaml": scenario(lasts="1 h", every="10 s", starts="given"),
    }
    log = [one.time for one in run_of(write(files)).trends.log if one.text == "TC-1.closed comes on"]
    periods = np.diff(log[1:])
    assert len(periods) > 5
    assert periods == pytest.approx(np.full(len(periods), 2 * 600 * math.log(55 / 45)), abs=0.25)


def test_time_proportioning_gives_its_share_and_a_welded_contactor_all(write: Write) -> None:
    plant = """plant: trial
boundary:
  share: {is: 30 %}
blocks:
  KM-1: {use: time_proportioning, cycle: 20 s}
  energy: {use: filling_tank, A: 1 m^2, q_in: 0 m^3/h, q_out: 0 m^3/h, T_in: 20 degC}
  heater: {use: heater_element, power: 10 kW, C: 0 kJ/K, UA: 1 kW/K}
wires:
  - share -> KM-1.u
  - KM-1.out -> heater.duty
  - heater.Q -> energy.Q
  - energy.T -> heater.T
"""
    event = "at: 10 min, fault: KM-1, kind: welded, lasts: 5 min"
    files = {"plant.yaml": plant, "control.yaml": "strategy: control\nset: {KM-1.cycle: 20 s}\n"}
    files["scenario.yaml"] = scenario(event, lasts="20 min", every="1 min", starts="given")
    T = trends_of(write(files)).columns["energy.T"]
    heat = 998 * 4182 * (T - T[0]) / 1000  # kJ in 1 m^3
    assert heat[[10, 15, 20]] == pytest.approx([1800.0, 1800.0 + 3000.0, 4800.0 + 900.0], abs=1.0)


# ---------------------------------------------------------------- programme
def test_a_programme_leads_a_controller_and_says_when_it_is_done(write: Write) -> None:
    """From 40 to 45 degC at 1 K/min from 1 min on, then 2 min: done after 8 min. Source: the programme itself."""
    plant = """plant: trial
boundary:
  heat: {is: 0 kW}
blocks:
  vat: {use: heated_tank, V: 0.5 m^3, q: 1 m^3/h, T_in: 15 degC}
"""
    control = """strategy: control
blocks:
  ramp:  {use: setpoint_program, target: 45 degC, rate: 1 K/min, soak: 2 min, sp: 40 degC}
  TIC-1: {use: pid, action: reverse, range: [0 degC, 100 degC], gain: 20, integral: 200 s, scan: 1 s}
  SSR-1: {use: heater_element, power: 80 kW, C: 0 kJ/K, UA: 4 kW/K}
wires:
  - vat.T -> TIC-1.pv
  - vat.T -> ramp.pv
  - ramp.sp -> TIC-1.sp
  - TIC-1.out -> SSR-1.duty
  - vat.T -> SSR-1.T
  - SSR-1.Q -> vat.Q
"""
    files = {
        "plant.yaml": plant,
        "control.yaml": control,
        "scenario.yaml": scenario("at: 1 min, step: ramp.state, to: running", lasts="15 min"),
    }
    result = run_of(write(files))
    assert result.trends.columns["ramp.sp"][[59, 60 + 120, 60 + 600]] - 273.15 == pytest.approx([40, 42, 45], abs=0.02)
    done = [one.time for one in result.trends.log if one.text == "ramp.done comes on"]
    assert done == pytest.approx([60 + 300 + 120], abs=1.5)

"""Plants with very fast parts beside slow ones: the implicit method is chosen, says so, and gives what the other one gives."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from loopsim.model.choice import scenario_sources
from loopsim.results import Trends
from loopsim.simulation import machine
from loopsim.simulation.case import case_of, run_case
from tests.conftest import Write

PLANT = """plant: stiff
boundary: {feed: {is: 3 m^3/h}}
blocks:
  tank: {use: heated_tank, V: 3 m^3, T_in: 12 degC}
  element: {use: heater_element, power: 200 kW, C: 50 kJ/K, UA: 5 kW/K}
  line: {use: pipe_run, V: 40 L}
  TT: {use: temperature_transmitter, range: [0 degC, 100 degC], lag: 20 s}
  fast: {use: first_order_lag, time_constant: 4 ms}
  slower: {use: first_order_lag, time_constant: 20 ms}
  TIC: {use: pid, action: reverse, range: [0 degC, 100 degC], gain: 3, integral: 600 s, scan: SCAN, sp: 40 degC}
wires:
  - feed -> tank.q
  - tank.T -> element.T
  - element.Q -> tank.Q
  - tank.outlet -> line.inlet
  - line.T -> TT.T
  - TT.pv -> fast.u
  - fast.y -> slower.u
  - slower.y -> TIC.pv
  - TIC.out -> element.duty
"""
RUN = """scenario: run
plant: plant.yaml
strategies: {none: []}
lasts: 20 min
record: {every: 5 s}
events:
  - {at: 1 min, step: feed, by: 30 %}
  - {at: 10 min, step: TIC.sp, to: 45 degC}
"""


def trends(folder: Path, native: bool = True) -> Trends:
    scenario, sources = scenario_sources(folder / "run.yaml")
    case = case_of("none", scenario, sources["none"])
    return run_case(case, ["tank.T", "TIC.out"], native=native).trends


@pytest.mark.parametrize("scan", ["1 s", "0 s"])
def test_it_gives_the_same_in_far_fewer_steps(write: Write, monkeypatch: pytest.MonkeyPatch, scan: str) -> None:
    """A pipe, a controller and a set point among it; each signal within 1e-7 of its span (at least 1 K or 1 %)."""
    folder = write({"plant.yaml": PLANT.replace("SCAN", scan), "run.yaml": RUN})
    implicit = trends(folder)
    monkeypatch.setattr(machine, "MOST_IMPLICIT", 0)
    machine.build.cache_clear()
    explicit = trends(folder)
    machine.build.cache_clear()
    assert explicit.statistics["implicit"] == 0
    assert implicit.statistics["implicit"] > 0.5 * implicit.statistics["steps"]
    assert implicit.statistics["steps"] < 0.1 * explicit.statistics["steps"]
    for name, column in explicit.columns.items():
        span = max(float(np.ptp(column)), 1.0 if implicit.units[name].text in ("degC", "K") else 0.01)
        assert implicit.columns[name] == pytest.approx(column, abs=1e-7 * span), name


def test_compiled_is_interpreted(write: Write) -> None:
    folder = write({"plant.yaml": PLANT.replace("SCAN", "5 s"), "run.yaml": RUN.replace("20 min", "11 min")})
    runs = [trends(folder, native) for native in (True, False)]
    assert runs[0].statistics == runs[1].statistics and runs[0].statistics["implicit"] > 0
    assert np.array_equal(runs[0].pieces.samples, runs[1].pieces.samples)
    for name, column in runs[0].columns.items():
        assert np.array_equal(column, runs[1].columns[name]), name


def test_a_plant_that_is_not_stiff_keeps_the_other_method(write: Write) -> None:
    text = PLANT.replace("4 ms", "4 s").replace("20 ms", "20 s").replace("SCAN", "1 s")
    assert trends(write({"plant.yaml": text, "run.yaml": RUN})).statistics["implicit"] == 0

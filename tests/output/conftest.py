"""A judged run for the outputs: a heated tank under two strategies, noise, every kind of thing in the picture."""

from __future__ import annotations

from pathlib import Path

import pytest

from loopsim import api
from loopsim.api.running import RunReport

PLANT = """plant: tank
boundary:
  feed_T: {is: 15 degC}
  feed_q: {is: 1.2 m^3/h}
blocks:
  tank: {use: heated_tank, V: 800 L}
  element: {use: heater_element, power: 45 kW, C: 6 kJ/K, UA: 1200 W/K}
  TT-1: {use: temperature_transmitter, lag: 25 s, range: [0 degC, 80 degC], noise: 0.05 K, noise_every: 2 s}
wires:
  - feed_q -> tank.q
  - feed_T -> tank.T_in
  - tank.T -> element.T
  - element.Q -> tank.Q
  - tank.T -> TT-1.T
"""
LOOP = """strategy: NAME
blocks:
  TIC-1: {use: pid, action: reverse, range: [0 degC, 80 degC], gain: GAIN, integral: 400 s, scan: 2 s, sp: 40 degC}
wires:
  - TT-1.pv -> TIC-1.pv
  - TIC-1.out -> element.duty
"""
SCENARIO = """scenario: draw
about: The rinse draws more [at $5 a time], then the set point moves.
plant: plant.yaml
strategies: {soft: [soft.yaml], firm: [firm.yaml]}
lasts: 80 min
record: {every: 10 s}
events:
  - {at: 10 min, step: feed_q, to: 1.4 m^3/h}
  - {at: 40 min, ramp: feed_T, to: 12 degC, over: 10 min}
  - {at: 60 min, step: TIC-1.sp, to: 41 degC}
accept:
  - {signal: tank.T, within: 1.5 K, of: TIC-1.sp, after: 10 min}
  - {signal: tank.T, within: 0.5 K, of: 40 degC, by: 10 min, after: 10 min, until: 35 min}
  - {signal: tank.T, max: 42 degC}
  - {signal: tank.T, max: 48 degC}
  - {signal: tank.T, min: 5 degC}
  - {signal: TIC-1.out, travel: 1 %}
"""


@pytest.fixture(scope="session")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The files."""
    made = tmp_path_factory.mktemp("tank")
    (made / "plant.yaml").write_text(PLANT)
    (made / "draw.yaml").write_text(SCENARIO)
    for name, gain in (("soft", "2"), ("firm", "8")):
        (made / f"{name}.yaml").write_text(LOOP.replace("NAME", name).replace("GAIN", gain))
    return made


@pytest.fixture(scope="session")
def report(folder: Path) -> RunReport:
    """The run of the scenario."""
    return api.run([folder / "draw.yaml"])

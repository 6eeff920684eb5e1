"""Mistakes of a plant: one plain sentence each, with tag, place and cure."""

from __future__ import annotations

import pytest

from loopsim.errors import ComputationError, InputError
from tests.conftest import Write, source

GOOD = """plant: tank
boundary:
  feed_q: {is: 3 m^3/h}
  feed_T: {is: 12 degC}
blocks:
  tank: {use: heated_tank, V: 1.8 m^3}
  element: {use: heater_element, power: 200 kW, C: 50 kJ/K, UA: 5 kW/K}
  TT-1: {use: temperature_transmitter, range: [0 degC, 100 degC]}
wires:
  - feed_q -> tank.q
  - feed_T -> tank.T_in
  - tank.T -> element.T
  - element.Q -> tank.Q
  - tank.T -> TT-1.T
"""
LOOP = """strategy: loop
blocks:
  TIC-1: {use: pid, action: reverse, range: [0 degC, 100 degC], gain: 5, integral: 300 s, sp: 55 degC}
wires:
  - TT-1.pv -> TIC-1.pv
  - TIC-1.out -> element.duty
"""


def test_wrong_feedforward_is_caught_before_the_run(write: Write) -> None:
    """A feedforward that pushes the same way as the disturbance."""
    forward = (
        "strategy: forward\nblocks:\n  FY-1: {use: feedforward, gain: 5 %/K, at: 12 degC}\n"
        "wires:\n  - feed_T -> FY-1.u\n  - FY-1.out -> TIC-1.ff\n"
    )
    folder = write({"plant.yaml": GOOD, "loop.yaml": LOOP, "forward.yaml": forward})
    with pytest.raises(InputError, match="feedforward into TIC-1 has the wrong sign: 'feed_T'"):
        source(folder, "loop", "forward").rested()
    (folder / "forward.yaml").write_text(forward.replace("5 %/K", "-5 %/K"))
    source(folder, "loop", "forward").rested()


def test_the_order_of_strategies_changes_nothing(write: Write) -> None:
    """Strategies are a set: the same values in either order."""
    other = "strategy: other\nset: {tank.UA: 100 W/K}\n"
    folder = write({"plant.yaml": GOOD, "loop.yaml": LOOP, "other.yaml": other})
    assert source(folder, "loop", "other").rested().values == source(folder, "other", "loop").rested().values


def test_out_of_reach_names_the_actuator_and_the_best(write: Write) -> None:
    """Source: energy balance by hand: 200 kW heat 3 m^3/h of water by 57.5 K, so that 90 degC needs 135.6 %."""
    folder = write(
        {"plant.yaml": GOOD.replace("[0 degC, 100", "[0 degC, 120"), "loop.yaml": LOOP.replace("55 degC", "90 degC")}
    )
    (found,) = source(folder, "loop").rested().unreached
    rise = 200e3 / (998 * 4182 * 3 / 3600)
    assert found.needed == pytest.approx((90 - 12) / rise, rel=1e-6)
    assert found.reached == pytest.approx(273.15 + 12 + rise, rel=1e-9)
    assert found.sentence == "element would have to be at 136 %; the most that TT-1.pv reaches is 69.5 degC"


def test_no_rest_is_said(write: Write) -> None:
    """A tank that takes in more than leaves has no steady state, and the state that moves is named."""
    plant = (
        "plant: filling\nblocks:\n  tank: {use: filling_tank, A: 1 m^2, q_in: 3 m^3/h, q_out: 2 m^3/h, T_in: 20 degC}\n"
    )
    with pytest.raises(ComputationError, match=r"'tank\.V' still moves"):
        source(write({"plant.yaml": plant})).rested()

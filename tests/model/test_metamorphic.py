"""Changes that must change nothing, and the linear picture against the true one."""

from __future__ import annotations

import random

import numpy as np
import pytest

from loopsim.model.audit import slow_gain
from tests.conftest import Write, source, trends_of

PLANT = """plant: heater
boundary:
  feed_T: {{is: 12 degC}}
  feed_q: {{is: {q} m^3/h}}
blocks:
  tank: {{use: heated_tank, V: {V} m^3}}
  coil: {{use: steam_coil, power: {power} kW, rated_pressure: 5 bar(g), lag: 20 s}}
  TV-1: {{use: control_valve, stroke_time: 12 s, dead_time: 3 s, increase: {increase}}}
  TT-1: {{use: temperature_transmitter, range: [0 degC, 100 degC], lag: 35 s}}
wires:
{wires}
"""
WIRES = [
    "feed_q -> tank.q",
    "feed_T -> tank.T_in",
    "TV-1.opening -> coil.opening",
    "coil.Q -> tank.Q",
    "tank.T -> TT-1.T",
]
STRATEGY = """strategy: feedback
blocks:
  TIC-1:
    use: pid
    action: {action}
    range: [0 degC, 100 degC]
    gain: 10
    integral: 600 s
    scan: 2 s
    sp: 55 degC
wires:
{wires}
"""
LOOP = ["TT-1.pv -> TIC-1.pv", "TIC-1.out -> TV-1.signal"]
SCENARIO = """scenario: rise
plant: plant.yaml
strategies: {{feedback: [feedback.yaml]}}
lasts: 40 min
record: {{every: 5 s}}
events:
  - {{at: 5 min, step: feed_q, times: 1.4}}
  - {{at: 20 min, step: TIC-1.sp, to: 57 degC}}
"""


def listed(wires: list[str]) -> str:
    return "\n".join(f"  - {wire}" for wire in wires)


def texts(scale: float = 1.0, increase: str = "opens", action: str = "reverse", seed: int = 0) -> dict[str, str]:
    """The three files; `seed` shuffles the wires."""
    wires, loop = WIRES.copy(), LOOP.copy()
    random.Random(seed).shuffle(wires)
    random.Random(seed).shuffle(loop)
    plant = PLANT.format(V=1.8 * scale, q=3.0 * scale, power=320 * scale, increase=increase, wires=listed(wires))
    return {
        "plant.yaml": plant,
        "feedback.yaml": STRATEGY.format(action=action, wires=listed(loop)),
        "scenario.yaml": SCENARIO.format(),
    }


def test_ten_times_larger_is_the_same(write: Write) -> None:
    """All volumes, flows and duties times ten: the same temperatures and valve."""
    small = trends_of(write(texts()))
    large = trends_of(write(texts(scale=10.0)))
    for name in ("tank.T", "TV-1.position", "TIC-1.out"):
        span = max(np.ptp(small.columns[name]), 0.01)
        assert np.abs(small.columns[name] - large.columns[name]).max() <= 1e-7 * span


def test_reversed_action_with_a_reversed_valve_is_the_same(write: Write) -> None:
    """A valve that closes on a rising signal needs the other action, whatever it does without air."""
    plain = trends_of(write(texts()))
    turned = trends_of(write(texts(increase="closes", action="direct")))
    assert np.abs(plain.columns["tank.T"] - turned.columns["tank.T"]).max() <= 1e-7
    assert np.abs(plain.columns["TIC-1.out"] + turned.columns["TIC-1.out"] - 1.0).max() <= 1e-7


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_order_of_wires_changes_no_bit(write: Write, seed: int) -> None:
    """The same model whatever the order in the files."""
    plain = trends_of(write(texts()))
    shuffled = trends_of(write(texts(seed=seed)))
    for name, column in plain.columns.items():
        assert np.array_equal(column, shuffled.columns[name]), name


@pytest.mark.parametrize("fails", ["open", "closed"])
@pytest.mark.parametrize("increase", ["opens", "closes"])
@pytest.mark.parametrize("action", ["reverse", "direct"])
def test_fail_position_is_not_controller_action(write: Write, action: str, increase: str, fails: str) -> None:
    """All eight combinations: whether the signs are right depends on action and valve, never on the fail position."""
    files = texts(increase=increase, action=action)
    files["plant.yaml"] = files["plant.yaml"].replace("increase:", f"fails: {fails}, increase:")
    right = (action == "reverse") == (increase == "opens")
    folder = write(files)
    if right:
        source(folder, "feedback").rested()
        return
    with pytest.raises(Exception, match="feeds back positively"):
        source(folder, "feedback").rested()


def test_linear_against_true(write: Write) -> None:
    """Heated tank, 1.8 m^3, 12 to 55 degC, flow 3 to 4 m^3/h at constant heat: linear -14.33 K, true -10.75 K.

    Source: energy balance; slope -(T - T_in)/q, and 43 K * 3/4 at the new rest.
    """
    heat = 998 * 4182 * 3 / 3600 * 43 / 1000
    plant = (
        "plant: tank\nboundary:\n  q: {is: 3 m^3/h}\nblocks:\n"
        f"  tank: {{use: heated_tank, V: 1.8 m^3, T_in: 12 degC, Q: {heat} kW}}\nwires:\n  - q -> tank.q\n"
    )
    folder = write({"plant.yaml": plant, "more.yaml": "strategy: more\nset: {q: 4 m^3/h}\n"})
    model = source(folder)
    values = model.rested().values
    slope = slow_gain(model.law(), values, "q", "tank.T")
    assert slope * 1 / 3600 == pytest.approx(-14.33, abs=0.01)
    more = source(folder, "more").rested().values
    assert more["tank.T"] - values["tank.T"] == pytest.approx(-10.75, abs=1e-6)

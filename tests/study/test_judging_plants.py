"""Reasons from plants that were run: they follow where a disturbance enters, whatever things are called.

What to expect is the trade's rule: an inner loop helps against what enters before its own measurement, feedforward
against what is measured, and neither against what enters behind both.
"""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from loopsim import api
from loopsim.study.types import Comparison
from tests.conftest import Write

PLANT = """plant: kettle
boundary:
  feed_q: {is: 3 m^3/h}
  header: {is: 5 bar(g)}
blocks:
  tank:  {use: heated_tank, V: 1.8 m^3, T_in: 12 degC}
  valve: {use: control_valve, q_max: 1 m^3/h, stroke_time: 10 s}
  coil:  {use: steam_coil, power: 320 kW, rated_pressure: 5 bar(g), lag: 20 s}
  side:  {use: steam_coil, power: 320 kW, rated_pressure: 5 bar(g), lag: 20 s, opening: 20 %}
  heat:  {use: summing, n: 2}
  TT:    {use: temperature_transmitter, range: [0 degC, 100 degC], lag: 30 s, dead_time: 30 s}
wires:
  - feed_q -> tank.q
  - valve.opening -> coil.opening
  - header -> coil.p_header
  - coil.Q -> heat.u.1
  - side.Q -> heat.u.2
  - heat.out -> tank.Q
  - tank.T -> TT.T
"""
FEEDBACK = """strategy: feedback
blocks:
  TIC: {use: pid, action: reverse, range: [0 degC, 100 degC], gain: 8, integral: 500 s, sp: 55 degC}
wires:
  - TT.pv -> TIC.pv
  - TIC.out -> valve.signal
"""
CASCADE = """strategy: cascade
blocks:
  WT:  {use: mass_flow_transmitter, range: [0 kg/h, 600 kg/h], lag: 1 s}
  WIC: {use: pid, action: reverse, range: [0 kg/h, 600 kg/h], gain: 0.5, integral: 5 s}
cut: [TIC.out -> valve.signal]
wires:
  - coil.steam -> WT.w
  - WT.pv -> WIC.pv
  - TIC.out -> WIC.sp
  - WIC.out -> valve.signal
"""
# the draw measured, and added to the controller's output by a block of its own
FORWARD = """strategy: forward
blocks:
  FT:  {use: flow_transmitter, range: [0 m^3/h, 6 m^3/h]}
  FY:  {use: feedforward, gain: 15 %*h/m^3, at: 3 m^3/h}
  SUM: {use: summing, n: 2}
cut: [TIC.out -> valve.signal]
wires:
  - feed_q -> FT.q
  - FT.pv -> FY.u
  - TIC.out -> SUM.u.1
  - FY.out -> SUM.u.2
  - SUM.out -> valve.signal
"""
SCENARIO = """scenario: upset
plant: plant.yaml
strategies: {STRATEGIES}
lasts: 40 min
record: {every: 20 s}
events:
  - {at: 5 min, step: EVENT}
accept:
  - {signal: tank.T, within: 0.6 K, of: TIC.sp, after: 5 min}
"""
FILES = {"plant.yaml": PLANT, "feedback.yaml": FEEDBACK, "cascade.yaml": CASCADE, "forward.yaml": FORWARD}
HEADER = "header, to: 4 bar(g)"
DRAW = "feed_q, to: 3.5 m^3/h"


def compared(folder: Path, event: str, strategies: str) -> Comparison:
    """The comparison of strategies under one event."""
    path = folder / "upset.yaml"
    path.write_text(SCENARIO.replace("STRATEGIES", strategies).replace("EVENT", event))
    found = api.run([path]).comparison
    assert found is not None
    return found


WITH_CASCADE = "feedback: [feedback.yaml], cascade: [feedback.yaml, cascade.yaml]"
WITH_FORWARD = "feedback: [feedback.yaml], forward: [feedback.yaml, forward.yaml]"


def test_the_inner_loop_sees_the_header_before_the_tank_does(write: Write) -> None:
    found = compared(write(FILES), HEADER, WITH_CASCADE)
    assert found.winner == "cascade"
    assert found.reasons[-1] == (
        "With 'cascade', header enters upstream of WT inside the inner loop of WIC, which sees it before heat does; "
        "with 'feedback', header is seen by TIC alone, once it shows at TT."
    )


def test_the_header_moved_past_the_flow_meter_is_seen_by_the_outer_loop_only(write: Write) -> None:
    """The same event on the coil that has no meter: the inner loop cannot know. Whoever wins, it is not for that."""
    moved = PLANT.replace("header -> coil.p_header", "header -> side.p_header")
    found = compared(write({**FILES, "plant.yaml": moved}), HEADER, WITH_CASCADE)
    assert not any("inside the inner loop" in one for one in found.reasons)
    assert found.reasons[-1].startswith("The strategies see every disturbance at the same place")


def test_feedforward_that_is_added_behind_the_controller_is_seen(write: Write) -> None:
    found = compared(write(FILES), DRAW, WITH_FORWARD)
    assert found.winner == "forward"
    assert found.reasons[-1] == (
        "With 'forward', feed_q is measured by FT and fed forward to TIC; "
        "with 'feedback', feed_q is seen by TIC alone, once it shows at TT."
    )


def test_feedforward_of_something_else_is_no_reason(write: Write) -> None:
    """The draw is measured, the header moves."""
    found = compared(write(FILES), HEADER, WITH_FORWARD)
    assert not any("fed forward" in one for one in found.reasons)


RENAMED = {
    "WIC": "FIC-17",
    "WT": "XT-9",
    "TIC": "A",
    "TT": "Z",
    "heat": "meeting",
    "tank": "vat",
    "coil": "c",
    "header": "boiler",
}


@pytest.mark.parametrize("order", ["as written", "turned round"])
def test_reasons_follow_other_names_and_another_order(write: Write, order: str) -> None:
    """Every tag, boundary value and strategy renamed, strategies, files and wires in another order."""
    names = re.compile(r"\b(" + "|".join(RENAMED) + r")\b(?!_)")

    def renamed(text: str) -> str:
        return names.sub(lambda found: RENAMED[found[0]], text)

    plain = compared(write(FILES), HEADER, WITH_CASCADE)
    files = {name: renamed(text) for name, text in FILES.items()}
    strategies = "zero: [feedback.yaml], best: [feedback.yaml, cascade.yaml]"
    if order == "turned round":
        strategies = "best: [cascade.yaml, feedback.yaml], zero: [feedback.yaml]"
        head, _, wires = files["plant.yaml"].partition("wires:\n")
        files["plant.yaml"] = head + "wires:\n" + "\n".join(reversed(wires.splitlines())) + "\n"
    folder = write(files)
    text = renamed(SCENARIO).replace("STRATEGIES", strategies).replace("EVENT", renamed(HEADER))
    (folder / "other.yaml").write_text(text)
    found = api.run([folder / "other.yaml"]).comparison
    assert found is not None and found.winner == "best"
    wanted = renamed(plain.reasons[-1]).replace("'cascade'", "'best'").replace("'feedback'", "'zero'")
    assert found.reasons[-1] == wanted
    margins = {one.strategy: one.margin for one in found.standings}
    assert [margins[name] for name in ("zero", "best")] == pytest.approx(
        [one.margin for one in plain.standings], rel=1e-9
    )


def test_strategies_that_tie_still_tell_why_the_others_do_worse(write: Write) -> None:
    """The same cascade under two names: tied, and what the loop alone misses is told all the same."""
    found = compared(write(FILES), HEADER, WITH_CASCADE + ", twin: [feedback.yaml, cascade.yaml]")
    assert (found.winner, found.tied) == (None, ("cascade", "twin"))
    assert found.reasons[-1].startswith("With 'cascade', header enters upstream of WT inside the inner loop of WIC")
    assert "with 'feedback', header is seen by TIC alone" in found.reasons[-1]

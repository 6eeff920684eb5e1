"""Verdicts of real runs, where figures come as numpy has them: a figure beyond its limit fails, whatever its unit."""

from __future__ import annotations

import pytest

from loopsim import api
from tests.conftest import Write

PLANT = """plant: tank
boundary: {feed: {is: 3 m^3/h}}
blocks:
  tank: {use: heated_tank, V: 1 m^3, T_in: 12 degC}
  element: {use: heater_element, power: 250 kW, C: 50 kJ/K, UA: 5 kW/K}
  TT: {use: temperature_transmitter, range: [0 degC, 100 degC], lag: 60 s}
  TIC: {use: pid, action: reverse, range: [0 degC, 100 degC], gain: 12, integral: 200 s, sp: 40 degC}
wires: [feed -> tank.q, tank.T -> element.T, element.Q -> tank.Q, tank.T -> TT.T, TT.pv -> TIC.pv, TIC.out -> element.duty]
"""
RULES = {
    "overshoot: 5 %": "failed",
    "overshoot: 0.5 K": "failed",
    "overshoot: 100 %": "passed",
    "max: 50 degC": "failed",
    "min: 41 degC": "failed",
    "within: 0.1 K, of: TIC.sp": "failed",
    "iae: 1 K*min, of: TIC.sp": "failed",
    "travel: 0.1 K": "failed",
    "reversals: 0": "failed",
    "rate: 0.01 K/min": "failed",
    "deviation: 0.01 K": "failed",
    "outside: 1 s, band: 0.1 K, of: TIC.sp": "failed",
}


@pytest.mark.parametrize("rule", RULES)
def test_beyond_the_limit_is_failed(write: Write, rule: str) -> None:
    run = (
        "scenario: run\nplant: plant.yaml\nstrategies: {none: []}\nlasts: 1 h\n"
        "events: [{at: 2 min, step: TIC.sp, to: 50 degC}]\n"
        f"accept: [{{signal: tank.T, {rule}, after: 2 min}}]\n"
    )
    report = api.run([write({"plant.yaml": PLANT, "run.yaml": run}) / "run.yaml"])
    (verdict,) = report.judgements[0].strategies[0].verdicts
    assert verdict.verdict == RULES[rule], verdict
    assert report.status == (0 if RULES[rule] == "passed" else 1)
    assert verdict.verdict == "failed" or not verdict.reason


def test_a_strategy_that_lacks_what_a_rule_speaks_of_does_not_win_by_it(write: Write) -> None:
    """Both pass all they are judged by; the one that is judged by more comes first, and it is said why."""
    plant, _, wires = PLANT.partition("  TIC: ")
    _, _, rest = wires.partition("wires: ")
    plant += "wires: " + rest.replace(", TT.pv -> TIC.pv, TIC.out -> element.duty", "")
    loop = (
        "strategy: loop\nblocks:\n  TIC: "
        + wires.partition("\n")[0]
        + "\nwires: [TT.pv -> TIC.pv, TIC.out -> element.duty]\n"
    )
    held = "strategy: held\nset: {element.duty: 39.04 %}\n"
    run = (
        "scenario: run\nplant: plant.yaml\nstrategies: {held: [held.yaml], loop: [loop.yaml]}\nlasts: 1 h\n"
        "events: [{at: 2 min, step: tank.T_in, to: 12.5 degC}]\n"
        "accept:\n  - {signal: tank.T, within: 4 K, of: TIC.sp, after: 2 min}\n  - {signal: tank.T, max: 60 degC, after: 2 min}\n"
    )
    files = {"plant.yaml": plant, "held.yaml": held, "loop.yaml": loop, "run.yaml": run}
    comparison = api.run([write(files) / "run.yaml"]).comparison
    assert comparison is not None and comparison.winner == "loop"
    told = " ".join(comparison.reasons)
    assert "'held' passes every rule that applies to it (1 rule speaks of what it does not have" in told
    assert "'loop' passes every rule;" in told

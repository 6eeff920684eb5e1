"""Events that a strategy lacks, and events that bring a number where it must not be."""

from __future__ import annotations

from pathlib import Path

import pytest

from loopsim import api
from loopsim.errors import InputError
from tests.conftest import Write

PLANT = """plant: tank
boundary: {feed: {is: 3 m^3/h}}
blocks:
  tank: {use: heated_tank, V: 1 m^3, T_in: 12 degC, Q: 50 kW}
wires: [feed -> tank.q]
"""
ALARM = """strategy: alarm
blocks: {TAH: {use: alarm, side: high, limit: 26.5 degC}}
wires: [tank.T -> TAH.pv]
"""
RUN = """scenario: run
plant: plant.yaml
strategies: {bare: [], watched: [alarm.yaml]}
lasts: 40 min
events:
  - {at: 1 min, step: feed, by: -5 %}
  - EVENT
accept:
  - {signal: tank.T, max: 60 degC}
"""


@pytest.fixture
def folder(write: Write) -> Path:
    return write({"plant.yaml": PLANT, "alarm.yaml": ALARM})


def report_of(folder: Path, event: str) -> api.RunReport:
    (folder / "run.yaml").write_text(RUN.replace("EVENT", event))
    return api.run([folder / "run.yaml"])


def test_an_event_that_waits_for_what_a_strategy_lacks_does_not_apply_there(folder: Path) -> None:
    """Contract: an event whose tag one strategy lacks does not apply there, and it is said."""
    report = report_of(folder, "{when: TAH.active is on, step: tank.Q, to: 0 kW, once: yes}")
    bare, watched = report.json()["strategies"].values()
    assert len(bare["events_not_applicable"]) == 1 and not watched["events_not_applicable"]
    ends = [float(one.run.trends.columns["tank.T"][-1]) for one in report.judgements[0].strategies]
    assert ends[0] > 299.5 and ends[1] < 295.0


def test_a_tag_that_no_strategy_has_is_an_error(folder: Path) -> None:
    with pytest.raises(InputError, match="no strategy has a block 'TAHH'"):
        report_of(folder, "{when: TAHH.active is on, step: tank.Q, to: 0 kW}")


@pytest.mark.parametrize(
    "event",
    [
        "{at: 2 min, step: tank.V, to: -1 m^3}",
        "{at: 2 min, step: tank.V, by: -200 %}",
        "{at: 2 min, step: tank.V, times: -1}",
        "{at: 2 min, ramp: tank.V, to: -1 m^3, over: 5 min}",
        "{at: 2 min, ramp: tank.V, by: -2 m^3, over: 5 min}",
        "{at: 2 min, pulse: tank.V, by: -2 m^3, lasts: 1 min}",
        "{at: 2 min, sine: tank.V, by: 2 m^3, period: 1 min}",
    ],
)
def test_events_keep_the_bounds_of_a_parameter(folder: Path, event: str) -> None:
    with pytest.raises(InputError, match=r"run\.yaml:7:5: this event brings 'tank\.V' to -1 m\^3") as caught:
        report_of(folder, event)
    assert "it must be above 0 m^3" in str(caught.value)


def test_events_within_the_bounds_are_carried_out(folder: Path) -> None:
    report = report_of(folder, "{at: 2 min, step: tank.V, by: -50 %}")
    assert report.status == 0

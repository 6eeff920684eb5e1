"""Plants, strategies and scenarios, as the documentation of the files shows them."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from loopsim.documents.load import read_diagram, read_document, read_scenario
from loopsim.documents.types import Diagram, Event, NameList, PairValue, Quantity, Scenario, Word
from loopsim.errors import InputError

EXAMPLE = Path(__file__).parent / "example"


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A copy of the example that a test may change."""
    return Path(shutil.copytree(EXAMPLE, tmp_path / "example"))


def test_plant(folder: Path) -> None:
    plant = read_diagram(folder / "plant.yaml")
    assert (plant.kind, plant.name) == ("plant", "sanitiser_heater")
    assert plant.liquid is not None and (plant.liquid.name, plant.liquid.at.value) == ("water", 60)
    assert plant.air_pressure is not None and plant.air_pressure.value == 0.98
    assert [unit.text for unit in plant.show.values()] == ["m^3/h", "kW", "degC", "K"]
    assert list(plant.boundary) == ["feed_T", "feed_q", "header"] and plant.boundary["feed_T"].about
    volume = plant.blocks["tank"].values["V"]
    assert isinstance(volume.value, Quantity) and volume.tolerance is not None
    assert isinstance(plant.blocks["TT-101"].values["range"].value, PairValue)
    species = plant.blocks["mix"].values["species"].value
    assert isinstance(species, NameList) and species.names == ("sugar", "salt")
    assert "c_in.sugar" in plant.blocks["mix"].values
    assert [(wire.source, wire.target) for wire in plant.wires][1] == ("tank.outlet", "line.inlet")
    lines = (folder / "plant.yaml").read_text(encoding="utf-8").splitlines()
    assert lines[plant.wires[0].where.line - 1] == plant.wires[0].where.text == "  - feed_q -> tank.q"
    assert list(plant.points["winter_full"]) == ["feed_T", "feed_q"]


def test_strategy(folder: Path) -> None:
    strategy = read_diagram(folder / "feedback.yaml")
    assert strategy.kind == "strategy" and strategy.cut[0].target == "element.duty"
    assert isinstance(strategy.set["TIC-101.limits"].value, PairValue)
    assert isinstance(strategy.set["pump.running"].value, Word)


def test_scenario(folder: Path) -> None:
    scenario = read_scenario(folder / "scenario.yaml")
    assert scenario.strategies == {
        "feedback": ("feedback.yaml",),
        "both": ("feedback.yaml", "feedforward.yaml"),
        "none": (),
    }
    assert scenario.must_pass == ("both",) and scenario.starts == "given" and scenario.seed == 7
    assert scenario.record_every is not None and scenario.record_every.value == 5
    assert scenario.record_signals == ("tank.T", "TIC-101.out") and scenario.points == ("winter_full",)
    assert len(scenario.events) == 12 and len(scenario.accept) == 12


def events(folder: Path) -> dict[str, Event]:
    return {f"{event.kind} {event.target}": event for event in read_scenario(folder / "scenario.yaml").events}


def test_events(folder: Path) -> None:
    found = events(folder)
    step = found["step TIC-101.sp"]
    assert step.at is not None and isinstance(step.to, Quantity) and step.to.value == 65
    ramp = found["ramp feed_T"]
    assert ramp.over is not None and ramp.over.value == 15 and isinstance(ramp.to, Quantity)
    assert found["pulse feed_q"].lasts is not None and found["sine feed_T"].period is not None
    follow = found["follow room_T"]
    assert (follow.file, follow.column) == ("room.csv", "T") and follow.unit is not None
    mode = found["mode TIC-101"]
    assert isinstance(mode.to, Word) and mode.to.text == "manual" and list(mode.sets) == ["output"]
    fault = found["fault TT-101"]
    assert fault.fault == "frozen" and fault.lasts is not None
    assert list(found["fault TV-101"].sets) == ["position"]
    last = found["step feed_q"]
    assert last.times is not None and last.times.value == 1.5  # at the very end of the run


def test_conditions(folder: Path) -> None:
    waits = events(folder)["step pump.running"].when
    assert waits is not None and (waits.signal, waits.relation, waits.once) == ("tank.h", "below", True)
    assert isinstance(waits.value, Quantity) and waits.value.value == 0.2 and waits.holds is not None
    running = events(folder)["fault TV-101"].when
    assert running is not None and isinstance(running.value, Word) and running.value.text == "on" and not running.once


def test_rules(folder: Path) -> None:
    rules = read_scenario(folder / "scenario.yaml").accept
    assert [rule.kind for rule in rules] == [
        "max", "min", "within", "overshoot", "iae", "travel", "reversals", "rate", "outside", "alarms", "undershoot",
        "margins",
    ]  # fmt: skip
    within = rules[2]
    assert within.text == "line.T within 1.5 K of TIC-101.sp by 25 min after 20 min"
    assert within.of == "TIC-101.sp" and within.by is not None and within.after is not None
    assert isinstance(rules[4].of, Quantity) and rules[6].band is not None
    assert rules[-1].loop == "TIC-101" and list(rules[-1].margins) == ["gain_margin", "phase_margin", "max_sensitivity"]
    assert rules[-1].text == "TIC-101 gain_margin 2.0 phase_margin 40 deg max_sensitivity 1.9"


def test_what_may_be_left_out(folder: Path) -> None:
    path = folder / "short.yaml"
    path.write_text("scenario: short\nplant: plant.yaml\nstrategies: {none: []}\nlasts: 1 h\nevents:\naccept: []\n")
    scenario = read_scenario(path)
    assert scenario.must_pass is None and scenario.starts == "steady" and scenario.seed == 0
    assert scenario.record_signals is None and scenario.record_every is None and scenario.accept == ()


def test_the_first_key_says_the_kind(folder: Path) -> None:
    assert isinstance(read_document(folder / "plant.yaml"), Diagram)
    assert isinstance(read_document(folder / "scenario.yaml"), Scenario)
    with pytest.raises(InputError, match="this is a plant file; a scenario file is wanted"):
        read_scenario(folder / "plant.yaml")


def test_a_plant_that_is_not_there_is_told_where_it_is_asked_for(folder: Path) -> None:
    (folder / "plant.yaml").unlink()
    with pytest.raises(InputError) as caught:
        read_scenario(folder / "scenario.yaml")
    where = caught.value.problems[0].where
    assert where is not None and (where.line, where.column) == (2, 8)

"""`loopsim steady`: signals at rest, limits, stability, other rests, other points."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest

from loopsim.cli.main import status_of
from loopsim.model.choice import source_of
from loopsim.model.numbers import System
from loopsim.model.rest import all_rests, eigenvalues
from tests.conftest import Write

BLOCKS = Path(__file__).parents[1] / "published" / "blocks"
REACTOR = """plant: reactor
boundary:
  feed_q: {is: 100 L/min}
  feed_c: {is: 1 mol/L}
  feed_T: {is: 76.85 degC}
  jacket: {is: 26.85 degC}
blocks:
  reactor:
    use: cooled_reactor
    V: 100 L
    rho: 1000 kg/m^3
    cp: 239 J/(kg*K)
    k0: 7.2e10 1/min
    E: 72.7515479075 kJ/mol
    dH: -50 kJ/mol
    UA: 50 kJ/(min*K)
wires:
  - feed_q -> reactor.q
  - feed_c -> reactor.c_in
  - feed_T -> reactor.T_in
  - jacket -> reactor.T_j
points:
  cold_jacket: {jacket: 16.85 degC}
"""
# Published reactor with three steady states: the parameters of Seborg, Edgar & Mellichamp, Process Dynamics and Control
# (nonisothermal reactor); theory in Uppal, Ray & Poore, Chemical Engineering Science 29 (1974). Printed: 0.5 mol/L and
# 350 K. The exact states and eigenvalues [1/min] below were computed from the printed parameters outside this project.
STATES = [
    (0.877253, 324.4754, {"real": -1.0489, "imag": 0.53882}),
    (0.499918, 350.0055, {"first": -0.45423, "second": 2.83444}),
    (0.208761, 369.7049, {"real": 1.35733}),
]


@pytest.fixture
def reactor(write: Write) -> Path:
    folder = write({"plant.yaml": REACTOR})
    shutil.copytree(BLOCKS, folder / "blocks")
    return folder / "plant.yaml"


def steady(capsys: pytest.CaptureFixture[str], *words: object) -> tuple[int, str]:
    capsys.readouterr()
    status = status_of(["steady", *map(str, words)])
    return status, capsys.readouterr().out


def test_all_three_states_of_the_published_reactor(reactor: Path) -> None:
    law = source_of(reactor, []).law()
    found = sorted((one.values["reactor.c"] / 1e3, one.values["reactor.T"], one) for one in all_rests(law))[::-1]
    assert len(found) == 3
    for (c, T, point), (wanted_c, wanted_T, roots) in zip(found, STATES, strict=True):
        assert c == pytest.approx(wanted_c, abs=1e-6) and pytest.approx(wanted_T, abs=1e-3) == T
        first, second = sorted(60 * eigenvalues(System(law), point.values), key=lambda one: (one.real, one.imag))
        known = {"real": first.real, "imag": second.imag, "first": first.real, "second": second.real}
        assert {name: known[name] for name in roots} == pytest.approx(roots, abs=1e-4)


def test_other_states_as_text_and_json(reactor: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The nominal state is a saddle, the low one is stable, the high one is not."""
    status, out = steady(capsys, reactor, "--all", "--json")
    document = json.loads(out)
    rests = sorted([document, *document["others"]], key=lambda one: one["signals"]["reactor.T"]["value"])
    assert status == 0 and [one["stable"] for one in rests] == [True, False, False]
    assert [one["signals"]["reactor.T"]["value"] + 273.15 for one in rests] == pytest.approx(
        [one[1] for one in STATES], abs=1e-3
    )
    status, out = steady(capsys, reactor, "--all")
    assert status == 0 and "rest 3" in out and out.count("is NOT stable") == 2 and "not proven" in out


def test_one_state_without_all(reactor: Path, capsys: pytest.CaptureFixture[str]) -> None:
    document = json.loads(steady(capsys, reactor, "--json")[1])
    assert "others" not in document and document["stable"] is False


def test_a_single_rest_stays_single(write: Write) -> None:
    """A linear balance has one rest; and a level that nothing determines keeps its start, and is one rest too."""
    tank = "plant: t\nblocks: {t: {use: heated_tank, V: 1 m^3, q: 1 m^3/h, T_in: 20 degC, Q: 10 kW}}\n"
    level = "plant: l\nblocks: {t: {use: level_tank, A: 1 m^2, h_max: 2 m, q_in: 3 m^3/h, q_out: 3 m^3/h}}\n"
    folder = write({"tank.yaml": tank, "level.yaml": level})
    (one,) = all_rests(source_of(folder / "tank.yaml", []).law())
    assert one.values["t.T"] == pytest.approx(293.15 + 10e3 / (998 * 4182 / 3600), abs=1e-6)
    law = source_of(folder / "level.yaml", []).law()
    (only,) = all_rests(law)
    assert only.values["t.h"] == pytest.approx(System(law).starts()[0], abs=1e-9)


def test_a_second_order_reaction_has_one_rest_that_can_be(write: Write) -> None:
    """The quadratic has a negative root too: c + c^2 = 1 for k*V/q = 1 L/mol, c = (sqrt(5) - 1)/2."""
    plant = "plant: r\nblocks: {r: {use: reacting_tank, order: 2, k: 1 L/(mol*min), V: 100 L, q: 100 L/min, c_in: 1 mol/L}}\n"
    found = all_rests(source_of(write({"p.yaml": plant}) / "p.yaml", []).law())
    assert [one.values["r.c"] / 1e3 for one in found] == pytest.approx([(5**0.5 - 1) / 2], abs=1e-9)


def test_points_of_the_plant(reactor: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, out = steady(capsys, reactor, "--points", "all", "--json")
    (name, document), *others = json.loads(out)["points"].items()
    assert status == 0 and name == "cold_jacket" and not others
    assert document["signals"]["jacket"] == {"value": pytest.approx(16.85), "unit": "degC"}
    assert steady(capsys, reactor, "--points", "cold_jaket")[0] == 2


def test_a_set_point_out_of_reach_says_what_keeps_it(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    """By hand: 3 m^3/h of water from 12 to 55 degC want 149.55 kW; 100 kW bring it to 40.75 degC."""
    plant = """plant: tank
blocks:
  tank: {use: heated_tank, V: 1.8 m^3, q: 3 m^3/h, T_in: 12 degC}
  element: {use: heater_element, power: 100 kW, C: 50 kJ/K, UA: 5 kW/K}
  TIC-1: {use: pid, action: reverse, range: [0 degC, 100 degC], gain: 5, integral: 300 s, sp: 55 degC}
wires: [tank.T -> element.T, element.Q -> tank.Q, tank.T -> TIC-1.pv, TIC-1.out -> element.duty]
"""
    status, out = steady(capsys, write({"p.yaml": plant}) / "p.yaml", "--json")
    document = json.loads(out)
    (sentence,) = document["unreached"]
    assert status == 0 and "element would have to be at 150 %" in sentence and "40.75 degC" in sentence
    (limit,) = [one for one in document["limits"] if one["signal"] == "TIC-1.out"]
    assert (limit["value"], limit["headroom_percent"]) == (100.0, 0.0)


def test_room_counts_to_the_controllers_own_limits(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    """By hand: 40 degC want 97.38 kW of 200 kW, 48.69 %; 8.69 % above a lower limit of 40 %."""
    plant = """plant: tank
blocks:
  tank: {use: heated_tank, V: 1.8 m^3, q: 3 m^3/h, T_in: 12 degC}
  element: {use: heater_element, power: 200 kW, C: 50 kJ/K, UA: 5 kW/K}
  TIC-1: {use: pid, action: reverse, range: [0 degC, 100 degC], gain: 5, integral: 300 s, sp: 40 degC, limits: [40 %, 90 %]}
wires: [tank.T -> element.T, element.Q -> tank.Q, tank.T -> TIC-1.pv, TIC-1.out -> element.duty]
"""
    path = write({"p.yaml": plant}) / "p.yaml"
    (limit,) = json.loads(steady(capsys, path, "--json")[1])["limits"]
    assert (limit["low"], limit["high"]) == (pytest.approx(40.0), pytest.approx(90.0))
    assert limit["headroom_percent"] == pytest.approx(100 * 998 * 4182 * 3 / 3600 * 28 / 200e3 - 40, abs=1e-6)
    out = steady(capsys, path)[1]
    assert "room to the limits" in out and "8.692 %" in out

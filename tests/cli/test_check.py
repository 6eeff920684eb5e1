"""`loopsim check`: all problems of all files together, or `ok` with what is worth knowing."""

from __future__ import annotations

import ast
import json
from pathlib import Path

import pytest

from loopsim.cli.main import status_of
from tests.conftest import Write

PLANT = """plant: tank
boundary:
  feed_q: {is: 3 m^3/h}
  feed_T: {is: 12 degC}
blocks:
  tank: {use: heated_tank, V: 1.8 m^3}
  element: {use: heater_element, power: 200 kW, C: 50 kJ/K, UA: 5 kW/K}
  TT-1: {use: temperature_transmitter, range: [0 degC, 100 degC]}
  shift: {use: summing, n: 1, u.1: 50 %}
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
BARE = "strategy: bare\nset: {element.duty: 40 %}\n"
SCENARIO = """scenario: rise
plant: plant.yaml
strategies: {loop: [loop.yaml], bare: [bare.yaml]}
lasts: 30 min
events:
  - {at: 5 min, step: feed_q, times: 1.1}
  - {at: 9 min, step: TIC-1.sp, to: 56 degC}
accept:
  - {signal: tank.T, within: 5 K, of: TIC-1.sp, after: 5 min}
"""
BLOCK = """block: lag
about: A lag.
parameters:
  tau: {unit: s, above: 0}
inputs:
  u: {unit: "%"}
states:
  y: {unit: "%", start: 0 %}
balances:
  follow: tau*dy/dt = u - y
outputs:
  y: {unit: "%"}
check:
  - {given: {tau: 10 s, u: 50 %}, at: y, is: 50 %, within: 1e-9, source: by hand}
  - {given: {tau: 10 s, u: 100 %}, after: [10 s, y], is: 63.212056 %, within: 1e-5 %, source: "1 - exp(-1)"}
"""
GOOD = {"plant.yaml": PLANT, "loop.yaml": LOOP, "bare.yaml": BARE, "rise.yaml": SCENARIO, "blocks/lag.yaml": BLOCK}


def checked(folder: Path, capsys: pytest.CaptureFixture[str], *words: str) -> tuple[int, str, str]:
    """Status, output and errors of `check`; names of files are looked for in the folder."""
    capsys.readouterr()
    status = status_of(["check", *(str(folder / one) if one.endswith(".yaml") else one for one in words)])
    return status, *capsys.readouterr()


def test_files_of_every_kind_together(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    folder = write(GOOD)
    status, out, err = checked(folder, capsys, *GOOD)
    assert (status, err) == (0, "")
    assert out.splitlines()[-1] == "ok" and "lag.yaml: 2 checks agree" in out


def test_an_event_that_one_strategy_lacks_is_in_order(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    """`bare` has no controller: the step of its set point and the rule do not apply there (contract, 2.3)."""
    assert checked(write(GOOD), capsys, "rise.yaml")[0] == 0


WRONG = [
    ("rise.yaml", "step: feed_q", "step: feed_w", "'feed_w' names nothing that an event could change"),
    ("rise.yaml", "step: TIC-1.sp", "step: TIC-7.sp", "no strategy has a block 'TIC-7'"),
    ("rise.yaml", "step: TIC-1.sp", "step: TIC-1.out", "'TIC-1.out' cannot be changed by an event"),
    ("rise.yaml", "to: 56 degC", "to: 56 kW", "56 kW where 'TIC-1.sp' wants"),
    ("rise.yaml", "signal: tank.T,", "signal: tank.X,", "no signal is called 'tank.X'"),
    ("rise.yaml", "within: 5 K", "within: 5 bar", "5 bar where within of 'tank.T' wants K"),
    ("rise.yaml", "[loop.yaml]", "[loops.yaml]", "loops.yaml"),
    ("loop.yaml", "action: reverse", "action: direct", "the loop of TIC-1 feeds back positively"),
    ("loop.yaml", "use: pid", "use: pidd", "there is no block 'pidd'"),
    ("plant.yaml", "V: 1.8 m^3", "V: 1.8 m", "1.8 m where 'tank.V' wants m^3"),
    ("blocks/lag.yaml", "u - y", "u - tau", "they cannot be subtracted"),
    ("blocks/lag.yaml", "is: 50 %", "is: 51 %", "the check gives 50 %, where its source says 51 %"),
]


@pytest.mark.parametrize(("name", "right", "wrong", "told"), WRONG, ids=[one[3] for one in WRONG])
def test_what_is_wrong_is_told_with_its_place(
    write: Write, capsys: pytest.CaptureFixture[str], name: str, right: str, wrong: str, told: str
) -> None:
    assert right in GOOD[name]
    folder = write({**GOOD, name: GOOD[name].replace(right, wrong)})
    status, out, err = checked(folder, capsys, *GOOD)
    assert status == 2 and told in err and ".yaml:" in err and "ok" not in out.split()
    assert "Traceback" not in err


def test_problems_of_several_files_are_told_together(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    texts = dict(GOOD)
    for name, right, wrong, _ in (WRONG[0], WRONG[4], WRONG[-2]):
        texts[name] = texts[name].replace(right, wrong)
    status, out, _ = checked(write(texts), capsys, *GOOD, "--json")
    problems = json.loads(out)["errors"]
    assert status == 2 and len(problems) == 3
    assert [Path(one["file"]).name for one in problems] == ["lag.yaml", "rise.yaml", "rise.yaml"]
    assert all(one["line"] > 1 and one["column"] >= 1 and one["what"] for one in problems)


def test_one_mistake_that_two_strategies_share_is_told_once(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    folder = write({**GOOD, "plant.yaml": PLANT.replace("power: 200 kW", "power: 200 kJ")})
    status, out, _ = checked(folder, capsys, "plant.yaml", "rise.yaml", "--json")
    assert status == 2 and len(json.loads(out)["errors"]) == 1


def test_a_wire_that_takes_the_place_of_a_value_is_noted(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    given = PLANT.replace("UA: 5 kW/K}", "UA: 5 kW/K, duty: 30 %}")
    folder = write({**GOOD, "plant.yaml": given})
    assert checked(folder, capsys, "plant.yaml")[0] == 0
    status, out, _ = checked(folder, capsys, "plant.yaml", "--with", "loop.yaml")
    assert status == 0 and "'TIC-1.out -> element.duty' takes the place of the value 30 %" in out
    warm = "strategy: warm\nblocks: {w: {use: summing, n: 1, u.1: 5 degC}}\nwires: [w.out -> tank.T_amb]\n"
    status, out, _ = checked(write({"warm.yaml": warm}), capsys, "plant.yaml", "--with", "warm.yaml")
    assert status == 0 and "'w.out -> tank.T_amb' takes the place of the default 20 degC" in out


def test_signs_are_not_asked_for_where_there_is_no_rest(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    filling = "plant: f\nblocks:\n  t: {use: filling_tank, A: 1 m^2, q_in: 3 m^3/h, q_out: 2 m^3/h, T_in: 20 degC}\n"
    status, out, _ = checked(write({"filling.yaml": filling}), capsys, "filling.yaml")
    assert status == 0 and "no steady state" in out and out.splitlines()[-1] == "ok"


def test_a_set_point_out_of_reach_is_noted(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    folder = write({**GOOD, "plant.yaml": PLANT.replace("200 kW", "100 kW")})
    status, out, _ = checked(folder, capsys, "rise.yaml")
    assert status == 0 and "loop: element would have to be at 150 %" in out  # 3000/3600*998*4182*43/1e3 = 149.6 kW


def test_the_generated_text_is_python(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    folder = write(GOOD)
    status, out, _ = checked(folder, capsys, "rise.yaml", "--code")
    defined = {one.name for one in ast.parse(out).body if isinstance(one, ast.FunctionDef)}
    assert status == 0 and "prepare" in defined and "tank.T" in out
    status, out, _ = checked(folder, capsys, "plant.yaml", "--with", "loop.yaml", "--code", "--json")
    document = json.loads(out)
    assert status == 0 and document["errors"] == [] and "TIC-1" in next(iter(document["code"].values()))


def test_code_of_a_block_is_refused(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    status, _, err = checked(write(GOOD), capsys, "blocks/lag.yaml", "--code")
    assert status == 2 and "code is made for a plant or a scenario" in err


def test_files_that_are_none(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    folder = write(GOOD)
    assert checked(folder, capsys, "plan.yaml")[0] == 2
    assert status_of(["check", str(folder)]) == 2
    assert status_of(["check"]) == 2

"""`loopsim run`: what it leaves with, what it says, and what a failed strategy does to the others."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from loopsim.cli.main import status_of
from tests.conftest import Write

PLANT = """plant: tank
boundary:
  feed_q: {is: 3 m^3/h}
blocks:
  tank: {use: heated_tank, V: 1.8 m^3, T_in: 12 degC, Q: 80 kW}
wires: [feed_q -> tank.q]
points:
  low: {feed_q: 2 m^3/h}
  high: {feed_q: 4 m^3/h}
"""
FIRM = """strategy: firm
blocks:
  TIC-1: {use: pid, action: reverse, range: [0 degC, 100 degC], gain: 10, integral: 600 s, sp: 40 degC}
  heater: {use: heater_element, power: 200 kW, C: 50 kJ/K, UA: 5 kW/K}
wires: [tank.T -> TIC-1.pv, TIC-1.out -> heater.duty, tank.T -> heater.T, heater.Q -> tank.Q]
"""
ON_OFF = """strategy: contact
blocks:
  TC-1: {use: on_off, dead_band: 1 K, sp: 40 degC}
  heater: {use: heater_element, power: 200 kW, C: 50 kJ/K, UA: 5 kW/K}
wires: [tank.T -> TC-1.pv, TC-1.out -> heater.duty, tank.T -> heater.T, heater.Q -> tank.Q]
"""
SCENARIO = """scenario: rise
plant: plant.yaml
strategies: {firm: [firm.yaml], bare: []}
lasts: 30 min
events:
  - {at: 5 min, step: feed_q, times: 1.2}
"""
RULE = "accept:\n  - {signal: tank.T, min: LIMIT, after: 5 min}\n"
FILES = {"plant.yaml": PLANT, "firm.yaml": FIRM, "contact.yaml": ON_OFF}


def ran(
    write: Write, capsys: pytest.CaptureFixture[str], scenario: str, *words: str, name: str = "rise.yaml"
) -> tuple[int, dict[str, Any]]:
    """Status and JSON of a run of a scenario."""
    folder = write({**FILES, name: scenario})
    capsys.readouterr()
    status = status_of(["run", str(folder / name), "--json", *words])
    return status, json.loads(capsys.readouterr().out)


def verdicts(document: dict[str, Any]) -> dict[str, str]:
    return {name: one["verdict"] for name, one in document["strategies"].items()}


# bare: 3.6 m^3/h of 12 degC with 80 kW comes to 12 + 80e3*3600/(998*4182*3.6) = 31.17 degC; firm is held at 40 degC
@pytest.mark.parametrize(
    ("limit", "must_pass", "status", "wanted"),
    [
        ("30 degC", "", 0, {"firm": "passed", "bare": "passed"}),
        ("36 degC", "", 1, {"firm": "passed", "bare": "failed"}),
        ("36 degC", "must_pass: [firm]\n", 0, {"firm": "passed", "bare": "failed"}),
        ("36 degC", "must_pass: [bare]\n", 1, {"firm": "passed", "bare": "failed"}),
        ("90 degC", "must_pass: []\n", 0, {"firm": "failed", "bare": "failed"}),
    ],
)
def test_who_must_pass_decides(
    write: Write, capsys: pytest.CaptureFixture[str], limit: str, must_pass: str, status: int, wanted: dict[str, str]
) -> None:
    found, document = ran(write, capsys, SCENARIO + must_pass + RULE.replace("LIMIT", limit))
    assert (found, verdicts(document)) == (status, wanted)
    (rule,) = document["strategies"]["bare"]["rules"]
    assert rule["unit"] == "degC" and 31.1 < rule["value"] < 35.0


def test_a_rule_that_shows_nothing_is_no_pass(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    """Judged before anything happens: inconclusive, with the reason, and the status 1."""
    status, document = ran(write, capsys, SCENARIO + "accept:\n  - {signal: tank.T, max: 90 degC, until: 4 min}\n")
    assert status == 1 and set(verdicts(document).values()) == {"inconclusive"}
    assert "reaches" in document["strategies"]["bare"]["rules"][0]["reason"]


def test_without_rules_nothing_is_judged(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    status, document = ran(write, capsys, SCENARIO)
    assert status == 0 and set(verdicts(document).values()) == {"not_judged"}
    assert {one["passed"] for one in document["strategies"].values()} == {None} and "comparison" not in document


def test_a_rule_of_one_strategy_does_not_apply_to_the_other(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    text = SCENARIO + "accept:\n  - {signal: TIC-1.out, max: 90 %}\n  - {signal: tank.T, min: 30 degC}\n"
    status, document = ran(write, capsys, text)
    rules = {name: [rule["verdict"] for rule in one["rules"]] for name, one in document["strategies"].items()}
    assert status == 0 and rules == {"firm": ["passed", "passed"], "bare": ["not_applicable", "passed"]}
    status, document = ran(write, capsys, text, "--strategy", "bare")
    assert status == 0 and [rule["verdict"] for rule in document["strategies"]["bare"]["rules"]] == [
        "not_applicable",
        "passed",
    ]


def test_a_strategy_without_a_rest_is_told_and_the_others_go_on(
    write: Write, capsys: pytest.CaptureFixture[str]
) -> None:
    text = SCENARIO.replace("bare: []", "contact: [contact.yaml]") + RULE.replace("LIMIT", "30 degC")
    status, document = ran(write, capsys, text)
    contact = document["strategies"]["contact"]
    assert status == 3 and verdicts(document) == {"firm": "passed", "contact": "failed"}
    assert contact["status"]["code"] == "stopped" and "TC-1" in contact["status"]["sentence"]
    assert "starts: given" in contact["status"]["sentence"] and contact["trend"] is None
    status, document = ran(write, capsys, text.replace("lasts:", "starts: given\nlasts:"))
    assert document["strategies"]["contact"]["status"]["code"] == "done" and status in (0, 1)


def test_a_run_that_stops_says_when_where_and_why(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    """A watched level that is passed ends the run: exit status 3, the instant by hand, the rules left open."""
    block = "block: sump\nabout: A sump.\ninputs: {q: {unit: m^3/h}}\nstates:\n  V: {unit: m^3, start: 0.5 m^3, below: 1 m^3}\n"
    block += "balances: {volume: dV/dt = q}\noutputs: {V: {unit: m^3}}\n"
    files = {"blocks/sump.yaml": block, "sump.yaml": "plant: s\nblocks: {s: {use: sump, q: 2 m^3/h}}\n"}
    text = "scenario: fills\nplant: sump.yaml\nstrategies: {none: []}\nstarts: given\nlasts: 1 h\n"
    write(files)
    status, document = ran(write, capsys, text + "accept: [{signal: s.V, max: 5 m^3}]\n")
    (strategy,) = document["strategies"].values()
    assert status == 3 and strategy["status"]["at_s"] == pytest.approx(900.0, abs=1e-3)
    assert "s.V" in strategy["status"]["sentence"] and strategy["rules"][0]["verdict"] == "inconclusive"


def test_the_trend_is_named_with_out_and_null_without(
    write: Write, capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    assert [one["trend"] for one in ran(write, capsys, SCENARIO)[1]["strategies"].values()] == [None, None]
    document = ran(write, capsys, SCENARIO, "--out", str(tmp_path / "o"))[1]
    for name, one in document["strategies"].items():
        assert one["trend"] == f"{name}.csv" and (tmp_path / "o" / one["trend"]).is_file()
    assert json.loads((tmp_path / "o" / "results.json").read_text("utf-8")) == document


def test_several_scenarios_keep_their_trends_apart(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    folder = write(
        {**FILES, "rise.yaml": SCENARIO, "fall.yaml": SCENARIO.replace("rise", "fall").replace("1.2", "0.8")}
    )
    assert status_of(["run", str(folder), "--out", str(folder / "o"), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    names = [strategy["trend"] for one in document["scenarios"] for strategy in one["strategies"].values()]
    assert names == ["fall.firm.csv", "fall.bare.csv", "rise.firm.csv", "rise.bare.csv"]
    assert all((folder / "o" / name).is_file() for name in names)
    assert len({one["run_id"] for one in document["scenarios"]}) == 2


def test_the_run_id_follows_from_the_files_alone(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    first = ran(write, capsys, SCENARIO)[1]["run_id"]
    assert ran(write, capsys, SCENARIO)[1]["run_id"] == first
    assert ran(write, capsys, SCENARIO.replace("30 min", "31 min"))[1]["run_id"] != first
    write({"firm.yaml": FIRM.replace("gain: 10", "gain: 9")})
    folder = write({})
    capsys.readouterr()
    assert status_of(["run", str(folder / "rise.yaml"), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["run_id"] != first


def test_at_other_operating_points(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    """By hand: what 80 kW bring 2 and 4 m^3/h to, and a little less 20 % more of it, after 25 min on the way there."""
    text = SCENARIO + RULE.replace("LIMIT", "20 degC")
    for words, wanted in (("low", ["low"]), ("all", ["low", "high"]), ("high,low", ["high", "low"])):
        status, document = ran(write, capsys, text, "--points", words, "--strategy", "bare")
        documents = document.get("scenarios", [document])
        assert status == 0 and [one["point"] for one in documents] == wanted
        for one in documents:
            flow = {"low": 2.0, "high": 4.0}[one["point"]]
            first, last = (12 + 80e3 * 3600 / (998 * 4182 * each * flow) for each in (1.0, 1.2))
            assert one["scenario"] == "rise" and last < one["strategies"]["bare"]["rules"][0]["value"] < first
    assert status_of(["run", str(write({}) / "rise.yaml"), "--points", "lowest"]) == 2
    assert "did you mean 'low'" in capsys.readouterr().err


def test_points_that_the_scenario_names(write: Write, capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    text = SCENARIO + "points: [low, high]\n" + RULE.replace("LIMIT", "20 degC")
    status, document = ran(write, capsys, text, "--out", str(tmp_path / "o"))
    assert status == 0 and [one["point"] for one in document["scenarios"]] == ["low", "high"]
    assert len({one["run_id"] for one in document["scenarios"]}) == 2
    names = {path.name for path in (tmp_path / "o").iterdir()}
    assert {"rise.low.bare.csv", "rise.high.firm.csv", "rise.low.png", "rise.high.svg"} <= names
    assert {one["scenario"] for one in document["comparison"]["standings"]} <= {"rise at low", "rise at high"}


def test_two_scenarios_of_one_name_would_write_over_each_other(
    write: Write, capsys: pytest.CaptureFixture[str]
) -> None:
    folder = write({**FILES, "rise.yaml": SCENARIO, "other.yaml": SCENARIO})
    assert status_of(["run", str(folder)]) == 2
    assert "two scenarios are called 'rise'" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (["--strategy", "frim"], "no strategy 'frim'"),
        (["--nonsense"], "No such option"),
    ],
)
def test_words_that_are_wrong(write: Write, capsys: pytest.CaptureFixture[str], words: list[str], told: str) -> None:
    folder = write({**FILES, "rise.yaml": SCENARIO})
    assert status_of(["run", str(folder / "rise.yaml"), *words]) == 2
    assert told in capsys.readouterr().err


def test_a_folder_without_scenarios_is_told(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of(["run", str(write(FILES))]) == 2
    assert "holds no scenario" in capsys.readouterr().err


def test_json_is_all_that_stands_on_standard_output(write: Write, capfd: pytest.CaptureFixture[str]) -> None:
    folder = write({**FILES, "rise.yaml": SCENARIO})
    assert status_of(["run", str(folder / "rise.yaml"), "--json", "--timing"]) == 0
    out, err = capfd.readouterr()
    json.loads(out)
    assert err.endswith(" s\n")


def test_the_caution_ends_every_answer(write: Write, capsys: pytest.CaptureFixture[str]) -> None:
    folder = write({**FILES, "rise.yaml": SCENARIO})
    for words in (["run", str(folder / "rise.yaml")], ["steady", str(folder / "plant.yaml")]):
        assert status_of(words) == 0
        assert "not a safety system" in capsys.readouterr().out


# ---------------------------------------------------------------- faults of ours
def test_a_fault_of_ours_has_its_own_status(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr("loopsim.api.block_table", lambda: 1 / 0)
    assert status_of(["blocks"]) == 70
    err = capsys.readouterr().err
    assert "ZeroDivisionError" in err and "fault of loopsim" in err


def test_a_closed_pipe_is_no_fault() -> None:
    """`loopsim blocks | head -1`: the reader goes away, and nobody complains."""
    code = "from loopsim.cli.main import main; main(['blocks', 'pid'])"
    reading, writing = os.pipe()
    os.close(reading)
    made = subprocess.run([sys.executable, "-c", code], stdout=writing, stderr=subprocess.PIPE, text=True, check=False)
    os.close(writing)
    assert "Traceback" not in made.stderr and made.returncode == 0, made.stderr

"""What the README says, done: its files, its commands, its numbers, its message."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest

from loopsim.cli.main import COMMANDS, status_of

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text()
FILES = re.findall(r"`([a-z_]+\.yaml)`:\n\n```yaml\n(.*?)```", README, re.DOTALL)


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    for name, text in FILES:
        (tmp_path / name).write_text(text)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def edited(path: Path, old: str, new: str) -> None:
    text = path.read_text()
    assert text.count(old) == 1, f"{path.name} has {old!r} {text.count(old)} times"
    path.write_text(text.replace(old, new))


def resting(capsys: pytest.CaptureFixture[str]) -> str:
    assert status_of(["steady", "plant.yaml", "--with", "feedback.yaml"]) == 0
    return capsys.readouterr().out


def test_its_files_are_found_in_it() -> None:
    assert [name for name, _ in FILES] == ["plant.yaml", "feedback.yaml", "more_draw.yaml"]


def test_the_heater_is_large_enough_as_it_says(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    said = re.search(r"`TIC-1\.out` rests at (\d+) %", README)
    found = re.search(r"TIC-1\.out +([\d.]+) +%", resting(capsys))
    assert said and found and round(float(found[1])) == int(said[1])


def test_the_heater_is_too_small_as_it_says(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    edited(folder / "plant.yaml", "1.2 m^3/h", "1.6 m^3/h")
    told = re.search(
        r"element would have to be at (\d+) %; the most that TT-1\.pv reaches is \d+ degC", resting(capsys)
    )
    assert told and int(told[1]) > 100


def test_its_scenario_runs_and_is_judged(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of(["run", "more_draw.yaml", "--out", "results", "--json"]) in (0, 1)
    assert json.loads(capsys.readouterr().out)
    assert {path.suffix for path in (folder / "results").iterdir()} >= {".png", ".svg", ".csv", ".json", ".xml"}


def test_its_message_is_what_is_said(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    said = re.search(r"```\nplant\.yaml:\d+:\d+: (.*)\n```", README)
    with (folder / "plant.yaml").open("a") as file:
        file.write("  - feed_q -> element.duty\n".replace("duty", "Q"))
    assert status_of(["check", "plant.yaml", "--with", "feedback.yaml"]) == 2
    error = capsys.readouterr().err
    assert said and said[1].replace("element.duty", "element.Q") in error


def test_its_own_block_agrees_with_its_check(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (text,) = re.findall(r"`blocks/brine_tank\.yaml`:\n\n```yaml\n(.*?)```", README, re.DOTALL)
    (folder / "blocks").mkdir()
    (folder / "blocks" / "brine_tank.yaml").write_text(text)
    assert status_of(["check", "blocks/brine_tank.yaml"]) == 0
    assert "1 check agrees" in capsys.readouterr().out


def test_every_command_that_it_names_is_there() -> None:
    named: set[str] = set(re.findall(r"(?:`|bin/)loopsim ([a-z]+)", README))
    assert named and named <= set(COMMANDS)


def test_the_library_has_the_blocks_that_it_names(capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of(["blocks"]) == 0
    listed = capsys.readouterr().out
    used = {use for _, text in FILES for use in re.findall(r"use: (\w+)", text)}
    assert used and all(re.search(rf"\b{use}\b", listed) for use in used)


def test_the_printed_table_is_what_the_first_command_prints(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """All of it but what `...` stands for."""
    (printed,) = re.findall(r"```\n(flow_rise\n=+\n.*?)\n```", README, re.DOTALL)
    parts = [part.strip("\n") for part in printed.split("\n...\n")]
    assert len(parts) == 2
    monkeypatch.chdir(ROOT)
    assert status_of(["run", "scenarios/wash_water_heater"]) == 0
    found = capsys.readouterr().out
    for part in parts:
        assert part in found

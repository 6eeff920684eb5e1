"""`loopsim new`: a starter that runs, passes, and is part of what is installed."""

from __future__ import annotations

import json
import zipfile
from importlib.resources import files
from pathlib import Path

import pytest

from loopsim.cli.main import status_of

WANTED = {"README.md", "plant.yaml", "feedback.yaml", "more_draw.yaml", "colder_feed.yaml"}


def test_files_and_what_to_do_with_them(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of(["new", str(tmp_path / "mine")]) == 0
    assert {one.name for one in (tmp_path / "mine").iterdir()} == WANTED
    assert "loopsim run" in capsys.readouterr().out
    assert status_of(["new", str(tmp_path / "other"), "--json"]) == 0
    assert set(json.loads(capsys.readouterr().out)["files"]) == WANTED


def test_both_scenarios_pass_and_say_nothing_against_it(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of(["new", str(tmp_path / "mine")]) == 0
    capsys.readouterr()
    assert status_of(["run", str(tmp_path / "mine"), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert [one["scenario"] for one in document["scenarios"]] == ["colder_feed", "more_draw"]
    for one in document["scenarios"]:
        (strategy,) = one["strategies"].values()
        assert strategy["verdict"] == "passed" and len(strategy["rules"]) == 3
        assert strategy["remarks"] == [] and strategy["assumed"] == []


def test_every_command_of_the_starters_readme_works(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    assert status_of(["new", str(tmp_path / "mine")]) == 0
    monkeypatch.chdir(tmp_path / "mine")
    words = [one for one in Path("README.md").read_text().split("`")[1::2] if one.startswith("loopsim ")]
    assert len(words) == 2
    assert [status_of(one.split()[1:]) for one in words] == [0, 0]


def test_nothing_is_written_over(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    full, file, empty = tmp_path / "full", tmp_path / "file", tmp_path / "empty"
    full.mkdir()
    (full / "notes.txt").write_text("mine")
    file.write_text("mine")
    empty.mkdir()
    for place in (full, file):
        assert status_of(["new", str(place)]) == 2
        assert "not empty" in capsys.readouterr().err
    assert [one.name for one in full.iterdir()] == ["notes.txt"] and file.read_text() == "mine"
    assert status_of(["new", str(empty)]) == 0


def test_the_wheel_holds_the_starter(tmp_path: Path) -> None:
    """Built by the project's own build system, without isolation; left out where that is not installed."""
    builder = pytest.importorskip("hatchling.builders.wheel")
    root = Path(str(files("loopsim"))).parent
    (wheel,) = builder.WheelBuilder(str(root)).build(directory=str(tmp_path), versions=["standard"])
    names = set(zipfile.ZipFile(wheel).namelist())
    assert {f"loopsim/cli/starter/{name}" for name in WANTED} <= names
    assert "loopsim/_data/blocks/control/pid.yaml" in names

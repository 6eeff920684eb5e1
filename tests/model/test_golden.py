"""Golden messages of plants, strategies, scenarios and runs: the exact text that a user reads, in tests/messages/plants/."""

from __future__ import annotations

from pathlib import Path

import pytest

from loopsim import api
from loopsim.errors import LoopsimError
from tests.conftest import source
from tests.model.golden_cases import CLASSES

ROOT = Path(__file__).parents[2]
FOLDER = ROOT / "tests" / "messages" / "plants"
CASES = {name: files for cases in CLASSES.values() for name, files in cases.items()}


def told(name: str, folder: Path, monkeypatch: pytest.MonkeyPatch) -> str:
    """What a user is told, files named as seen from their folder."""
    for file, text in CASES[name].items():
        path = folder / file
        path.parent.mkdir(exist_ok=True)
        path.write_text(text)
    monkeypatch.chdir(folder)
    return _told(name).replace(f"{ROOT}/", "")


def _told(name: str) -> str:
    if "run.yaml" not in CASES[name]:
        with pytest.raises(LoopsimError) as caught:
            source(Path(), "loop").rested()
            source(Path(), "loop").timed()
        return str(caught.value)
    try:
        (one,) = api.run([Path("run.yaml")]).judgements[0].strategies
    except LoopsimError as error:
        return str(error)
    status = one.run.trends.status
    place = f"{status.where.file}:{status.where.line}: " if status.where else ""
    return f"{place}{status.sentence} at {status.time:g} s"


@pytest.mark.parametrize("name", CASES)
def test_message(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    assert told(name, tmp_path, monkeypatch) == (FOLDER / f"{name}.txt").read_text(encoding="utf-8").rstrip("\n")


def test_every_golden_belongs_to_a_class() -> None:
    assert {path.stem for path in FOLDER.glob("*.txt")} == set(CASES)


def test_messages_have_a_place() -> None:
    """File and line stand in each, except where it is the command that names what is not there."""
    for path in FOLDER.glob("*.txt"):
        assert ".yaml:" in path.read_text(encoding="utf-8"), path.name

"""What is kept on disk is what would be made, is made again where it cannot be read, and follows every change."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from loopsim import api, store
from loopsim.errors import InputError
from loopsim.model import choice
from loopsim.simulation import run as running
from tests.conftest import Write

PLANT = """plant: tank
boundary: {feed: {is: 3 m^3/h}}
blocks:
  tank: {use: own_tank, V: 1 m^3, T_in: 12 degC}
  TT-1: {use: temperature_transmitter, range: [0 degC, 100 degC], noise: 0.1 K}
wires: [feed -> tank.q, tank.T -> TT-1.T]
"""
BLOCK = """block: own_tank
about: A tank.
parameters: {V: {unit: m^3, about: holdup}}
inputs: {q: {unit: m^3/h}, T_in: {unit: degC}}
states: {T: {unit: degC, start: 20 degC}}
balances: {energy: V*dT/dt = q*(T_in - T)}
let: {limit: 15 degC}
outputs: {T: {unit: degC}, warm: {unit: on/off, is: T > limit}}
"""
RUN = """scenario: run
plant: plant.yaml
strategies: {none: []}
starts: given
lasts: 30 min
events: [{at: 5 min, step: feed, by: 50 %}]
accept: [{signal: tank.T, max: 60 degC}]
"""


@pytest.fixture
def folder(write: Write, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[Path]:
    monkeypatch.setenv("LOOPSIM_CACHE", str(tmp_path / "kept"))
    yield write({"plant.yaml": PLANT, "run.yaml": RUN, "blocks/own_tank.yaml": BLOCK})
    fresh()


def fresh() -> None:
    """Forget what this process has read, as a new process would."""
    choice._source.cache_clear()
    running._generated.cache_clear()


def result(folder: Path) -> tuple[object, bytes]:
    fresh()
    report = api.run([folder / "run.yaml"])
    trends = report.judgements[0].strategies[0].run.trends
    return report.json(), b"".join(column.tobytes() for column in trends.columns.values())


def test_a_second_process_gives_the_same_bits(folder: Path, tmp_path: Path) -> None:
    first = result(folder)
    assert list((tmp_path / "kept").glob("*.model")) and list((tmp_path / "kept").glob("*.o"))
    assert result(folder) == first


def test_what_is_broken_is_made_again(folder: Path, tmp_path: Path) -> None:
    first = result(folder)
    for number, path in enumerate(sorted((tmp_path / "kept").glob("*.model"))):
        path.write_bytes(path.read_bytes()[: 10 * number] if number % 2 else b"rubbish")
    assert result(folder) == first


@pytest.mark.parametrize("name", ["plant.yaml", "run.yaml", "blocks/own_tank.yaml"])
def test_every_file_counts(folder: Path, name: str) -> None:
    first = result(folder)
    text = (folder / name).read_text()
    old, new = {
        "plant.yaml": ("12 degC", "13 degC"),
        "run.yaml": ("50 %", "60 %"),
        "blocks/own_tank.yaml": ("T_in - T)", "T_in - 1.01*T)"),
    }[name]
    assert old in text
    (folder / name).write_text(text.replace(old, new))
    changed = result(folder)
    assert changed != first
    (folder / name).write_text(text)
    assert result(folder) == first


def test_a_mistake_is_told_each_time(folder: Path) -> None:
    (folder / "plant.yaml").write_text(PLANT.replace("V: 1 m^3", "V: 1 m"))
    for _ in range(2):
        fresh()
        with pytest.raises(InputError, match=r"1 m where 'tank\.V' wants m"):
            api.run([folder / "run.yaml"])


def test_a_folder_that_cannot_be_written_does_no_harm(
    folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    first = result(folder)
    (tmp_path / "file").write_text("no folder")
    monkeypatch.setenv("LOOPSIM_CACHE", str(tmp_path / "file"))
    assert result(folder) == first


def test_what_is_kept_starts_without_the_unit_library(folder: Path) -> None:
    script = (
        "import sys\nfrom pathlib import Path\nfrom loopsim import api\n"
        f"api.run([Path({str(folder / 'run.yaml')!r})])\nprint('pint' in sys.modules, 'sympy' in sys.modules)"
    )
    outs = [
        subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True).stdout
        for _ in range(2)
    ]
    assert outs == ["True False\n", "False False\n"]


def test_names_do_not_run_together() -> None:
    assert store.digest(["ab", "c"]) != store.digest(["a", "bc"]) != store.digest(["abc"])

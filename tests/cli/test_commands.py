"""Commands as people type them: exit statuses, JSON, what is imported, the same bytes twice."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

from loopsim.cli.main import COMMANDS, status_of
from tests.conftest import Write
from tests.model.test_messages import GOOD, LOOP

SCENARIO = """scenario: rise
plant: plant.yaml
strategies: {loop: [loop.yaml]}
lasts: 30 min
events:
  - {at: 5 min, step: feed_q, times: 1.1}
accept:
  - {signal: tank.T, within: LIMIT, of: TIC-1.sp, after: 5 min}
"""


@pytest.fixture
def folder(write: Write) -> Path:
    return write({"plant.yaml": GOOD, "loop.yaml": LOOP, "rise.yaml": SCENARIO.replace("LIMIT", "5 K")})


def loaded_by(*arguments: str) -> set[str]:
    """The modules in memory after a command: packages, and parts of packages one level down."""
    code = (
        "import sys\nfrom loopsim.cli.main import status_of\n"
        f"status_of({list(arguments)!r})\nprint('|' + ' '.join(sorted({{'.'.join(m.split('.')[:2]) for m in sys.modules}})))"
    )
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    return set(out.rpartition("|")[2].split())


def test_help_loads_nothing_heavy() -> None:
    assert not loaded_by("--help") & {
        "numpy",
        "scipy",
        "pint",
        "yaml",
        "networkx",
        "matplotlib",
        "sympy",
        "control",
        "llvmlite",
        "rich",
    }


def test_a_plain_run_loads_no_more_than_it_needs(folder: Path) -> None:
    """The units library looks whether scipy is there, which costs nothing; its parts stay out."""
    assert not loaded_by("run", str(folder / "rise.yaml")) & {
        *("scipy.optimize", "scipy.integrate", "scipy.linalg", "scipy.signal", "scipy.stats"),
        *("sympy", "control", "matplotlib"),
    }


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_explains_itself(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of([command, "--help"]) == 0
    assert "--json" in capsys.readouterr().out


def test_exit_statuses(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """0 passed, 1 a rule failed, 2 wrong input, 3 not computable: contract."""
    path = folder / "rise.yaml"
    assert status_of(["run", str(path)]) == 0
    path.write_text(SCENARIO.replace("LIMIT", "0.1 K"))
    assert status_of(["run", str(path)]) == 1
    path.write_text(SCENARIO.replace("LIMIT", "0.1 kW"))
    assert status_of(["run", str(path)]) == 2
    assert "Traceback" not in capsys.readouterr().err
    (folder / "filling.yaml").write_text(
        "plant: f\nblocks:\n  t: {use: filling_tank, A: 1 m^2, q_in: 3 m^3/h, q_out: 2 m^3/h, T_in: 20 degC}\n"
    )
    assert status_of(["steady", str(folder / "filling.yaml")]) == 3
    assert status_of(["run", str(folder / "not there.yaml")]) == 2
    assert status_of(["nothing"]) == 2


def test_json_of_a_run(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of(["run", str(folder / "rise.yaml"), "--json", "--out", str(folder / "out")]) == 0
    document = json.loads(capsys.readouterr().out)
    strategy = document["strategies"]["loop"]
    assert document["scenario"] == "rise" and len(document["run_id"]) == 16
    assert strategy["verdict"] == "passed" and strategy["passed"] is True and strategy["trend"] == "loop.csv"
    (rule,) = strategy["rules"]
    assert rule["limit"] == 5.0 and rule["unit"] == "K" and 0 < rule["value"] < 5 and rule["at_s"] > 300
    header = (folder / "out" / "loop.csv").read_text().splitlines()[0]
    assert header.startswith("time [s],tank.T [degC],")


def test_errors_as_json(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (folder / "loop.yaml").write_text(LOOP.replace("gain: 5", "gian: 5"))
    assert status_of(["run", str(folder / "rise.yaml"), "--json"]) == 2
    (first, *_) = json.loads(capsys.readouterr().out)["errors"]
    assert (
        first["file"].endswith("loop.yaml")
        and first["line"] == 3
        and "gian" in first["what"]
        and "gain" in first["hint"]
    )


def test_the_same_bytes_twice(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for name in ("one", "two"):
        assert status_of(["run", str(folder / "rise.yaml"), "--out", str(folder / name)]) == 0
    files = sorted(path.name for path in (folder / "one").iterdir())
    assert {"loop.csv", "rise.png", "rise.svg", "results.json", "results.xml"} <= set(files)
    for name in files:
        assert (folder / "one" / name).read_bytes() == (folder / "two" / name).read_bytes(), name


def test_steady_tells_signals_and_limits(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of(["steady", str(folder / "plant.yaml"), "--with", str(folder / "loop.yaml"), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["signals"]["tank.T"] == {"value": pytest.approx(55.0, abs=1e-9), "unit": "degC"}
    assert document["stable"] is True
    (limit,) = [one for one in document["limits"] if one["signal"] == "TIC-1.out"]
    assert limit["headroom_percent"] == pytest.approx(100 - limit["value"])


def test_new_makes_something_that_passes(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    target = tmp_path / "mine"
    assert status_of(["new", str(target)]) == 0
    assert status_of(["run", str(target)]) == 0
    assert status_of(["check", *map(str, sorted(target.glob("*.yaml")))]) == 0
    assert status_of(["new", str(target)]) == 2


def test_blocks_and_schema(capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of(["blocks", "heated_tank"]) == 0
    assert "rho*cp*V * dT/dt" in capsys.readouterr().out
    assert status_of(["blocks", "heatd_tank"]) == 2
    assert "heated_tank" in capsys.readouterr().err
    assert status_of(["schema", "plant"]) == 0
    assert json.loads(capsys.readouterr().out)["title"] == "loopsim plant"

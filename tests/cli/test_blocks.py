"""`loopsim blocks`: the library by family, and one block as a page."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from loopsim.api import block_json
from loopsim.cli.main import status_of
from loopsim.documents.catalogue import Catalogue
from tests.conftest import Write

NAMES = Catalogue(Path(__file__).parent).names()


def shown(capsys: pytest.CaptureFixture[str], *words: str) -> tuple[int, str]:
    capsys.readouterr()
    status = status_of(["blocks", *words])
    return status, capsys.readouterr().out


def test_the_library_by_family_with_a_line_each(capsys: pytest.CaptureFixture[str]) -> None:
    status, out = shown(capsys, "--json")
    listed = json.loads(out)["blocks"]
    assert status == 0 and sorted(one["block"] for one in listed) == list(NAMES)
    assert [one["family"] for one in listed] == sorted(one["family"] for one in listed)
    assert all(one["about"] and "\n" not in one["about"] for one in listed)
    text = shown(capsys)[1]
    assert all(name in text for name in NAMES)


@pytest.mark.parametrize("name", NAMES)
def test_every_block_has_a_page(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    status, out = shown(capsys, name)
    assert status == 0
    for title in ("Checked against", "Out", "Assumes", "Sources"):
        assert f"\n{title}\n" in out


def test_a_page_begins_with_balance_and_checks(capsys: pytest.CaptureFixture[str]) -> None:
    out = shown(capsys, "heated_tank")[1]
    order = [
        out.index(f"\n{title}\n")
        for title in ("Balances", "Checked against", "Parameters", "In", "Out", "Assumes", "Sources")
    ]
    assert order == sorted(order)
    assert "rho*cp*V * dT/dt = rho*cp*q*(T_in - T) + Q - UA*(T - T_amb)" in out
    assert "[J/(kg*K)]" in out and "default 4182 J/(kg*K)" in out


def test_what_like_brings_is_carried_out(
    write: Write, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(
        write({"blocks/sump.yaml": "block: sump\nabout: A tank.\nlike: level_tank\nrename: {h_max: rim}\n"})
    )
    own, shipped = block_json("sump"), block_json("level_tank")
    assert own["balances"] and own["balances"].keys() == shipped["balances"].keys()
    assert "rim" in own["parameters"] and "h_max" not in own["parameters"]


def test_a_block_of_blocks_shows_its_ports_with_units() -> None:
    found = block_json("temperature_loop")
    assert found["blocks"]["TIC"]["use"] == "pid" and "TT.pv -> TIC.pv" in found["wires"]
    assert found["inputs"]["T"]["unit"] == "degC" and found["outputs"]["out"]["unit"] == "%"


def test_parameters_say_what_they_are_by_default() -> None:
    parameters = block_json("control_valve")["parameters"]
    assert parameters["positioner"]["default"] == "0.5 s" and parameters["Kv"]["default"] is None
    pid = block_json("pid")
    assert "default" not in pid["parameters"]["gain"] and pid["parameters"]["range"]["unit"] == "two of like pv"
    assert pid["settings"]["windup"]["choices"] == ["hold", "track"] and "default" not in pid["settings"]["action"]


def test_an_unknown_block_is_told_with_the_nearest(capsys: pytest.CaptureFixture[str]) -> None:
    assert status_of(["blocks", "pdi"]) == 2
    assert "pid" in capsys.readouterr().err
    assert status_of(["blocks", "pdi", "--json"]) == 2
    (error,) = json.loads(capsys.readouterr().out)["errors"]
    assert "pdi" in error["what"] and error["line"] is None

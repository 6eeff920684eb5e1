"""What is in the picture of a run, and that its bytes depend on nothing but the data."""

from __future__ import annotations

import os
import re
import socket
import subprocess
import sys
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest

from loopsim import api
from loopsim.api.running import RunReport
from loopsim.output.figures import run_figure
from loopsim.output.folder import write_run
from loopsim.output.pictures import write_pictures
from loopsim.results import Band, Curve, Figure, Panel


@pytest.fixture(scope="module")
def figure(report: RunReport) -> Figure:
    (judgement,) = report.judgements
    found = run_figure(judgement.scenario, judgement.strategies)
    assert found is not None
    return found


def test_panels_from_the_controlled_signal_to_what_disturbs(figure: Figure) -> None:
    labels = [panel.y_label for panel in figure.panels]
    assert labels == ["tank.T [degC]", "TIC-1.out [%]", "feed_q [m^3/h]", "feed_T [degC]"]
    assert figure.x_label == "time [min]" and figure.panels[0].curves[0].x[-1] == pytest.approx(80.0)


def test_a_curve_for_each_strategy_and_the_set_point_once(figure: Figure) -> None:
    first, out, flow, feed = figure.panels
    assert [one.name for one in first.curves] == ["soft", "firm", "set point"]
    assert first.curves[-1].dashed and first.curves[-1].step
    assert first.curves[-1].y[[0, -1]].tolist() == pytest.approx([40.0, 41.0])
    assert {one.name for one in out.curves} == {"soft", "firm"}
    assert [one.name for one in (*flow.curves, *feed.curves)] == ["", ""]
    assert flow.curves[0].step and not feed.curves[0].step


def test_noise_lies_faint_behind_its_median(figure: Figure) -> None:
    firm = [one for one in figure.panels[1].curves if one.name == "firm"]
    assert [one.faint for one in firm] == [True, False]
    assert np.std(np.diff(firm[1].y)) < np.std(np.diff(firm[0].y))
    assert any("running median" in note for note in figure.notes)


def test_limits_and_bands_as_the_rules_give_them(figure: Figure) -> None:
    first = figure.panels[0]
    assert [name for name, _ in first.levels] == ["max 42 degC", "max 48 degC", "min 5 degC"]
    assert [level for _, level in first.levels] == pytest.approx([42.0, 48.0, 5.0])
    wide, narrow = first.bands
    assert (wide.name, wide.x[0], wide.x[-1]) == ("within 1.5 K", pytest.approx(10.0), pytest.approx(40.0))
    assert (wide.low[0], wide.high[0]) == (pytest.approx(38.5), pytest.approx(41.5))
    assert (narrow.x[0], narrow.x[-1]) == (pytest.approx(20.0), pytest.approx(35.0))
    assert (narrow.low[0], narrow.high[0]) == (pytest.approx(39.5), pytest.approx(40.5))


def test_marks_where_something_happened(figure: Figure) -> None:
    assert [(round(x, 6), text) for x, text in figure.marks] == [
        (10.0, "step feed_q to 1.4 m^3/h"),
        (40.0, "ramp feed_T to 12 degC"),
        (60.0, "step TIC-1.sp to 41 degC"),
    ]


def texts_of(svg: Path) -> list[str]:
    """The texts of a picture, which stand as comments beside their outlines."""
    return re.findall(r"<!-- (.*?) -->", svg.read_text("utf-8"))


def test_the_picture_says_it_all(figure: Figure, tmp_path: Path) -> None:
    texts = texts_of(write_pictures(figure, tmp_path / "x")[1])
    for text in ("draw", "tank.T [degC]", "time [min]", "soft", "firm", "set point", "step feed_q to 1.4 m^3/h"):
        assert text in texts
    for text in ("max 42 degC", "max 48 degC lies above", "min 5 degC lies below", "within 1.5 K", "within 0.5 K"):
        assert text in texts
    assert "The rinse draws more [at $5 a time], then the set point moves." in texts


def drawn(name: str = "plain") -> Figure:
    """A small figure with a name of the user's in it."""
    x = np.linspace(0, 5, 60)
    curves = (Curve(name, x, np.sin(x)), Curve("b", x, np.cos(x), step=True), Curve("set point", x, 0 * x, dashed=True))
    panel = Panel("T [degC]", curves, (("max 9", 9.0), ("max 1", 1.0)), (Band("within 1", x, x - 1, x + 1),))
    return Figure(name, "time [s]", (panel, panel), ((1.0, name), (1.1, name), (4.9, name)), (name * 20,))


@pytest.mark.parametrize("name", ["$5 and $6", "[red]x[/red]", "a_b^c", "<a> & 'b'", "\\frac{1}{2} %"])
def test_names_of_the_user_are_drawn_as_they_are(name: str, tmp_path: Path) -> None:
    _, svg = write_pictures(drawn(name), tmp_path / "x")
    ElementTree.parse(svg)
    assert any(
        name.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;") in one or name in one
        for one in texts_of(svg)
    )


CODE = """
import sys
sys.path.insert(0, {tests!r})
from pathlib import Path
from test_pictures import drawn, write_pictures
write_pictures(drawn(), Path({stem!r}))
"""


def test_the_same_bytes_in_another_process_place_and_time_zone(tmp_path: Path) -> None:
    """Another hash seed, folder, time zone and language; and a user's own settings for pictures."""
    made = []
    for number, zone in enumerate(("UTC", "Asia/Tokyo")):
        folder = tmp_path / f"folder {number}"
        folder.mkdir()
        if number:
            (folder / "matplotlibrc").write_text("font.size: 20\nlines.linewidth: 9\nsvg.hashsalt: other\n")
        environment = {**os.environ, "PYTHONHASHSEED": str(number), "TZ": zone, "LC_ALL": ("C", "C.UTF-8")[number]}
        code = CODE.format(tests=str(Path(__file__).parent), stem=str(folder / "x"))
        subprocess.run([sys.executable, "-c", code], cwd=folder, env=environment, check=True)
        made.append([(folder / f"x.{ending}").read_bytes() for ending in ("png", "svg")])
    assert made[0] == made[1]


def chunks_of(png: bytes) -> set[bytes]:
    """The kinds of chunk in a PNG file (its specification, section 5): length, kind, data, check sum."""
    kinds, place = set(), 8
    while place < len(png):
        length = int.from_bytes(png[place : place + 4], "big")
        kinds.add(png[place + 4 : place + 8])
        place += 12 + length
    return kinds


def test_no_clock_place_or_host_in_any_file(report: RunReport, tmp_path: Path, folder: Path) -> None:
    """A PNG tells such things in chunks of its own (tEXt, tIME); the others are text."""
    write_run(report, tmp_path / "out")
    host = re.compile(rf"\b{re.escape(socket.gethostname())}\b")
    for path in (tmp_path / "out").iterdir():
        if path.suffix == ".png":
            assert chunks_of(path.read_bytes()) == {b"IHDR", b"pHYs", b"IDAT", b"IEND"}
            continue
        text = path.read_text("utf-8")
        assert str(tmp_path) not in text and str(folder) not in text, path.name
        assert not host.search(text) and not re.search(r"20\d\d-[01]\d-[0-3]\d", text), path.name


def test_a_run_without_values_has_no_picture(report: RunReport) -> None:
    assert run_figure(report.judgements[0].scenario, ()) is None


def test_a_picture_of_what_was_recorded(folder: Path) -> None:
    """Neither the judged signals nor the events' targets: what there is is drawn."""
    text = (folder / "draw.yaml").read_text().replace("scenario: draw", "scenario: few")
    (folder / "few.yaml").write_text(text.replace("{every: 10 s}", "{every: 10 s, signals: [element.Q, TT-1.pv]}"))
    (judgement,) = api.run([folder / "few.yaml"]).judgements
    found = run_figure(judgement.scenario, judgement.strategies)
    assert found is not None and [one.y_label for one in found.panels] == ["element.Q [kW]", "TT-1.pv [degC]"]

"""CSV, JSON and JUnit files of a run, read back by other readers."""

from __future__ import annotations

import csv
import json
import math
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest

from loopsim.api.running import RunReport
from loopsim.language.units import parse_unit
from loopsim.output.folder import write_run
from loopsim.output.json_text import json_text
from loopsim.output.junit import junit_text
from loopsim.output.trends import write_csv
from loopsim.results import Pieces, Status, Trends
from loopsim.study.export import Suite, SuiteCase, suites
from loopsim.study.types import Judged, not_run

NOTHING = Pieces((), np.zeros(0), np.zeros(0), np.zeros((0, 5, 0)))


def trends(**columns: list[float]) -> Trends:
    units = {"T": parse_unit("degC"), "p": parse_unit("bar(g)"), "x": parse_unit("%")}
    arrays = {name: np.array(values) for name, values in columns.items()}
    return Trends(np.arange(len(next(iter(arrays.values()))), dtype=float), arrays, units, NOTHING, Status("done"))


def rows_of(path: Path) -> list[list[str]]:
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.reader(file))


def test_csv_has_names_with_units_and_numbers_that_read_back(tmp_path: Path) -> None:
    """273.15 K is 0 degC; two atmospheres are one by the gauge (SI brochure); 0.1 + 0.2 keeps all its digits."""
    write_csv(trends(T=[273.15, 373.15], p=[2 * 101325.0, 101325.0], x=[0.1 + 0.2, 1e-30]), tmp_path / "t.csv")
    head, first, second = rows_of(tmp_path / "t.csv")
    assert head == ["time [s]", "T [degC]", "p [bar(g)]", "x [%]"]
    assert [float(one) for one in first] == pytest.approx([0.0, 0.0, 1.01325, 30.0])
    assert float(second[3]) == 1e-30 / 0.01 and float(first[3]) == (0.1 + 0.2) / 0.01
    assert "," not in "".join(first)


def test_gauge_pressures_count_from_the_air_pressure_of_the_plant(tmp_path: Path) -> None:
    write_csv(trends(p=[200000.0]), tmp_path / "t.csv", air_pressure=90000.0)
    assert float(rows_of(tmp_path / "t.csv")[1][1]) == pytest.approx(1.1)


def test_a_run_writes_a_trend_for_each_strategy(report: RunReport, tmp_path: Path) -> None:
    names = write_run(report, tmp_path)
    assert names == {"draw": {"soft": "soft.csv", "firm": "firm.csv"}}
    for judged in report.judgements[0].strategies:
        head, *rows = rows_of(tmp_path / f"{judged.run.strategy}.csv")
        time = [float(row[0]) for row in rows]
        assert time == [10.0 * number for number in range(481)]  # recorded every 10 s, the end at 80 min too
        place = head.index("tank.T [degC]")
        found = [float(row[place]) + 273.15 for row in rows]
        assert found == pytest.approx(judged.run.trends.columns["tank.T"].tolist(), abs=1e-10)


def test_a_row_holds_the_values_after_the_events_of_its_instant(report: RunReport, tmp_path: Path) -> None:
    write_run(report, tmp_path)
    head, *rows = rows_of(tmp_path / "soft.csv")
    place = head.index("feed_q [m^3/h]")
    flows = {float(row[0]): float(row[place]) for row in rows}
    assert flows[590.0] == pytest.approx(1.2) and flows[600.0] == pytest.approx(1.4)


def test_results_as_json_name_the_trends(report: RunReport, tmp_path: Path) -> None:
    write_run(report, tmp_path)
    document = json.loads((tmp_path / "results.json").read_text("utf-8"))
    assert {name: one["trend"] for name, one in document["strategies"].items()} == {
        "soft": "soft.csv",
        "firm": "firm.csv",
    }
    assert [one["trend"] for one in report.json()["strategies"].values()] == [None, None]


def test_json_has_no_infinity() -> None:
    """RFC 8259, section 6: infinity and not-a-number are not permitted."""

    def refused(word: str) -> float:
        raise AssertionError(word)

    text = json_text({"a": math.inf, "b": [-math.inf, math.nan, 0.1 + 0.2], "c": {"d": (1, None, "é", True)}})
    read = json.loads(text, parse_constant=refused)
    assert read == {"a": None, "b": [None, None, 0.1 + 0.2], "c": {"d": [1, None, "é", True]}}


# ---------------------------------------------------------------- JUnit
def test_junit_counts_what_failed(report: RunReport, tmp_path: Path) -> None:
    write_run(report, tmp_path)
    (suite,) = ElementTree.parse(tmp_path / "results.xml").getroot()
    cases = suite.findall("testcase")
    verdicts = [one.verdict for judged in report.judgements[0].strategies for one in judged.verdicts]
    assert (suite.get("name"), suite.get("tests")) == ("draw", "12") and len(cases) == len(verdicts) == 12
    assert [one.find("failure") is not None for one in cases] == [verdict != "passed" for verdict in verdicts]
    assert suite.get("failures") == str(sum(verdict != "passed" for verdict in verdicts))
    assert {one.get("classname") for one in cases} == {"soft", "firm"}


def test_a_run_that_could_not_be_made_is_an_error_and_not_a_silence() -> None:
    judged = Judged("draw", not_run("soft", "there is no steady state", 60.0), "failed", ())
    (suite,) = ElementTree.fromstring(junit_text(suites([judged])))
    assert (suite.get("tests"), suite.get("errors")) == ("1", "1")
    error = suite.find("testcase/error")
    assert error is not None and error.get("message") == "there is no steady state"


@pytest.mark.parametrize("words", ["a <b> & \"c\" 'd' [e]", "bell\x07 and escape\x1b[0m", "5 °C, é, 日本"])
def test_words_of_the_user_in_junit(words: str) -> None:
    """XML 1.0, section 2.2: control characters may not stand in it, not even escaped."""
    text = junit_text([Suite(words, (SuiteCase(words, words, "failure", words),))])
    assert text.startswith("<?xml version='1.0' encoding='utf-8'?>")
    (suite,) = ElementTree.fromstring(text.encode("utf-8"))
    shown = "".join(one if one.isprintable() else " " for one in words)
    failure = suite.find("testcase/failure")
    assert failure is not None and failure.get("message") == suite.get("name") == shown

"""Tables, JSON and suites: numbers in people's units, nothing that JSON cannot hold, a cell for each rule."""

from __future__ import annotations

import json
import math
from dataclasses import replace

import numpy as np
import pytest
from judging_builders import happened, judged, rule, run, sampled

from loopsim.language.units import parse_unit
from loopsim.results import Status
from loopsim.study.compare import compare
from loopsim.study.export import comparison_json, suites, to_json
from loopsim.study.judge import judge
from loopsim.study.tables import comparison_table, metrics_table, verdict_table
from loopsim.study.types import Judged, Loop
from loopsim.study.words import clock, listed, pair, rounded, shown

RULES = [
    "{signal: line.T, max: 62 degC}",
    "{signal: line.T, within: 1.5 K, of: TIC.sp, by: 25 min, after: 20 min}",
    "{signal: TV.position, travel: 45 %}",
    "{signal: line.T, rate: 1 K/min}",
    "{loop: TIC, gain_margin: 2}",
]


def scenario(dip: float, name: str, *missing: str) -> Judged:
    """Rest at 55 degC, a dip of `dip` K with a time constant of 5 min from 20 min on, to 60 min."""
    edges = list(np.linspace(0, 3600, 241))

    def temperature(t: np.ndarray) -> np.ndarray:
        since = np.maximum(t - 1200, 0) / 300
        return 328.15 - dip * math.e * since * np.exp(-since)

    pieces = sampled(
        {
            "line.T": temperature,
            "TIC.sp": lambda t: 328.15 + 0 * t,
            "TIC.out": lambda t: np.where(t < 1200, 0.47, 0.6),
            "TV.position": lambda t: 0.4 + 0 * t,
        },
        edges,
    )
    made = run(
        pieces,
        happened(1200.0, "line.T", "TV.position", "TIC.out", target="feed_q"),
        units={"line.T": "degC", "TIC.sp": "degC"},
        loops=(Loop("TIC", "line.T", "TIC.sp", "TIC.out"),),
        not_applicable=frozenset(missing),
        skipped=("step FIC.sp",) if missing else (),
        spans={"line.T": 100.0},
    )
    made = replace(made, strategy=name, trends=replace(made.trends, assumed=("tank.UA = 0.4 kW/K",)))
    return judge("draw", made, [rule(text) for text in RULES])


FEEDBACK, BOTH = scenario(7.5, "feedback"), scenario(1.0, "both", "TV.position")


def test_the_verdict_table_has_a_row_for_each_rule_and_a_column_for_each_strategy() -> None:
    table = verdict_table([FEEDBACK, BOTH])
    assert table.title == "draw" and table.heads == ("rule", "limit", "feedback", "both")
    assert [[cell.text for cell in row[1:]] for row in table.rows] == [
        ["62 degC", "55 degC at 0 s, passed", "55 degC at 0 s, passed"],
        ["1.5 K", "0.6868 K at 45 min, passed", "0.09158 K at 45 min, passed"],
        ["45 %", "0 %, passed", "does not apply"],
        ["1 K/min", "4.077 K/min at 20 min, failed", "0.5437 K/min at 20 min, passed"],
        ["2", "inconclusive", "inconclusive"],
        ["", "failed", "inconclusive"],
    ]
    assert [row[2].tone for row in table.rows] == ["good", "good", "good", "bad", "open", "bad"]
    assert table.rows[1][0].text == "line.T within 1.5 K of TIC.sp by 25 min after 20 min"
    assert (
        "feedback, 'line.T rate 1 K/min': failed; line.T changes by 4.077 K/min at 20 min; 1 K/min is allowed"
        in table.notes
    )
    assert "both: the event 'step FIC.sp' does not apply" in table.notes
    assert table.notes.count("assumed: tank.UA = 0.4 kW/K") == 1


def test_numbers_of_the_dip_by_its_closed_form() -> None:
    # dip*e*s*exp(-s) has its peak at s = 1 and the slope dip*e/300 s at s = 0; by differentiation
    assert FEEDBACK.verdicts[3].value == pytest.approx(7.5 * math.e / 300, rel=1e-6)
    # e*5*exp(-5)*7.5 at 45 min
    assert FEEDBACK.verdicts[1].value == pytest.approx(7.5 * 5 * math.exp(-4), rel=1e-5)


def test_the_metrics_table() -> None:
    table = metrics_table([FEEDBACK, BOTH])
    rows = {row[0].text: [cell.text for cell in row[1:]] for row in table.rows}
    assert rows["TIC peak deviation"] == ["-7.5 K at 25 min", "-1 K at 25 min"]
    # the integral of dip*e*s*exp(-s) is dip*e*(1 - 9 exp(-8)) times 5 min
    assert rows["TIC iae"] == [f"{5 * 7.5 * math.e * (1 - 9 * math.exp(-8)):.1f} K*min", "13.55 K*min"]
    assert rows["TIC output travel"] == ["13 %", "13 %"]
    assert rows["TIC output noise"] == ["0 %", "0 %"]
    assert "TIC overshoot after step feed_q" not in rows
    assert rows["TIC settling time after step feed_q"][0] != "–"


def test_json_is_plain_and_in_the_unit_beside() -> None:
    found = to_json("4711", [FEEDBACK, BOTH], {"both": "both.csv"}, compare([FEEDBACK, BOTH]))
    text = json.loads(json.dumps(found, allow_nan=False))
    assert list(text) == ["scenario", "run_id", "strategies", "comparison"]
    feedback = text["strategies"]["feedback"]
    assert (feedback["verdict"], feedback["passed"], feedback["trend"]) == ("failed", False, None)
    assert text["strategies"]["both"]["trend"] == "both.csv"
    first, second, *_, last = feedback["rules"]
    assert (first["value"], first["limit"], first["unit"]) == (pytest.approx(55.0), pytest.approx(62.0), "degC")
    assert second["at_s"] == 2700.0 and second["unit"] == "K" and second["verdict"] == "passed"
    assert last["value"] is None and last["reason"] == "this version does not compute margins"
    assert text["strategies"]["both"]["rules"][2]["verdict"] == "not_applicable"
    peak = feedback["metrics"]["TIC"]["peak_deviation"]
    assert peak == {"value": pytest.approx(-7.5, abs=1e-6), "unit": "K", "at_s": pytest.approx(1500, abs=0.1)}
    assert feedback["metrics"]["TIC"]["events"][0]["overshoot"]["reason"] == "the set point did not move"
    assert feedback["assumed"] == ["tank.UA = 0.4 kW/K"]


def test_what_is_infinite_is_null_with_a_reason() -> None:
    jumping = replace(FEEDBACK, verdicts=(judged("{signal: TIC.out, rate: 1 %/s}", FEEDBACK.run.trends.pieces),))
    (found,) = to_json("1", [jumping])["strategies"]["feedback"]["rules"]  # type: ignore[index]
    assert found["value"] is None and found["reason"].startswith("TIC.out jumps by 13 % at 20 min")
    assert verdict_table([jumping]).rows[0][2].text == "jumps at 20 min, failed"


def test_not_judged_is_neither_passed_nor_failed() -> None:
    nothing = judge("draw", FEEDBACK.run, [])
    assert nothing.verdict == "not_judged"
    assert to_json("1", [nothing])["strategies"]["feedback"]["passed"] is None  # type: ignore[index]
    assert verdict_table([nothing]).rows[-1][2].text == "not judged"


def test_a_run_that_stopped_is_noted() -> None:
    stopped = replace(FEEDBACK.run.trends, status=Status("stopped", "the step size was lost in 'coil'", 1800.0))
    table = verdict_table([replace(FEEDBACK, run=replace(FEEDBACK.run, trends=stopped))])
    assert "feedback: the run stopped at 30 min: the step size was lost in 'coil'" in table.notes


def test_suites_have_a_case_for_each_rule_and_strategy() -> None:
    (suite,) = suites([FEEDBACK, BOTH])
    assert suite.name == "draw" and len(suite.cases) == 2 * len(RULES)
    outcomes = [one.outcome for one in suite.cases]
    assert outcomes == [
        "passed",
        "passed",
        "passed",
        "failure",
        "failure",
        "passed",
        "passed",
        "skipped",
        "passed",
        "failure",
    ]
    assert suite.cases[4].message == "inconclusive: this version does not compute margins"
    assert suite.cases[7].message == "both has no TV.position"


def test_the_comparison_table() -> None:
    found = compare([FEEDBACK, BOTH])
    table = comparison_table(found)
    assert table.title == "None passes; nearest: both"
    assert [cell.text for cell in table.rows[0][:4]] == ["feedback", "3", "1", "1"]
    assert table.notes == found.reasons
    plain = json.dumps(comparison_json(found), allow_nan=False)
    assert json.loads(plain)["nearest"] == "both"


# ---------------------------------------------------------------- words
@pytest.mark.parametrize(
    ("number", "text"),
    [
        (0.0, "0"), (1.0, "1"), (1.23456, "1.235"), (123456.7, "123457"), (0.00123456, "0.001235"), (-0.5, "-0.5"),
        (1e-9, "1e-09"), (2.5e12, "2.5e+12"), (99.996, "100"), (10.0, "10"), (-1e-30, "-1e-30"),
    ],
)  # fmt: skip
def test_numbers_have_four_digits_and_no_idle_zeros(number: float, text: str) -> None:
    assert rounded(number) == text


def test_quantities_times_and_lists() -> None:
    assert shown(328.15, parse_unit("degC")) == "55 degC" and shown(3.0, parse_unit("count")) == "3"
    assert pair(0.1500001, 0.15, parse_unit("%")) == ("15.00001 %", "15 %")
    assert pair(0.15, 0.15, parse_unit("%")) == ("15 %", "15 %")
    assert [clock(time) for time in (0, 45.5, 300, 1290, 20000)] == ["0 s", "45.5 s", "5 min", "21.5 min", "5.556 h"]
    assert [listed(one) for one in ([], ["a"], ["a", "b"], ["a", "b", "c"])] == ["", "a", "a and b", "a, b and c"]

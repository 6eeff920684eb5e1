"""Rules against the signals: names and units are wrong before anything runs, with the cure."""

from __future__ import annotations

import pytest
from judging_builders import rule

from loopsim.documents.shapes import RULES
from loopsim.errors import Problems
from loopsim.language.units import parse_unit
from loopsim.study.checks import SCALES, check_rules

UNITS = {
    "line.T": parse_unit("degC"),
    "TIC.sp": parse_unit("degC"),
    "TV.position": parse_unit("%"),
    "tank.q": parse_unit("m^3/h"),
    "tank.p": parse_unit("bar(g)"),
}


def problems(text: str) -> list[tuple[str, str]]:
    found = Problems()
    check_rules([rule("{" + text + "}")], UNITS, {"TIC"}, found)
    return [(one.what, one.hint) for one in found.found]


@pytest.mark.parametrize(
    "text",
    [
        "signal: line.T, max: 70 degC",
        "signal: tank.p, max: 3 bar(g)",
        "signal: line.T, within: 1.5 K, of: TIC.sp",
        "signal: line.T, within: 1.5 K, of: 60 degC",
        "signal: line.T, overshoot: 20 %",
        "signal: line.T, overshoot: 1 K",
        "signal: line.T, undershoot: 0 K",
        "signal: line.T, iae: 90 K*min, of: TIC.sp",
        "signal: TV.position, iae: 90 %*min, of: 50 %",
        "signal: TV.position, travel: 400 %",
        "signal: TV.position, deviation: 2 %",
        "signal: TV.position, rate: 10 %/s",
        "signal: TV.position, reversals: 12, band: 1 %",
        "signal: tank.q, rate: 3.1 m^3/h/min",
        "signal: tank.q, travel: 0",
        "signal: line.T, outside: 90 s, band: 2 K, of: TIC.sp",
        "loop: TIC, gain_margin: 2",
    ],
)
def test_good_rules(text: str) -> None:
    assert problems(text) == []


@pytest.mark.parametrize(
    ("text", "what", "hint"),
    [
        ("signal: lin.T, max: 70 degC", "no signal is called 'lin.T'", "did you mean 'line.T'?"),
        ("signal: line.T, within: 1 K, of: TIC.ps", "no signal is called 'TIC.ps'", "did you mean 'TIC.sp'?"),
        ("loop: TC, gain_margin: 2", "no controller is called 'TC'", "did you mean 'TIC'?"),
        ("signal: line.T, max: 70 K", "70 K where max of 'line.T' wants a point on the scale of degC", None),
        ("signal: line.T, within: 2 degC, of: TIC.sp", "2 degC where within of 'line.T' wants K", None),
        ("signal: line.T, max: 70 %", "70 % where max of 'line.T' wants a point on the scale of degC", None),
        (
            "signal: line.T, max: 70",
            "the bare number 70 where max of 'line.T' wants a point on the scale of degC",
            None,
        ),
        ("signal: tank.p, max: 3 bar", "3 bar where max of 'tank.p' wants a point on the scale of bar(g)", None),
        ("signal: line.T, iae: 90 K, of: TIC.sp", "90 K where iae of 'line.T' wants K*min", "write it in K*min"),
        ("signal: TV.position, rate: 3 %", "3 % where rate of 'TV.position' wants %/min", "write it in %/min"),
        (
            "signal: line.T, within: 1 K, of: 60 K",
            "60 K where 'of' beside 'line.T' wants a point on the scale of degC",
            None,
        ),
        ("signal: line.T, outside: 9 s, band: 2 %, of: TIC.sp", "2 % where the band round 'line.T' wants K", None),
        (
            "signal: line.T, within: 1 K, of: tank.q",
            "'line.T' is in degC, 'tank.q' in m^3/h: there is no difference",
            "compare signals of one kind",
        ),
    ],
)
def test_wrong_rules(text: str, what: str, hint: str | None) -> None:
    ((found, cure),) = problems(text)
    assert found == what and (hint is None or cure == hint) and cure


def test_every_kind_with_a_limit_on_the_signals_scale_is_checked() -> None:
    by_reading = {"outside", "reversals", "alarms"}  # a time, plain numbers
    assert set(SCALES) | by_reading == set(RULES)

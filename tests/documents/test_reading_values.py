"""Texts of values: quantities, words, pairs, tables, spreads, units of ports."""

from __future__ import annotations

import pytest
from hypothesis import given as drawn
from hypothesis import strategies as st

from loopsim.documents.definitions import definition, unit_spec
from loopsim.documents.fields import whole, yes_no
from loopsim.documents.nodes import Mapping, Node, compose
from loopsim.documents.source import source_from
from loopsim.documents.types import (
    ByChoice,
    Formula,
    Given,
    NameList,
    PairValue,
    Quantity,
    TableValue,
    UnitText,
    Word,
)
from loopsim.documents.values import duration, given, passed, quantity, seconds
from loopsim.errors import InputError, Problems
from loopsim.language.tree import Name


def node(text: str) -> Node:
    """The node of a value."""
    made = compose(source_from(f"a: {text}\n".encode(), "file.yaml"), Problems())
    assert isinstance(made, Mapping)
    found = made.get("a")
    assert found is not None
    return found


def value(text: str) -> Given:
    return given(node(text))


def wrong(text: str) -> tuple[str, str]:
    with pytest.raises(InputError) as caught:
        given(node(text))
    return caught.value.problems[0].what, caught.value.problems[0].hint


@pytest.mark.parametrize(
    ("text", "number", "unit"),
    [
        ("1.2 m^3", 1.2, "m^3"),
        ("-14.3 K/(m^3/h)", -14.3, "K/(m^3/h)"),
        ("1e9 1/min", 1e9, "1/min"),
        ("4.17e6 J/(m^3*K)", 4.17e6, "J/(m^3*K)"),
        ("35 %", 35.0, "%"),
        ("35%", 35.0, "%"),
        ("12degC", 12.0, "degC"),
        ("5 bar(g)", 5.0, "bar(g)"),
        ("+.5 s", 0.5, "s"),
        ("1e-3 m", 0.001, "m"),
    ],
)
def test_quantity(text: str, number: float, unit: str) -> None:
    found = quantity(node(text))
    assert found.value == number and found.unit is not None and found.unit.text == unit and found.text == text


@pytest.mark.parametrize(("text", "number"), [("1.5", 1.5), ("1e-3", 0.001), ("0", 0.0), ("-3", -3.0)])
def test_bare_number(text: str, number: float) -> None:
    found = quantity(node(text))
    assert found.value == number and found.unit is None


@drawn(st.floats(allow_nan=False, allow_infinity=False))
def test_every_finite_number_is_read_as_python_reads_it(number: float) -> None:
    """Oracle: repr and float of Python round-trip."""
    assert quantity(node(f"{number!r} m")).value == number


@pytest.mark.parametrize(
    ("text", "hint"),
    [
        ("1,2 m^3", "write 1.2"),
        ("1,200 m^3", "write 1200 or 1.200"),
        ("4 500 L/h", "write 4500 in one piece"),
        ("1_000 s", "write 1000 in one piece"),
        ("1:30", "write 90 min or 90 s"),
        ("010 s", "some readers take it for an octal number; write 10 s"),
    ],
)
def test_what_others_read_differently_is_refused(text: str, hint: str) -> None:
    assert wrong(text)[1] == hint


def test_words_pairs_tables_and_lists() -> None:
    assert isinstance(word := value("equal_percentage").value, Word) and word.text == "equal_percentage"
    assert isinstance(on := value("on").value, Word) and on.text == "on"
    assert isinstance(pair := value("[0 degC, 100 degC]").value, PairValue)
    assert isinstance(pair.low, Quantity) and isinstance(pair.high, Quantity) and pair.high.value == 100
    assert isinstance(table := value("{x: [0 m^3/h, 5 m^3/h], y: [30, 28]}").value, TableValue)
    assert [point.value for point in table.x] == [0, 5] and [point.unit for point in table.y] == [None, None]
    assert isinstance(names := value("[sugar, salt]").value, NameList) and names.names == ("sugar", "salt")
    assert isinstance(one := value("[sugar]").value, NameList) and one.names == ("sugar",)


def test_pairs_across_units_rise_in_si() -> None:
    assert isinstance(value("[20 degC, 300 K]").value, PairValue)
    assert wrong("[90 s, 1 min]")[0] == "'1 min' is not above '90 s'"


def test_inside_a_block_names_and_formulas_are_passed() -> None:
    assert isinstance(word := passed(node("range")).value, Word) and word.text == "range"
    assert isinstance(half := passed(node("gain/2")).value, Formula) and half.text == "gain/2"
    assert isinstance(pair := passed(node("[low, high]")).value, PairValue)
    assert isinstance(pair.low, Formula) and pair.low.tree == Name("low")
    assert isinstance(names := passed(node("[sugar, salt, starch]")).value, NameList) and len(names.names) == 3


def test_spread() -> None:
    full = value("{is: 1.2 m^3, tolerance: 5 %, assumed: yes, about: from the drawing}")
    assert full.tolerance is not None and full.tolerance.value == 5 and full.assumed
    assert full.about == "from the drawing" and full.deviation is None
    assert value("{is: 9 s, deviation: 4 s}").deviation is not None
    assert value("{is: 12 degC, tolerance: 2 K}").tolerance is not None
    assert value("{is: 5 bar(g), tolerance: 0.1 bar}").tolerance is not None
    assert value("{is: 5 bar(a), tolerance: 2 %}").tolerance is not None  # an absolute pressure starts at zero
    assert value("{is: 1.5, tolerance: 0.1}").tolerance is not None
    assert not value("{is: 1.5, assumed: no}").assumed


@pytest.mark.parametrize(
    "text",
    [
        "{is: 12 degC, tolerance: 5 %}",
        "{is: 5 bar(g), deviation: 2 %}",
        "{is: 12 degC, tolerance: 2 degC}",
        "{is: 3 m, tolerance: 2 s}",
        "{is: 3 m, tolerance: 0.1}",
        "{is: 3 m, tolerance: -5 %}",
        "{is: open, tolerance: 5 %}",
        "{is: [0 m, 1 m], tolerance: 5 %}",
        "{is: 3 m, tolerance: 5 %, deviation: 5 %}",
        "{tolerance: 5 %}",
        "{is: {is: 3 m}}",
        "yes",
        "no",
        "nan",
        "-inf",
        "1e999",
        "three",
        "[1 m]",
        "[]",
        "[1 m, 2 m, 3 m]",
        "[1 m, b]",
        "{x: [1], y: [2]}",
        "{x: [1, 2]}",
        "{x: [2, 1], y: [1, 2]}",
        "a b",
        "3 cubits",
        "9" * 400,
    ],
)
def test_refused(text: str) -> None:
    if text == "three":
        assert isinstance(value(text).value, Word)  # a word; whether a setting has it, the plant's assembly says
    else:
        assert wrong(text)[0]


def test_durations() -> None:
    assert seconds(duration(node("1.5 h"))) == 5400
    assert seconds(duration(node("0"))) == 0
    for text in ("5", "-1 s", "3 m", "5 min/h"):
        with pytest.raises(InputError):
            duration(node(text))


def test_yes_no_and_whole_numbers() -> None:
    assert [yes_no(node(text)) for text in ("yes", "true", "on", "no", "false", "off")] == [True] * 3 + [False] * 3
    assert whole(node("7")) == 7 and whole(node("0")) == 0
    for text in ("010", "7.0", "-1", "1e3", "seven", "1" * 30, "٧"):
        with pytest.raises(InputError):
            whole(node(text))


@pytest.mark.parametrize(
    ("text", "kind", "port"),
    [
        ("any", "any", ""),
        ("count", "count", ""),
        ("on/off", "on_off", ""),
        ('"%"', "fixed", ""),
        ("like pv", "like", "pv"),
        ('"like u[1]"', "like", "u[1]"),
        ("change of pv", "change", "pv"),
    ],
)
def test_units_of_ports(text: str, kind: str, port: str) -> None:
    found = unit_spec(node(text))
    assert isinstance(found, UnitText) and (found.kind, found.port) == (kind, port)


def test_quotients_of_units() -> None:
    ports = unit_spec(node("like out per u"))
    assert isinstance(ports, UnitText) and ports.top is not None and ports.bottom is not None
    assert (ports.kind, ports.top.port, ports.bottom.kind, ports.bottom.port) == ("quotient", "out", "like", "u")
    time = unit_spec(node("like pv per 10 min"))
    assert isinstance(time, UnitText) and time.bottom is not None and time.bottom.unit is not None
    assert (time.bottom.kind, time.scale, time.bottom.unit.factor) == ("fixed", 10.0, 60.0)


def test_units_and_formulas_by_choice() -> None:
    unit = unit_spec(node("{by: order, 1: 1/s, 2: m^3/(mol*s)}"))
    assert isinstance(unit, ByChoice) and unit.setting == "order" and list(unit.options) == ["1", "2"]
    nested = definition(node('{by: form, ideal: gain, series: {by: action, reverse: "max(a, b)", direct: 1 bar}}'))
    assert isinstance(nested, ByChoice) and isinstance(inner := nested.options["series"], ByChoice)
    assert isinstance(inner.options["reverse"], Formula) and isinstance(inner.options["direct"], Quantity)


@pytest.mark.parametrize(
    ("text", "kind"),
    [
        ("1 bar", Quantity),
        ("0", Quantity),
        ("4.17e6 J/(m^3*K)", Quantity),
        ("1/3", Formula),
        ("1 - x", Formula),
        ("2*UA", Formula),
        ("0.5*x", Formula),
        ("x", Formula),
        ("-x", Formula),
        ("on", Word),
        ("off", Word),
    ],
)
def test_quantity_or_formula(text: str, kind: type) -> None:
    assert isinstance(definition(node(text)), kind)


def test_the_place_of_a_formula_error_is_exact() -> None:
    with pytest.raises(InputError) as caught:
        definition(node("{by: way, up: x + + }"))
    where = caught.value.problems[0].where
    assert where is not None and where.line == 1 and where.column > len("a: {by: way, up: ")

"""Units against published factors."""

from __future__ import annotations

import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from loopsim.language import units
from loopsim.language.units import ALLOWED, UnitError, difference_of, from_si, parse_unit, to_si

# Source: SI brochure (9th edition) for SI units and those accepted with it; NIST Special Publication 811 (2008),
# appendix B.8, for inch, foot, pound, psi, US gallon; both from memory, digits as printed there.
FACTORS = {
    "bar": 1e5, "kPa": 1e3, "m^3/h": 1 / 3600, "L/min": 1e-3 / 60, "kWh": 3.6e6, "t/h": 1000 / 3600, "d": 86400.0,
    "inch": 0.0254, "ft": 0.3048, "lb": 0.45359237, "psi": 6894.757, "gal": 3.785412e-3, "mol/L": 1e3, "%": 0.01,
    "kJ/(kg*K)": 1e3, "J/(kg*degC)": 1.0, "cP": 1e-3, "rpm": 0.1047198,
}  # fmt: skip


@pytest.mark.parametrize(("text", "factor"), FACTORS.items())
def test_factors(text: str, factor: float) -> None:
    assert parse_unit(text).factor == pytest.approx(factor, rel=5e-7)


def test_points() -> None:
    """0 degC = 273.15 K, 32 degF = 0 degC, 0 bar(g) = 1.01325 bar (SI brochure; standard atmosphere)."""
    assert to_si(0, parse_unit("degC")) == 273.15
    assert to_si(32, parse_unit("degF")) == pytest.approx(273.15, abs=1e-10)
    assert to_si(0, parse_unit("bar(g)")) == 101325.0
    assert to_si(2, parse_unit("bar(g)"), 95000.0) == 295000.0
    assert to_si(2, parse_unit("bar(a)")) == 200000.0
    assert difference_of(parse_unit("degC")).text == "K"
    assert difference_of(parse_unit("bar(g)")).text == "bar"


@pytest.mark.parametrize(
    ("text", "cure"),
    [
        ("m3/h", "m^3/h"),
        ("C", "degC"),
        ("barg", "bar(g)"),
        ("F", "degF"),
        ("l/h", "L"),
        ("Nm3", "kg"),
        ("kw", "kW"),
        ("", "unit"),
    ],
)
def test_strangers_are_refused_with_the_cure(text: str, cure: str) -> None:
    with pytest.raises(UnitError) as caught:
        parse_unit(text)
    assert cure in caught.value.hint


@pytest.mark.parametrize(
    ("text", "cure"),
    [
        ("J/kg*K", "J/(kg*K)"),  # SI brochure 5.4: a solidus is not followed by a product without parentheses
        ("J/kg K", "J/(kg*K)"),
        ("kJ/kg·K", "kJ/(kg*K)"),
        ("bar(g)/s", "bar"),
        ("bar (g)", "bar(g)"),
        ("kg/h(g)", "join"),
        ("kPa(a)/s", "kPa"),
        ("m**3", "m^3"),
        ("m³/h", "m^3/h"),
        ("µm", "um"),
        ("2 m", "join"),
        ("kg m", "join"),
        ("m^0", "join"),
        ("m^200", "join"),
        ("m^3^2", "join"),
        ("m^(1/2)", "join"),
        ("(m", "join"),
        ("m/-s", "join"),
        ("W/degF", "K"),
        ("W/degK", "K"),
        ("1", "dimensionless"),
        ("-", "dimensionless"),
        ("kPag", "kPa(g)"),
        ("psia", "psi(a)"),
        ("°C", "degC"),
        ("percent", "%"),
        ("x" * 70, ""),
        ("*".join(["m"] * 40), "60"),
    ],
)
def test_what_can_be_misread_is_refused(text: str, cure: str) -> None:
    with pytest.raises(UnitError) as caught:
        parse_unit(text)
    assert cure in caught.value.hint


@pytest.mark.parametrize("text", ["degC", "degF", "bar(g)", "bar(a)", "psi(g)", "kPa(a)"])
def test_points_stand_alone(text: str) -> None:
    assert parse_unit(text).point
    for compound in (f"{text}/s", f"kg/{text}", f"{text}*m"):
        if text == "degC":
            assert not parse_unit(compound).point  # there it is a difference
        else:
            with pytest.raises(UnitError):
                parse_unit(compound)


@given(st.text(alphabet="mskgKhdLt()*/^.-123 %°²dPabW", max_size=12))
def test_any_text_is_a_unit_or_refused(text: str) -> None:
    """No text gets past the list by another way: what is read has a finite factor, and its name is read back alike."""
    try:
        unit = parse_unit(text)
    except UnitError as error:
        assert error.what
        return
    assert 0 < unit.factor < float("inf") and parse_unit(unit.text) == unit


def test_the_list_agrees_with_other_definitions() -> None:
    """Every unit of the list against the definitions that pint ships, none of which we use."""
    registry = pint.UnitRegistry()
    named = {"d": "day", "t": "metric_ton", "h": "hour", "gpm": "gallon/minute"}
    for text in sorted(ALLOWED):
        theirs = registry.Quantity(1.0, registry.parse_units(named.get(text, text))).to_base_units()
        assert parse_unit(text).factor == pytest.approx(theirs.magnitude, rel=1e-9), text


@given(st.floats(-1e6, 1e6), st.sampled_from([*FACTORS, "degC", "degF", "bar(g)", "kPa(a)"]))
def test_round_trip(value: float, text: str) -> None:
    unit = parse_unit(text)
    assert from_si(to_si(value, unit), unit) == pytest.approx(value, rel=1e-12, abs=1e-9)


def test_units_told_without_the_registry_are_those_of_the_registry() -> None:
    """Against pint, which the other units come from."""
    for text in units.PLAIN:
        assert units.parse_unit(text) == units._compound(text)


def test_units_of_integrals_can_be_read_back() -> None:
    for text in ("K", "g/L", "kJ/(kg*K)", "%", "m^3/h"):
        made = units.times_minute(units.parse_unit(text))
        read = units.parse_unit(made.text)
        assert (read.dimension, read.factor) == (made.dimension, pytest.approx(made.factor))

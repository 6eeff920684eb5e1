"""Units against published factors."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from loopsim.language.units import UnitError, difference_of, from_si, parse_unit, to_si

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


@given(st.floats(-1e6, 1e6), st.sampled_from([*FACTORS, "degC", "degF", "bar(g)", "kPa(a)"]))
def test_round_trip(value: float, text: str) -> None:
    unit = parse_unit(text)
    assert from_si(to_si(value, unit), unit) == pytest.approx(value, rel=1e-12, abs=1e-9)

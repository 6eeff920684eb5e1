"""Kinds of formulas: dimensions, conditions, choices, curves; points on a scale and differences."""

from __future__ import annotations

import pytest

from loopsim.language.dimensions import NONE, Dimension, unknown
from loopsim.language.functions import FUNCTIONS
from loopsim.language.kinds import ON_OFF, RULES, ZERO, Curve, Kind, KindError, Words, describe, kind_of
from loopsim.language.parse import parse_balance, parse_formula
from loopsim.language.points import is_point
from loopsim.language.tree import Name
from loopsim.language.units import parse_unit

UNITS = {
    "T": "degC", "T_in": "degC", "dT_max": "K", "q": "m^3/h", "V": "m^3", "h": "m", "A": "m^2", "dp": "bar", "p": "bar(g)",
    "rho": "kg/m^3", "cp": "J/(kg*K)", "UA": "W/K", "Q": "kW", "E": "kJ/mol", "R": "J/(mol*K)", "g": "m/s^2", "Kv": "m^3/h",
    "t": "s", "x": "dimensionless", "n": "count", "c": "mol/L",
}  # fmt: skip
OTHERS: dict[str, Kind] = {
    "on_now": ON_OFF,
    "mode": Words("mode", ("manual", "auto")),
    "curve": Curve(parse_unit("m^3/h").dimension, parse_unit("m").dimension),
    "pv": unknown("pv"),
    "u": unknown("u"),
}


def kinds(name: Name) -> Kind:
    if name.name in UNITS:
        return parse_unit(UNITS[name.name]).dimension
    if name.name in OTHERS:
        return OTHERS[name.name]
    raise KindError(f"there is no '{name.name}'", name.at)


# what physics says: quantity equations of any handbook of process engineering
GIVES = {
    "rho*cp*V*(T - T_in)": "J",
    "rho*g*h": "Pa",
    "sqrt(2*g*h)": "m/s",
    "Kv*sqrt(dp*1000/(dp*rho)*rho)": "m^3/h",
    "A*sqrt(2*dp/rho)": "m^3/s",
    "exp(-E/(R*T))*c/t": "mol/(L*s)",
    "Q/UA": "K",
    "5.67e-8*x^4": "dimensionless",
    "V/q": "s",
    "h^-1.5*h^2": "m^0.5",
    "where(T > T_in, Q, 0)": "W",
    "max(0, Q, UA*dT_max)": "W",
    "clip(T, T_in, T)": "K",
    "delayed(Q, t)": "W",
    "transported(T, q, V)": "K",
    "noise(dT_max, t)": "K",
    "since(T > T_in)": "s",
    "held(Q, on_now)": "W",
    "was(h)": "m",
    "interp(curve, q)": "m",
    "sign(Q)*x + n": "dimensionless",
    "abs(-q)": "m^3/s",
    "0*Q + h": "m",
    "log10(c/c)": "dimensionless",
}


@pytest.mark.parametrize("text", GIVES)
def test_dimensions_are_those_of_the_quantity_equation(text: str) -> None:
    assert kind_of(parse_formula(text), kinds) == parse_unit(GIVES[text]).dimension


@pytest.mark.parametrize(
    ("text", "kind"),
    [
        ("T > T_in and not on_now", ON_OFF),
        ("on_now == (Q > 0)", ON_OFF),
        ("where(on_now, on_now, Q > 0)", ON_OFF),
        ("mode == auto or manual != mode", ON_OFF),
        ("mode != was(mode)", ON_OFF),
        ("given(u) or wired(u)", ON_OFF),
        ("held(on_now, Q > 0)", ON_OFF),
        ("0", ZERO),
        ("-0", ZERO),
        ("0*Q", ZERO),
        ("0/Q", ZERO),
        ("where(on_now, 0, 0)", ZERO),
        ("pv*u/pv", unknown("u")),
    ],
)
def test_other_kinds(text: str, kind: Kind) -> None:
    assert kind_of(parse_formula(text), kinds) == kind


WRONG = [
    ("rho*cp*q + Q", 11, "`rho*cp*q` is W/K but `Q` is W: they cannot be added"),
    ("Q - h", 4, "`Q` is W but `h` is m: they cannot be subtracted"),
    ("T > 60", 4, "`T` is K but `60` is dimensionless: they cannot be compared"),
    ("max(0, Q, h)", 10, "`Q` is W but `h` is m"),
    ("where(Q, h, 0)", 6, "`Q` is W: a condition is wanted"),
    ("where(on_now, h, Q)", 17, "`h` is m but `Q` is W: they cannot be branches of one where"),
    ("where(on_now, on_now, Q)", 22, "`Q` is W but another branch is on or off"),
    ("on_now*Q", 0, "`on_now` is on or off: it cannot be multiplied"),
    ("Q + (T > T_in)", 5, "`T > T_in` is on or off: it cannot be added"),
    ("on_now < on_now", 0, "it cannot be compared"),
    ("mode + 1", 0, "`mode` is a choice of mode: it cannot be added"),
    ("mode == slow", 8, "`slow` is not a choice of 'mode'"),
    ("mode and on_now", 0, "`mode` is a choice of mode: a condition is wanted"),
    ("curve*2", 0, "`curve` is a curve: it cannot be multiplied"),
    ("interp(h, q)", 7, "`h` is m: a curve is wanted"),
    ("interp(curve, h)", 14, "`h` is m: the x of the curve (m^3/s) is wanted"),
    ("exp(T)", 4, "`T` is K: only a dimensionless number can be the argument of exp"),
    ("x^h", 2, "`h` is m: only a dimensionless number can be an exponent"),
    ("h^x", 2, "`h` is m: its exponent must be a number, not a formula"),
    ("delayed(Q, h)", 11, "`h` is m: a dead time (s) is wanted"),
    ("transported(T, Q, V)", 15, "`Q` is W: a volume flow (m^3/s) is wanted"),
    ("transported(T, q, h)", 18, "`h` is m: a volume (m^3) is wanted"),
    ("noise(h, h)", 9, "`h` is m: the time between draws (s) is wanted"),
    ("since(h)", 6, "`h` is m: a condition is wanted"),
    ("held(h, h)", 8, "`h` is m: a condition is wanted"),
    ("rounded(h, q)", 11, "`h` is m but `q` is m^3/s"),
    ("pv + u", 5, "`pv` is (unit of pv) but `u` is (unit of u)"),
]


@pytest.mark.parametrize(("text", "at", "what"), WRONG)
def test_what_does_not_go_together_is_quoted(text: str, at: int, what: str) -> None:
    with pytest.raises(KindError) as caught:
        kind_of(parse_formula(text), kinds)
    assert what in caught.value.what
    assert caught.value.at == at


def test_cures() -> None:
    for text, cure in [
        ("T > 60", "limit: 60 K"),
        ("on_now*Q", "where(condition, 1, 0)"),
        ("mode and on_now", "mode == manual"),
    ]:
        with pytest.raises(KindError) as caught:
            kind_of(parse_formula(text), kinds)
        assert cure in caught.value.hint


def test_a_rate_is_per_second() -> None:
    left, right = parse_balance("rho*cp*V*dT/dt = d(rho*V)/dt*cp*T + Q")
    assert kind_of(left, kinds) == kind_of(right, kinds) == parse_unit("W").dimension


def test_every_function_has_a_rule() -> None:
    assert set(FUNCTIONS) <= set(RULES)


# ---------------------------------------------------------------- points on a scale
def points(name: Name) -> bool | None:
    return parse_unit(UNITS[name.name]).point if name.name in UNITS else None


@pytest.mark.parametrize(
    ("text", "point"),
    [
        ("T", True),
        ("T - T_in", False),
        ("T + dT_max", True),
        ("dT_max + T", True),
        ("T - dT_max/2", True),
        ("(T - T_in)*2", False),
        ("-dT_max", False),
        ("(T + T_in)/2", None),
        ("max(T, T_in)", True),
        ("where(T > T_in, T, T_in)", True),
        ("clip(dT_max, 0, dT_max)", False),
        ("delayed(T, t)", True),
        ("was(T - T_in)", False),
        ("Q/UA", None),
        ("p + dp", True),
        ("pv - u", None),
    ],
)
def test_points_and_differences(text: str, point: bool | None) -> None:
    """60 degC less 55 degC is 5 K; 60 degC and 5 K are 65 degC; half of 60 degC means nothing (ISO 80000-5)."""
    assert is_point(parse_formula(text), points) is point


@pytest.mark.parametrize("text", ["T > dT_max", "max(T, dT_max)", "where(T > 0, 1, 2)", "clip(T, 0, T)", "min(p, dp)"])
def test_a_point_beside_a_difference_is_refused(text: str) -> None:
    with pytest.raises(KindError):
        is_point(parse_formula(text), points)


# ---------------------------------------------------------------- dimensions in words
@pytest.mark.parametrize(
    "text",
    ["W", "J", "Pa", "N", "V", "W/K", "W/(m^2*K)", "W/(m*K)", "J/(kg*K)", "J/kg", "J/mol", "J/(mol*K)", "Pa*s", "kg/m^3", "m^3/s",
     "m/s^2", "K", "mol/m^3", "1/s", "kg/(m^2*s)", "S/m", "ohm", "kg*K/s", "W/m^2", "J/K", "K/s"],
)  # fmt: skip
def test_dimensions_read_as_engineers_write_them(text: str) -> None:
    assert parse_unit(text).dimension.describe() == text


def test_dimensions_multiply_and_divide() -> None:
    metre, second = Dimension.of({"m": 1}), Dimension.of({"s": 1})
    assert metre.divide(second).power(2) == Dimension.of({"m": 2, "s": -2})
    assert metre.power(0.5).power(2) == metre
    assert metre.power(1 / 3).power(3) == metre
    assert metre.divide(metre) == NONE == metre.power(0)
    assert describe(unknown("pv").divide(second)) == "(unit of pv)/s"
    assert describe(metre.power(0.5)) == "m^(1/2)"

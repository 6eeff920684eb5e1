"""Units of process engineering: text to factor, offset and dimension, with an allow-list.

The list is a small set of definitions of our own, read by pint, so that only units of the trade exist and letters with
another meaning elsewhere (C, F, T, a) are refused with the cure.
"""

from __future__ import annotations

import difflib
import re
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cache
from typing import TYPE_CHECKING

from loopsim.language.dimensions import Dimension

if TYPE_CHECKING:
    from pint import UnitRegistry

KELVIN = 273.15
ATMOSPHERE = 101325.0  # Pa
RANKINE = 5.0 / 9.0  # K


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit: SI value = number * factor + offset; `point` marks a place on a shifted scale (degC, bar(a), bar(g)).

    The offset of a gauge pressure is the air pressure.
    """

    text: str
    factor: float
    offset: float
    dimension: Dimension
    point: bool = False

    @property
    def gauge(self) -> bool:
        """Whether it counts from the air pressure."""
        return self.text.endswith("(g)")


class UnitError(ValueError):
    """A unit that is not on the list; `what` was found, `hint` is the cure."""

    def __init__(self, what: str, hint: str = "") -> None:
        super().__init__(what)
        self.what, self.hint = what, hint


# Base units and what is defined by them. Sources of the factors: the SI brochure; for inch, foot, pound, psi and the
# US gallon NIST Special Publication 811, appendix B.
DEFINITIONS = """
kilogram = [mass] = kg
meter = [length] = m
second = [time] = s
kelvin = [temperature] = K
mole = [substance] = mol
ampere = [current] = A
radian = []
g = 0.001 * kg
mg = 0.000001 * kg
ug = 0.000000001 * kg
t = 1000 * kg
cm = 0.01 * m
mm = 0.001 * m
um = 0.000001 * m
km = 1000 * m
ms = 0.001 * s
min = 60 * s
h = 3600 * s
d = 86400 * s
L = 0.001 * m ** 3
mL = 0.001 * L
hL = 100 * L
N = kg * m / s ** 2
kN = 1000 * N
Pa = N / m ** 2
mPa = 0.001 * Pa
kPa = 1000 * Pa
MPa = 1000000 * Pa
bar = 100000 * Pa
mbar = 100 * Pa
J = N * m
kJ = 1000 * J
MJ = 1000000 * J
GJ = 1000000000 * J
W = J / s
kW = 1000 * W
MW = 1000000 * W
Wh = 3600 * J
kWh = 1000 * Wh
MWh = 1000000 * Wh
kmol = 1000 * mol
mmol = 0.001 * mol
umol = 0.000001 * mol
mA = 0.001 * A
V = W / A
mV = 0.001 * V
ohm = V / A
S = 1 / ohm
mS = 0.001 * S
uS = 0.000001 * S
Hz = 1 / s
rad = radian
deg = 0.017453292519943295 * radian
rpm = 0.10471975511965977 * radian / s
percent = 0.01 * radian
ppm = 0.000001 * radian
dimensionless_number = 1 * radian
cP = 0.001 * Pa * s
inch = 0.0254 * m
ft = 0.3048 * m
lb = 0.45359237 * kg
psi = 6894.757293168361 * Pa
gal = 0.003785411784 * m ** 3
gpm = gal / min
"""
LONG_NAMES = (
    *("kilogram", "meter", "second", "kelvin", "mole", "ampere", "radian"),
    *("mass", "length", "time", "temperature", "substance", "current", "percent", "dimensionless_number"),
)
ALLOWED = frozenset(
    name for line in DEFINITIONS.split("\n") for name in re.split(r"\W+", line) if name and not name[0].isdigit()
) - set(LONG_NAMES)
SYMBOLS = {"[mass]": "kg", "[length]": "m", "[time]": "s", "[temperature]": "K", "[substance]": "mol", "[current]": "A"}
POINTS = {
    "degC": ("K", 1.0, KELVIN),
    "degF": ("K", RANKINE, KELVIN - 32.0 * RANKINE),
}
LONGEST = 60
PRESSURES = ("bar", "mbar", "Pa", "kPa", "MPa", "psi")
LETTERS = str.maketrans(
    {
        "²": "^2",
        "³": "^3",
        "·": "*",
        "×": "*",
        "⋅": "*",
        "÷": "/",
        "µ": "u",
        "μ": "u",
        "Ω": "ohm",
        "℃": "degC",
        "−": "-",
    }
)
CURES = {
    "C": "write degC for a point on the scale, K for a difference",
    "°C": "write degC for a point on the scale, K for a difference",
    "degK": "write K",
    "F": "write degF for a point on the scale, K for a difference",
    "°F": "write degF for a point on the scale, K for a difference",
    "degF": "inside a compound unit write K; a difference of 1 degF is 5/9 K",
    "T": "write t for a tonne",
    "l": "write L for a litre",
    "lpm": "write L/min",
    "ml": "write mL",
    "hl": "write hL",
    "cSt": "write mm^2/s",
    "in": "write inch",
    "ton": "write t for a tonne",
    "hr": "write h",
    "sec": "write s",
    "mins": "write min",
    "day": "write d",
    "M": "write mol/L",
    "a": "write the time in d",
    "atm": "write bar(a), or bar for a difference",
    "Nm3": "write kg, or m^3 at a stated pressure and temperature",
    "scfm": "write kg/h",
    "deg_C": "write degC",
    "celsius": "write degC",
    "pct": "write %",
    "percent": "write %",
    "-": "write dimensionless",
    "1": "write dimensionless",
    "kcal": "write kJ",
    "BTU": "write kJ",
    "hp": "write kW",
}
_FACTOR = r"(?:[^\W\d]\w*|%|\0)(?:\s*\^\s*-?(?:[1-9]|\d\.\d*[1-9]))?"
_PRODUCT = re.compile(rf"\s*(?:1|{_FACTOR})(?:\s*\*\s*{_FACTOR})*(?:\s*/\s*{_FACTOR})*\s*")


# what runs and rules ask for all the time, told without loading the registry
PLAIN = {"s": ("s", 1.0), "min": ("s", 60.0), "h": ("s", 3600.0), "K": ("K", 1.0)}


@cache
def _registry() -> UnitRegistry[float]:
    """A registry that knows the allowed units and nothing else."""
    import pint

    registry: UnitRegistry[float] = pint.UnitRegistry(None, autoconvert_offset_to_baseunit=False)
    for line in DEFINITIONS.strip().splitlines():
        registry.define(line)
    return registry


@cache
def parse_unit(text: str) -> Unit:
    """A unit from its text, such as `m^3/h`, `kJ/(kg*K)`, `degC`, `bar(g)`, `%`. Raises `UnitError` with the cure."""
    wanted = text.strip()
    if wanted in ("dimensionless", "count"):
        return Unit(wanted, 1.0, 0.0, Dimension())
    if wanted == "%":
        return Unit("%", 0.01, 0.0, Dimension())
    if wanted in PLAIN:
        base, factor = PLAIN[wanted]
        return Unit(wanted, factor, 0.0, Dimension.of({base: 1}))
    if wanted in POINTS:
        base, factor, offset = POINTS[wanted]
        return Unit(wanted, factor, offset, parse_unit(base).dimension, True)
    stem, _, kind = wanted.partition("(")
    if stem in PRESSURES and kind in ("a)", "g)"):
        plain = parse_unit(stem)
        return replace(plain, text=wanted, offset=ATMOSPHERE if kind == "g)" else 0.0, point=True)
    return _compound(wanted)


def _compound(text: str) -> Unit:
    """A unit made of listed units."""
    _refuse_point(text)
    _refuse_strangers(text)
    _check_form(text)
    # a degree inside a compound unit is a difference
    plain = re.sub(r"\bdegC\b", "K", text).replace("^", "**").replace("%", "percent")
    registry = _registry()
    one = registry.Quantity(1.0, registry.parse_units(plain)).to_base_units()
    powers = {
        SYMBOLS[name]: Fraction(float(str(power))).limit_denominator(100) for name, power in one.dimensionality.items()
    }
    return Unit(text, float(one.magnitude), 0.0, Dimension.of(powers))


def _refuse_point(text: str) -> None:
    """Refuse the mark of a scale anywhere but in a unit that stands alone."""
    point = re.search(rf"\b({'|'.join(PRESSURES)})\s*\(([ag])\)", text)
    if point:
        alone = f"write {point[1]}({point[2]})"
        hint = (
            alone if point[0] == text else f"a point on a scale stands alone; inside a compound unit write {point[1]}"
        )
        raise UnitError(f"'{text}' is not a unit", hint)


def _check_form(text: str) -> None:
    """Refuse what could be read in two ways: units side by side, a product behind a solidus."""
    if len(text) > LONGEST:
        raise UnitError(f"a unit of {len(text)} characters", f"{LONGEST} is the most")
    rest = text
    while inner := re.search(r"\(([^()]*)\)", rest):
        _check_product(inner[1], text)
        rest = rest[: inner.start()] + "\0" + rest[inner.end() :]
    _check_product(rest, text)


def _check_product(part: str, text: str) -> None:
    if _PRODUCT.fullmatch(part):
        return
    if _plain(text) != text:
        raise UnitError(f"'{text}' can be read in two ways", f"write {_plain(text)}")
    raise UnitError(f"'{text}' is not a unit", "join units with * and /, powers with ^, as in kJ/(kg*K)")


def _plain(text: str) -> str:
    """A unit as it is written here: plain letters, ^ for powers, a product behind a solidus in parentheses."""
    plain = text.translate(LETTERS).replace("**", "^")
    behind = re.fullmatch(r"([^/]+)/\s*(\w+)\s*[*\s]\s*(\w+)", plain)
    return f"{behind[1].strip()}/({behind[2]}*{behind[3]})" if behind else plain


def _refuse_strangers(text: str) -> None:
    """Refuse names that are not on the list, with the cure where it is known."""
    if text.translate(LETTERS) != text or "**" in text:
        raise UnitError(f"'{text}' is not a unit", f"write {_plain(text)}")
    if text in CURES and text != "degF":
        raise UnitError(f"'{text}' is not a unit known here", CURES[text])
    names = re.findall(r"°?[^\W\d]\w*|%", text)
    if not names:
        raise UnitError(f"'{text}' is not a unit", "write a unit such as m^3/h, kW, degC or %")
    for name in names:
        if name in ALLOWED or name in ("degC", "%"):
            continue
        stem = re.fullmatch(r"([a-zA-Z]+)([23])", name)
        if stem and stem[1] in ALLOWED:
            cured = re.sub(rf"\b{name}\b", f"{stem[1]}^{stem[2]}", text)
            raise UnitError(f"'{text}' is not a unit", f"write {cured}")
        raise UnitError(f"'{name}' is not a unit known here", _cure(name))


def _cure(name: str) -> str:
    scale = re.fullmatch(rf"({'|'.join(PRESSURES)})_?([ag])", name)
    if scale:
        return f"write {scale[1]}({scale[2]})"
    if name in CURES:
        return CURES[name]
    close = difflib.get_close_matches(name, [*ALLOWED, "degC", "%"], n=3, cutoff=0.5)
    return (
        "did you mean " + " or ".join(close) + "?"
        if close
        else "use a unit of process engineering, such as m^3/h or kW"
    )


def to_si(value: float, unit: Unit, air_pressure: float = ATMOSPHERE) -> float:
    """A number in `unit` as SI; `air_pressure` [Pa] is where gauge pressures count from."""
    return value * unit.factor + (air_pressure if unit.gauge else unit.offset)


def from_si(value: float, unit: Unit, air_pressure: float = ATMOSPHERE) -> float:
    """An SI number in `unit`."""
    return (value - (air_pressure if unit.gauge else unit.offset)) / unit.factor


def difference_of(unit: Unit) -> Unit:
    """The unit of differences on a scale: K for degC, bar for bar(g), the unit itself otherwise."""
    if not unit.point:
        return unit
    if unit.text in POINTS:
        return parse_unit("K")
    return parse_unit(unit.text.partition("(")[0])


def times_minute(unit: Unit) -> Unit:
    """The unit of integrals over time, in a text that can be read back: K*min, min*g/L."""
    text = f"min*{unit.text}" if "/" in unit.text else f"{unit.text}*min"
    return Unit(text, 60.0 * unit.factor, 0.0, unit.dimension.multiply(parse_unit("s").dimension))


DIMENSIONLESS = Unit("dimensionless", 1.0, 0.0, Dimension())
PERCENT = Unit("%", 0.01, 0.0, Dimension())

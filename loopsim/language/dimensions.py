"""Physical dimensions as products of powers of base dimensions and of unknown ones."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

BASES = ("kg", "m", "s", "K", "mol", "A")


@dataclass(frozen=True, slots=True)
class Dimension:
    """Powers of base symbols (`kg m s K mol A`, `?name` for an unknown one), sorted by symbol, zeros left out."""

    powers: tuple[tuple[str, Fraction], ...] = ()

    @classmethod
    def of(cls, powers: Mapping[str, Fraction | int]) -> Dimension:
        """A dimension from symbol -> power."""
        return cls(tuple(sorted((name, Fraction(power)) for name, power in powers.items() if power)))

    def multiply(self, other: Dimension) -> Dimension:
        """The dimension of a product."""
        return self._with(other, 1)

    def divide(self, other: Dimension) -> Dimension:
        """The dimension of a quotient."""
        return self._with(other, -1)

    def power(self, exponent: float | Fraction) -> Dimension:
        """The dimension of a power; exponents are taken as fractions of small numbers."""
        exact = Fraction(exponent).limit_denominator(1000)
        return Dimension.of({name: power * exact for name, power in self.powers})

    def _with(self, other: Dimension, sign: int) -> Dimension:
        powers = dict(self.powers)
        for name, power in other.powers:
            powers[name] = powers.get(name, Fraction(0)) + sign * power
        return Dimension.of(powers)

    def describe(self) -> str:
        """The dimension as a unit that engineers read: `W`, `W/K`, `kg/m^3`, `dimensionless`."""
        if not self.powers:
            return "dimensionless"
        if self in NAMED:
            return NAMED[self]
        order = sorted(self.powers, key=lambda one: BASES.index(one[0]) if one[0] in BASES else len(BASES))
        above = [_factor(name, power) for name, power in order if power > 0]
        below = [_factor(name, -power) for name, power in order if power < 0]
        top, bottom = "*".join(above) or "1", "*".join(below)
        if not below:
            return top
        return f"{top}/({bottom})" if len(below) > 1 else f"{top}/{bottom}"


def _factor(name: str, power: Fraction) -> str:
    shown = f"(unit of {name[1:]})" if name.startswith("?") else name
    if power == 1:
        return shown
    return f"{shown}^{power}" if power.denominator == 1 else f"{shown}^({power})"


def _named() -> dict[Dimension, str]:
    """Dimensions that engineers know by another unit than the product of base units."""
    texts = """
    N 1 1 -2 | Pa 1 -1 -2 | J 1 2 -2 | W 1 2 -3 | V 1 2 -3 0 0 -1 | ohm 1 2 -3 0 0 -2 | S -1 -2 3 0 0 2
    Pa*s 1 -1 -1 | Pa/m 1 -2 -2 | N/m 1 0 -2 | S/m -1 -3 3 0 0 2
    J/K 1 2 -2 -1 | J/kg 0 2 -2 | J/(kg*K) 0 2 -2 -1 | J/(m^3*K) 1 -1 -2 -1 | J/mol 1 2 -2 0 -1 | J/(mol*K) 1 2 -2 -1 -1
    W/K 1 2 -3 -1 | W/m^2 1 0 -3 | W/m^3 1 -1 -3 | W/(m*K) 1 1 -3 -1 | W/(m^2*K) 1 0 -3 -1 | K/W -1 -2 3 1
    """
    found = {}
    for entry in texts.replace("\n", "|").split("|"):
        name, *powers = entry.split() or [""]
        if name:
            found[Dimension.of(dict(zip(BASES, map(int, powers), strict=False)))] = name
    return found


NONE = Dimension()
NAMED = _named()


def unknown(name: str) -> Dimension:
    """A dimension of its own for a port that takes any."""
    return Dimension.of({f"?{name}": 1})

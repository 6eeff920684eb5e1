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
        for per, below in DENOMINATORS.items():
            for name, powers in NAMED.items():
                if self == Dimension.of(powers).divide(Dimension.of(below)):
                    return f"{name}/{per}" if per else name
        above = [_factor(name, power) for name, power in self.powers if power > 0]
        below_texts = [_factor(name, -power) for name, power in self.powers if power < 0]
        top = "*".join(above) or "1"
        if not below_texts:
            return top
        bottom = "*".join(below_texts)
        return f"{top}/({bottom})" if len(below_texts) > 1 else f"{top}/{bottom}"


def _factor(name: str, power: Fraction) -> str:
    shown = f"what {name[1:]} is in" if name.startswith("?") else name
    if power == 1:
        return shown
    return f"{shown}^{power}" if power.denominator == 1 else f"{shown}^({power})"


NONE = Dimension()
NAMED: dict[str, dict[str, int]] = {
    "W": {"kg": 1, "m": 2, "s": -3},
    "J": {"kg": 1, "m": 2, "s": -2},
    "Pa": {"kg": 1, "m": -1, "s": -2},
    "N": {"kg": 1, "m": 1, "s": -2},
}
DENOMINATORS: dict[str, dict[str, int]] = {
    "": {},
    "K": {"K": 1},
    "(m^2*K)": {"m": 2, "K": 1},
    "m^3": {"m": 3},
    "kg": {"kg": 1},
    "(kg*K)": {"kg": 1, "K": 1},
    "mol": {"mol": 1},
    "(mol*K)": {"mol": 1, "K": 1},
}


def unknown(name: str) -> Dimension:
    """A dimension of its own for a port that takes any."""
    return Dimension.of({f"?{name}": 1})

"""Physical dimensions as products of powers of base dimensions and of unknown ones."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction


@dataclass(frozen=True, slots=True)
class Dimension:
    """Powers of base symbols (`kg m s K mol A`, `?name` for an unknown one), sorted by symbol, zeros left out."""

    powers: tuple[tuple[str, Fraction], ...] = ()

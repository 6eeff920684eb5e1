"""Units of process engineering: text to factor, offset and dimension, with an allow-list."""

from __future__ import annotations

from dataclasses import dataclass

from loopsim.language.dimensions import Dimension


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit: SI value = number * factor + offset; `point` marks a place on a shifted scale (degC, bar(a), bar(g))."""

    text: str
    factor: float
    offset: float
    dimension: Dimension
    point: bool = False

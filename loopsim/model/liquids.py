"""Density and heat capacity of liquids that a plant may name: `liquid: {is: water, at: 60 degC}`."""

from __future__ import annotations

import bisect

from loopsim.documents.types import Liquid
from loopsim.errors import fail, nearest

KELVIN = 273.15

# Water at 101.325 kPa: temperature [degC], density [kg/m^3], heat capacity [J/(kg*K)].
# Source: IAPWS-IF97, region 1 (computed with a property library; the tests hold it against printed values).
WATER = (
    (0.01, 999.845, 4219.4),
    (4.0, 999.975, 4207.4),
    (10.0, 999.702, 4195.4),
    (15.0, 999.101, 4189.1),
    (20.0, 998.206, 4184.8),
    (25.0, 997.048, 4181.9),
    (30.0, 995.652, 4180.0),
    (35.0, 994.039, 4178.9),
    (40.0, 992.224, 4178.6),
    (45.0, 990.223, 4178.8),
    (50.0, 988.047, 4179.6),
    (55.0, 985.707, 4180.9),
    (60.0, 983.211, 4182.8),
    (65.0, 980.566, 4185.2),
    (70.0, 977.779, 4188.1),
    (75.0, 974.857, 4191.5),
    (80.0, 971.803, 4195.5),
    (85.0, 968.622, 4200.0),
    (90.0, 965.319, 4205.0),
    (95.0, 961.895, 4210.6),
    (99.0, 959.072, 4215.4),
)
LIQUIDS = {"water": WATER}
PROPERTIES = ("rho", "cp", "rho_cp", "density", "heat_capacity")


def property_of(liquid: Liquid | None, name: str) -> float | None:
    """The value in SI of a parameter called `rho`, `cp`, `rho_cp`, `density` or `heat_capacity`; None for others."""
    if liquid is None or name not in PROPERTIES:
        return None
    if liquid.name not in LIQUIDS:
        raise fail(f"the liquid '{liquid.name}' is not known", liquid.where, nearest(liquid.name, LIQUIDS, "liquids"))
    density, heat_capacity = _at(LIQUIDS[liquid.name], liquid)
    values = {"rho": density, "density": density, "cp": heat_capacity, "heat_capacity": heat_capacity}
    return values.get(name, density * heat_capacity)


def _at(table: tuple[tuple[float, float, float], ...], liquid: Liquid) -> tuple[float, float]:
    """Straight lines between the points of the table; outside it an error."""
    assert liquid.at.unit is not None
    degrees = liquid.at.value * liquid.at.unit.factor + liquid.at.unit.offset - KELVIN
    if not table[0][0] <= degrees <= table[-1][0]:
        raise fail(
            f"{liquid.name} at {liquid.at.text} is outside the table ({table[0][0]:g} to {table[-1][0]:g} degC)",
            liquid.at.where,
            "give rho and cp in the blocks instead",
        )
    above = min(max(bisect.bisect_right([row[0] for row in table], degrees), 1), len(table) - 1)
    low, high = table[above - 1], table[above]
    share = (degrees - low[0]) / (high[0] - low[0])
    return low[1] + share * (high[1] - low[1]), low[2] + share * (high[2] - low[2])

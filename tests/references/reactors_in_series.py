"""Two stirred tanks in series with a second-order reaction: V*dc/dt = q*(c_in - c) - V*k*c^2 in each.

At rest c = (-q/V + sqrt((q/V)^2 + 4*k*(q/V)*c_in))/(2*k). With constant inputs the first tank is a Riccati
equation, with roots c1 > c2 of k*c^2 + (q/V)*c - (q/V)*c_in = 0: (c - c1)/(c - c2) fades as exp(-k*(c1 - c2)*t).
The second tank is driven by the first and integrated, restarted at each step of the inputs.
V = 1.2 and 0.8 m³, k = 0.5 L/(mol*min), q = 6 -> 9 m³/h at 5 min, c_in = 1.5 -> 2.1 mol/L at 31 min.

Trust: first tank by formula; both by DOP853 and by Radau (implicit) agree.
"""

from __future__ import annotations

import math

from reference_tools import FloatArray, Table, instants, integrate, largest_difference, main

NAME = "reactors_in_series"
V1, V2, K = 1.2, 0.8, 0.5 / 60.0  # m^3, m^3, L/(mol*s); concentrations in mol/L
STAGES = [(0.0, 6.0 / 3600.0, 1.5), (300.0, 9.0 / 3600.0, 1.5), (1860.0, 9.0 / 3600.0, 2.1)]
END, EVERY = 3600.0, 20.0


def roots(dilution: float, c_in: float) -> tuple[float, float]:
    """Both roots [mol/L] of the balance at rest; dilution q/V [1/s]."""
    spread = math.sqrt(dilution * dilution + 4.0 * K * dilution * c_in)
    return (spread - dilution) / (2.0 * K), (-spread - dilution) / (2.0 * K)


def riccati(c: float, dilution: float, c_in: float, length: float) -> float:
    """First tank after a stretch with constant inputs."""
    high, low = roots(dilution, c_in)
    share = (c - high) / (c - low) * math.exp(-K * (high - low) * length)
    return (high - share * low) / (1.0 - share)


def step(c: tuple[float, float], q: float, c_in: float, length: float, way: str) -> tuple[float, float]:
    """Both tanks after a stretch; the second sees the first by formula, or both are integrated."""
    if way == "formula":

        def second(t: float, z: FloatArray) -> list[float]:
            return [q / V2 * (riccati(c[0], q / V1, c_in, t) - z[0]) - K * z[0] ** 2]

        return riccati(c[0], q / V1, c_in, length), float(integrate(second, 0.0, length, [c[1]]).last[0])

    def both(_: float, z: FloatArray) -> list[float]:
        return [q / V1 * (c_in - z[0]) - K * z[0] ** 2, q / V2 * (z[0] - z[1]) - K * z[1] ** 2]

    last = integrate(both, 0.0, length, c, method="Radau" if way == "Radau" else "DOP853").last
    return float(last[0]), float(last[1])


def _table(way: str) -> Table:
    time, rows = instants(END, EVERY), []
    _, q, c_in = STAGES[0]
    first = roots(q / V1, c_in)[0]
    c = (first, roots(q / V2, first)[0])
    points = sorted({*time, *(one[0] for one in STAGES)})
    for begin, end in zip(points, [*points[1:], END], strict=True):
        _, q, c_in = [one for one in STAGES if one[0] <= begin][-1]
        if begin in time:
            rows.append(c)
        if end > begin:
            c = step(c, q, c_in, end - begin, way)
    table = Table(NAME, f"{NAME}/scenario.yaml", "none", "Riccati formula, second tank DOP853", time)
    table.add("R-1.c", "mol/L", [1000.0 * row[0] for row in rows])
    table.add("R-2.c", "mol/L", [1000.0 * row[1] for row in rows])
    table.add("R-2.rate", "mol/(L*min)", [1000.0 * K * row[1] ** 2 for row in rows])
    return table


def tables() -> list[Table]:
    """The table of this case."""
    return [_table("formula")]


def verify() -> float:
    """Formula, explicit and implicit integration."""
    first = _table("formula")
    return max(largest_difference(first, _table(way)) for way in ("DOP853", "Radau"))


if __name__ == "__main__":
    main(tables, verify)

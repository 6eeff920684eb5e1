"""Stirred, heated tank whose content varies: d(rho*cp*V*T)/dt = rho*cp*(q_in*T_in - q_out*T) + Q, dV/dt = q_in - q_out.

Taken apart by the mass balance: V*dT/dt = q_in*(T_in - T) + Q/(rho*cp).
With constant inputs and n = q_in - q_out: V = V0 + n*t and, with T* = T_in + Q/(rho*cp*q_in),
T - T* = (T0 - T*)*(V/V0)^(-q_in/n); for n = 0 exp(-q_in*t/V0); with nothing flowing in T rises with Q alone.
The feed temperature also ramps for a while: those stretches have no such formula and are integrated.
Start at rest: V = 1 m³, in = out = 2 m³/h, T = T*.

Trust: the constant stretches by formula, the whole by DOP853 on T, and by DOP853 on the heat content U = V*T as the
balance is written (T = U/V): three ways that share no algebra.
"""

from __future__ import annotations

import math

from reference_tools import FloatArray, Table, instants, integrate, largest_difference, main

NAME = "filling_tank"
A, RHO, CP = 0.9, 998.0, 4182.0
# from [s]: in, out [m^3/h], heat [kW]
STAGES = [(0.0, 2.0, 2.0, 60.0), (120.0, 6.0, 2.0, 60.0), (600.0, 6.0, 2.0, 150.0), (1200.0, 0.0, 4.0, 150.0),
          (1800.0, 3.0, 3.0, 90.0), (2700.0, 1.5, 3.0, 20.0)]  # fmt: skip
RAMP = (2000.0, 2600.0, 288.15, 300.15)  # feed temperature: begin, end [s], from, to [K]
END, EVERY = 3600.0, 20.0


def stage(time: float) -> tuple[float, float, float]:
    """Flows [m^3/s] and heat/(rho*cp) [m^3*K/s] from `time` on."""
    _, q_in, q_out, heat = [one for one in STAGES if one[0] <= time][-1]
    return q_in / 3600.0, q_out / 3600.0, 1000.0 * heat / (RHO * CP)


def feed(time: float) -> float:
    """Feed temperature [K]."""
    begin, end, low, high = RAMP
    return low + (high - low) * min(max((time - begin) / (end - begin), 0.0), 1.0)


def start() -> tuple[float, float]:
    """Volume [m^3] and temperature [K] at rest."""
    q_in, _, heat = stage(0.0)
    return 1.0, feed(0.0) + heat / q_in


def formula(V: float, T: float, begin: float, length: float) -> float:
    """Temperature after a stretch with constant inputs."""
    q_in, q_out, heat = stage(begin)
    net = q_in - q_out
    if q_in == 0.0:
        return T + (heat / net * math.log((V + net * length) / V) if net else heat * length / V)
    rest = feed(begin) + heat / q_in
    fade = (1.0 + net * length / V) ** (-q_in / net) if net else math.exp(-q_in * length / V)
    return rest + (T - rest) * fade


def step(V: float, T: float, begin: float, end: float, way: str) -> tuple[float, float]:
    """Volume and temperature after a stretch, one of three ways."""
    q_in, q_out, heat = stage(begin)
    ramps = RAMP[0] <= begin < RAMP[1]
    if way == "formula" and not ramps:
        return V + (q_in - q_out) * (end - begin), formula(V, T, begin, end - begin)
    if way == "content":

        def content(t: float, z: FloatArray) -> list[float]:
            return [q_in - q_out, q_in * feed(t) / 100.0 - q_out * z[1] / z[0] + heat / 100.0]

        last = integrate(content, begin, end, [V, V * T / 100.0]).last
        return float(last[0]), 100.0 * float(last[1] / last[0])

    def temperature(t: float, z: FloatArray) -> list[float]:
        return [q_in - q_out, (q_in * (feed(t) / 100.0 - z[1]) + heat / 100.0) / z[0]]

    last = integrate(temperature, begin, end, [V, T / 100.0]).last
    return float(last[0]), 100.0 * float(last[1])


def _table(way: str) -> Table:
    time, (V, T), rows = instants(END, EVERY), start(), []
    points = sorted({*time, *(one[0] for one in STAGES), *RAMP[:2]})
    for begin, end in zip(points, [*points[1:], END], strict=True):
        if begin in time:
            rows.append((V, T))
        if end > begin:
            V, T = step(V, T, begin, end, way)
    table = Table(NAME, f"{NAME}/scenario.yaml", "none", "closed form, DOP853 during the ramp", time)
    table.add("tank.V", "m^3", [row[0] for row in rows])
    table.add("tank.h", "m", [row[0] / A for row in rows])
    table.add("tank.T", "degC", [row[1] for row in rows])
    return table


def tables() -> list[Table]:
    """The table of this case."""
    return [_table("formula")]


def verify() -> float:
    """The three ways."""
    first = _table("formula")
    return max(largest_difference(first, _table("content")), largest_difference(first, _table("temperature")))


if __name__ == "__main__":
    main(tables, verify)

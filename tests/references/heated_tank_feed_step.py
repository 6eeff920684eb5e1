"""Heated tank without control: the feed turns cold by a step, later the flow rises by a step. Closed form.

Equation: rho*cp*V*dT/dt = rho*cp*q*(T_in - T) + Q - UA*(T - T_room).
With constant inputs T goes to T_rest = (rho*cp*q*T_in + Q + UA*T_room)/(rho*cp*q + UA) as exp(-t/tau),
tau = rho*cp*V/(rho*cp*q + UA). Each step starts a new exponential from where the last one stood.
The run starts at rest.

Trust: the closed form against a tight numerical integration of the balance, restarted at each step.
"""

from __future__ import annotations

import math

from reference_tools import FloatArray, Table, instants, integrate, largest_difference, main

NAME = "heated_tank_feed_step"
V, RHO, CP, UA = 1.8, 998.0, 4182.0, 260.0
ROOM, Q = 293.15, 150e3
# from [s]: flow [m^3/s], feed temperature [K]
STAGES = [(0.0, 3.0 / 3600.0, 285.15), (300.0, 3.0 / 3600.0, 280.15), (2400.0, 4.2 / 3600.0, 280.15)]
END, EVERY = 5400.0, 30.0


def at_rest(q: float, feed: float) -> float:
    """Temperature [K] that the tank goes to."""
    flow = RHO * CP * q
    return (flow * feed + Q + UA * ROOM) / (flow + UA)


def closed_form(time: float) -> float:
    """Temperature [K] at a time [s]."""
    temperature = at_rest(*STAGES[0][1:])
    ends = [stage[0] for stage in STAGES[1:]] + [math.inf]
    for (begin, q, feed), end in zip(STAGES, ends, strict=True):
        if time <= begin:
            break
        tau = RHO * CP * V / (RHO * CP * q + UA)
        rest = at_rest(q, feed)
        temperature = rest + (temperature - rest) * math.exp(-(min(time, end) - begin) / tau)
    return temperature


def by_integration(time: list[float]) -> list[float]:
    """The same by DOP853."""
    temperature, found = at_rest(*STAGES[0][1:]), {}
    ends = [stage[0] for stage in STAGES[1:]] + [END]
    for (begin, q, feed), end in zip(STAGES, ends, strict=True):
        flow = RHO * CP * q

        def rates(_: float, x: FloatArray, flow: float = flow, feed: float = feed) -> list[float]:
            return [(flow * (feed - x[0]) + Q - UA * (x[0] - ROOM)) / (RHO * CP * V)]

        piece = integrate(rates, begin, end, [temperature])
        found.update({one: float(piece(one)[0]) for one in time if begin <= one <= end})
        temperature = float(piece.last[0])
    return [found[one] for one in time]


def _table(temperatures: list[float], method: str) -> Table:
    table = Table(NAME, f"{NAME}/scenario.yaml", "none", method, instants(END, EVERY))
    table.add("tank.T", "degC", temperatures)
    table.add("tank.loss", "kW", [UA * (temperature - ROOM) for temperature in temperatures])
    return table


def tables() -> list[Table]:
    """The table of this case."""
    return [_table([closed_form(time) for time in instants(END, EVERY)], "closed form")]


def verify() -> float:
    """Closed form against integration."""
    return largest_difference(tables()[0], _table(by_integration(instants(END, EVERY)), "DOP853"))


if __name__ == "__main__":
    main(tables, verify)

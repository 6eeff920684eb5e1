"""Full pipe through changes of flow, a stop and a restart; a stirred tank behind it. By characteristics, closed form.

What leaves at t entered at s(t), where W(s) = W(t) - V and W(t) is the volume that has flowed since t = 0; before t = 0
the pipe is full of the first feed. The flow is piecewise constant, so s is piecewise linear: ds/dt = q(t)/q(s).
Feed: a base that ramps (linear), with a short pulse on it. While the flow stands the feed goes on moving; the liquid on
the two sides of that instant then differs, and the outlet jumps when the seam arrives.
Tank behind the pipe: V_tank*dT/dt = q*(T_pipe - T). Between break points the pipe's outlet is a + b*t, so with
tau = V_tank/q, T = a + b*(t - tau) + (T0 - a - b*(t0 - tau))*exp(-(t - t0)/tau); with q = 0 it stands.

Trust: s(t) by formula against a bisection on W; the tank by formula against DOP853. Instants at which the outlet jumps
are none of the tabulated ones (asserted).
"""

from __future__ import annotations

import bisect
import math
from itertools import pairwise

from reference_tools import FloatArray, Table, instants, integrate, largest_difference, main

NAME = "pipe_flow_change"
V_PIPE, V_TANK = 0.150, 0.5
FLOWS = [(0.0, 3.0), (600.0, 4.2), (1500.0, 3.0), (2400.0, 0.0), (3007.0, 3.0)]  # from [s], [m^3/h]
RAMP = (300.0, 3900.0, 285.15, 313.15)  # begin, end [s], from, to [K]
PULSE = (2287.0, 2371.0, 3.0)  # begin, end [s], size [K]
END, EVERY = 4800.0, 20.0

BEGINS = [begin for begin, _ in FLOWS]
VOLUMES = [0.0]
for (_begin, _flow), (_end, _) in pairwise(FLOWS):
    VOLUMES.append(VOLUMES[-1] + _flow / 3600.0 * (_end - _begin))


def flow(time: float) -> float:
    """Flow [m^3/s] from `time` on."""
    return FLOWS[max(bisect.bisect_right(BEGINS, time) - 1, 0)][1] / 3600.0


def volume(time: float) -> float:
    """Volume [m^3] that has flowed since the start; before it, the first flow is thought to go on backwards."""
    stage = max(bisect.bisect_right(BEGINS, time) - 1, 0)
    return VOLUMES[stage] + FLOWS[stage][1] / 3600.0 * (time - BEGINS[stage])


def entered(time: float) -> float:
    """When [s] the liquid entered that leaves just after `time`: the latest s with W(s) = W(t) - V."""
    wanted = volume(time) - V_PIPE
    if wanted < 0.0:
        return wanted / flow(0.0)
    stage = bisect.bisect_right(VOLUMES, wanted) - 1
    return BEGINS[stage] + (wanted - VOLUMES[stage]) / (FLOWS[stage][1] / 3600.0)


def feed(time: float) -> float:
    """Feed temperature [K] from `time` on."""
    begin, end, low, high = RAMP
    base = low + (high - low) * min(max((time - begin) / (end - begin), 0.0), 1.0)
    return base + (PULSE[2] if PULSE[0] <= time < PULSE[1] else 0.0)


def arrival(entry: float) -> float:
    """When [s] liquid that entered at `entry` leaves."""
    wanted = volume(entry) + V_PIPE
    stage = bisect.bisect_left(VOLUMES, wanted) - 1
    return BEGINS[stage] + (wanted - VOLUMES[stage]) / (FLOWS[stage][1] / 3600.0)


def break_points() -> list[float]:
    """All instants [s] at which the flow, or the way the outlet moves, changes."""
    sources = [*BEGINS, *RAMP[:2], *PULSE[:2]]
    points = {*BEGINS, *(arrival(source) for source in sources), END}
    return sorted(point for point in points if point <= END)


def jumps() -> list[float]:
    """Instants [s] at which the outlet jumps: both edges of the pulse, and the seam of the stop."""
    return [arrival(PULSE[0]), arrival(PULSE[1]), arrival(2400.0)]


def tank_by_formula(time: list[float]) -> list[float]:
    """Tank temperature [K], formula by formula between break points."""
    points = break_points()
    temperature, found = feed(0.0), {0.0: feed(0.0)}
    for begin, end in pairwise(points):
        q, middle = flow(begin), 0.5 * (begin + end)
        first = _on_line(begin, begin, middle)
        slope = (feed(entered(middle)) - first) / (middle - begin)

        def at(moment: float, q: float = q, first: float = first, slope: float = slope, begin: float = begin) -> float:
            if q == 0.0:
                return temperature  # noqa: B023  (used before the loop goes on)
            tau = V_TANK / q
            fade = math.exp(-(moment - begin) / tau)
            return first + slope * (moment - begin - tau) + (temperature - first + slope * tau) * fade  # noqa: B023

        found.update({one: at(one) for one in time if begin < one <= end})
        temperature = at(end)
    return [found[one] for one in time]


def _on_line(time: float, begin: float, middle: float) -> float:
    """The outlet just after `begin`, from two points inside the stretch, where it is a straight line."""
    near, far = feed(entered(0.5 * (begin + middle))), feed(entered(middle))
    return far + (near - far) * (time - middle) / (0.5 * (begin + middle) - middle)


def tank_by_integration(time: list[float]) -> list[float]:
    """The same by DOP853, the outlet found by bisection on W."""
    points = break_points()
    temperature, found = feed(0.0), {0.0: feed(0.0)}
    for begin, end in pairwise(points):
        q, inside = flow(begin), 1e-9 * (end - begin)

        def rates(
            t: float, x: FloatArray, q: float = q, low: float = begin + inside, high: float = end - inside
        ) -> list[float]:
            outlet = feed(_bisected(min(max(t, low), high)))
            return [q / V_TANK * (outlet - x[0])]

        piece = integrate(rates, begin, end, [temperature])
        found.update({one: float(piece(one)[0]) for one in time if begin < one <= end})
        temperature = float(piece.last[0])
    return [found[one] for one in time]


def _bisected(time: float) -> float:
    """s with W(s) = W(t) - V, by halving: uses only `volume`."""
    wanted, low, high = volume(time) - V_PIPE, -1000.0, time
    while high - low > 1e-11:
        middle = 0.5 * (low + high)
        low, high = (low, middle) if volume(middle) > wanted else (middle, high)
    return low


def _table(tank: list[float], pipe: list[float], method: str) -> Table:
    table = Table(NAME, f"{NAME}/scenario.yaml", "none", method, instants(END, EVERY))
    table.add("line.T", "degC", pipe)
    table.add("tank.T", "degC", tank)
    return table


def tables() -> list[Table]:
    """The table of this case."""
    time = instants(END, EVERY)
    if any(abs(jump - one) < 1.0 for jump in jumps() for one in time):
        raise ValueError("an instant of the table is too close to a jump of the outlet")
    return [_table(tank_by_formula(time), [feed(entered(one)) for one in time], "characteristics, closed form")]


def verify() -> float:
    """Formula against bisection and integration."""
    time = instants(END, EVERY)
    other = _table(tank_by_integration(time), [feed(_bisected(one)) for one in time], "bisection, DOP853")
    return largest_difference(tables()[0], other)


if __name__ == "__main__":
    main(tables, verify)

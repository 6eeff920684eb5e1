"""Tank that runs empty and fills again under level control, then overflows while the controller is in manual.

A*dh/dt = q_in - q_out between empty and full. Empty (h = 0) and q_in < q_out: the level stays, what arrives leaves.
Full (h = h_max) and q_in > q_out: the level stays, the surplus overflows. It leaves a bound when the surplus turns.
Inflow: linear valve, dx/dt = clip((signal - x)/positioner, ±1/stroke_time), q_in = q_max*x. Level transmitter: lag 3 s.
Controller: PI, reverse, 0 to 2 m, gain 2, 10 min, scan 5 s, the written law (`windup: hold`).

Between scans x is a straight line, then an exponential, so the volume is known by formula; with the exponentials of
the transmitter everything is. Only the instants at which a bound is met or left are found numerically (brentq on the
formula, to rounding).

Trust: the formulas against DOP853 restarted at the same discontinuities with its own event location.
Asserted: the tank is empty for a while and overflows for a while.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field

from reference_controller import Controller
from reference_tools import FloatArray, Table, instants, integrate, largest_difference, main
from scipy.optimize import brentq

NAME = "level_empties"
A, H_MAX, Q_MAX = 0.8, 1.8, 10.0 / 3600.0
STROKE, POSITIONER, LAG = 20.0, 1.0, 3.0
SPAN, SCAN, END, EVERY = 2.0, 5.0, 6600.0, 10.0
DEMANDS = [(0.0, 5.0 / 3600.0), (302.0, 14.0 / 3600.0), (1502.0, 4.0 / 3600.0)]
MANUAL, AUTO, MANUAL_OUTPUT = 3603.0, 4503.0, 0.90
SET_POINT = 1.0

Row = tuple[float, float, float, float]  # level [m], reading [m], position, overflow [m^3/s]


@dataclass
class Plant:
    """The plant as it stands: level, reading, position, valve signal; where it was at the instants of the table."""

    exact: bool
    level: float = SET_POINT
    reading: float = SET_POINT
    position: float = DEMANDS[0][1] / Q_MAX
    signal: float = DEMANDS[0][1] / Q_MAX
    rows: dict[float, Row] = field(default_factory=dict)
    empty: float = 0.0
    full: float = 0.0

    def advance(self, begin: float, end: float, demand: float) -> None:
        """Move on with signal and demand held."""
        while begin < end:
            gap, speed, until = self.signal - self.position, 0.0, end
            limited = (abs(gap) - POSITIONER / STROKE) * STROKE
            if limited > 1e-12:
                speed, until = math.copysign(1.0 / STROKE, gap), min(end, begin + limited)
            begin = self._stretch(begin, until, speed, demand)

    def _stretch(self, begin: float, end: float, speed: float, demand: float) -> float:
        """One stretch on which the position is smooth, cut where a bound is met or left; returns where it was cut."""
        gap = self.signal - self.position

        def moved(s: float) -> float:
            """How far the position has moved s after `begin`."""
            return speed * s if speed else -gap * math.expm1(-s / POSITIONER)

        def filled(s: float) -> float:
            """Integral of `moved`."""
            return 0.5 * speed * s * s if speed else gap * (s + POSITIONER * math.expm1(-s / POSITIONER))

        x, h = self.position, self.level

        def surplus(s: float) -> float:
            return Q_MAX * (x + moved(s)) - demand

        def level(s: float) -> float:
            return h + (surplus(0.0) * s + Q_MAX * filled(s)) / A

        stands = (h <= 0.0 and surplus(0.0) < 0.0) or (h >= H_MAX and surplus(0.0) > 0.0)
        length = self._cut(end - begin, stands, surplus, level)
        self.empty += length if stands and h <= 0.0 else 0.0
        self.full += length if stands and h >= H_MAX else 0.0
        if self.exact:
            moves = (0.0, 0.0, 0.0) if stands else (surplus(0.0), speed, gap)
            reading = _lagged(length, h, self.reading, *moves)
            after = [x + moved(length), h if stands else level(length), reading]
        else:
            after = self._integrated(length, stands, demand, speed)
        self.position, self.level, self.reading = after
        for bound in (0.0, H_MAX):
            if abs(self.level - bound) < 1e-10:
                self.level = bound
        return end if length == end - begin else begin + length

    def _integrated(self, length: float, stands: bool, demand: float, speed: float) -> list[float]:
        """Position, level and reading after `length` by DOP853 on the balances as they are written."""

        def rates(_: float, z: FloatArray) -> list[float]:
            x, h, r = z
            move = speed or (self.signal - x) / POSITIONER
            return [move, 0.0 if stands else (Q_MAX * x - demand) / A, (h - r) / LAG]

        start = [self.position, self.level, self.reading]
        return [float(part) for part in integrate(rates, 0.0, length, start).last] if length > 0.0 else start

    def _cut(
        self, length: float, stands: bool, surplus: Callable[[float], float], level: Callable[[float], float]
    ) -> float:
        """When the bound is left (the surplus turns), or met (level passes it)."""
        if stands:
            turns = surplus(0.0) * surplus(length) < 0.0
            return float(brentq(surplus, 0.0, length, xtol=1e-14, rtol=1e-14)) if turns else length
        for bound in (0.0, H_MAX):
            inside, outside = level(0.0) - bound, level(length) - bound
            if inside * outside < 0.0 and abs(inside) > 1e-12:
                return float(brentq(lambda s, bound=bound: level(s) - bound, 0.0, length, xtol=1e-14, rtol=1e-14))
        return length


def _lagged(s: float, h: float, r: float, surplus: float, speed: float, gap: float) -> float:
    """Reading s after the start of a stretch: response of a lag to a polynomial and an exponential, term by term.

    h(t) = c0 + c1*t + c2*t^2 + e*exp(-t/positioner).
    """
    c0, c1, c2, e = h, surplus / A, 0.0, 0.0
    if speed:
        c2 = 0.5 * Q_MAX * speed / A
    else:
        c1 += Q_MAX * gap / A
        e = Q_MAX * gap * POSITIONER / A
        c0 -= e
    settled = c0 - c1 * LAG + 2.0 * c2 * LAG * LAG
    wave = e / (1.0 - LAG / POSITIONER)
    fade = math.exp(-s / LAG)
    line = settled + (c1 - 2.0 * c2 * LAG) * s + c2 * s * s
    return line + wave * math.exp(-s / POSITIONER) + (r - settled - wave) * fade


def run(exact: bool) -> tuple[Plant, dict[float, float]]:
    """The whole run: plant, and the output as it stands at the instants of the table."""
    time, plant = instants(END, EVERY), Plant(exact)
    controller = Controller(2.0, 600.0, output=plant.signal, I=plant.signal)
    scans = {number * SCAN for number in range(round(END / SCAN) + 1)}
    points = sorted(scans | {MANUAL, AUTO} | {begin for begin, _ in DEMANDS} | set(time))
    outputs: dict[float, float] = {}
    for begin, end in zip(points, [*points[1:], END], strict=True):
        if begin in (MANUAL, AUTO):
            controller.manual = begin == MANUAL
            controller.output = MANUAL_OUTPUT if begin == MANUAL else controller.output
        if begin in scans:
            controller.scan(SCAN, SET_POINT / SPAN, plant.reading / SPAN)
        plant.signal = controller.output
        demand = [value for start, value in DEMANDS if start <= begin][-1]
        if begin in time:
            overflow = max(Q_MAX * plant.position - demand, 0.0) if plant.level >= H_MAX else 0.0
            plant.rows[begin] = (plant.level, plant.reading, plant.position, overflow)
            outputs[begin] = controller.output
        plant.advance(begin, end, demand)
    if min(plant.empty, plant.full) < 60.0:
        raise ArithmeticError(f"empty for {plant.empty} s, full for {plant.full} s: the case wants both")
    return plant, outputs


def _table(exact: bool) -> Table:
    plant, outputs = run(exact)
    time = instants(END, EVERY)
    rows = [plant.rows[one] for one in time]
    table = Table(NAME, f"{NAME}/scenario.yaml", "feedback", "closed form from scan to scan", time)
    table.add("tank.h", "m", [row[0] for row in rows])
    table.add("tank.V", "m^3", [A * row[0] for row in rows])
    table.add("tank.overflow", "m^3/h", [row[3] for row in rows])
    table.add("LT-1.pv", "m", [row[1] for row in rows])
    table.add("LV-1.position", "%", [row[2] for row in rows])
    table.add("LIC-1.out", "%", [outputs[one] for one in time])
    return table


def tables() -> list[Table]:
    """The table of this case."""
    return [_table(True)]


def verify() -> float:
    """Formula against DOP853."""
    return largest_difference(_table(True), _table(False))


if __name__ == "__main__":
    main(tables, verify)

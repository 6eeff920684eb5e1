"""Wash-water heater under feedback, whole instrument chain, noise off: a flow step, later a set-point step.

Chain: PI output (scan 2 s) -> valve (dead time 3 s, linear, stroke 12 s, positioner lag 0.5 s) -> steam coil (lag 20 s,
320 kW open at the design header pressure) -> stirred tank 1.8 m³ -> sample leg -> thermowell 35 s -> controller.
dx/dt = clip((s(t - 3 s) - x)/positioner, ±1/stroke_time); lag_c*dQ/dt = power*x - Q;
V*dT/dt = q*(T_in - T) + Q/(rho*cp); thermowell dM/dt = (T(leg) - M)/35 s.
Sample leg, two variants: a dead time of 45 s; and a pipe of 37.5 L with the tank's outflow through it, so 45 s at
3 m³/h and 32.1 s at 4.2 m³/h, with the liquid that is in the pipe at the change carried on (W(s) = W(t) - volume).
Flow 3 -> 4.2 m³/h at 304.5 s; set point 55 -> 58 degC at 1501 s, where the output jumps by a third of the stroke.

Method: with the valve signal held, (x, Q, T, 1) is linear with constant input in each of the two modes of the valve
(stroke speed, lag), so it moves by matrix exponentials. The liquid at the end of the leg left the tank at s(t), and s
moves at the rate q(t)/q(s) (1 for the dead time), which is piecewise constant: (x, Q, T)(s), M is linear too and moves
by exponentials over the same stretches. Nothing is interpolated.

Trust: beyond the flow step (pipe) and the set-point step (dead time) against DOP853 restarted at every discontinuity,
the leg's content read from its dense output. Asserted: stroke speed is met.
"""

from __future__ import annotations

import bisect
import math
from dataclasses import dataclass

import numpy as np
from reference_controller import Controller
from reference_tools import FloatArray, Piece, Table, instants, integrate, largest_difference, main
from scipy.linalg import expm

NAME = "wash_water_heater"
V, RHO, CP, POWER, FEED = 1.8, 998.0, 4182.0, 320e3, 12.0
STROKE, POSITIONER, VALVE_DEAD_TIME, COIL, WELL = 12.0, 0.5, 3.0, 20.0, 35.0
LEG_TIME, LEG_VOLUME = 45.0, 0.0375
GAIN, INTEGRAL, SCAN = 10.9, 700.0, 2.0
FLOWS = [(0.0, 3.0 / 3600.0), (304.5, 4.2 / 3600.0)]
SET_POINTS = [(0.0, 55.0), (1501.0, 58.0)]
END, EVERY = 3300.0, 5.0
START_Q = RHO * CP * FLOWS[0][1] * (SET_POINTS[0][1] - FEED)


def in_force(steps: list[tuple[float, float]], time: float) -> float:
    """The value from `time` on."""
    return [value for begin, value in steps if begin <= time][-1]


def chain(speed: float, target: float, q: float) -> FloatArray:
    """Rates of (x, Q/power, T [degC], 1)."""
    valve = [0.0, 0.0, 0.0, speed] if speed else [-1.0 / POSITIONER, 0.0, 0.0, target / POSITIONER]
    coil = [1.0 / COIL, -1.0 / COIL, 0.0, 0.0]
    tank = [0.0, POWER / (RHO * CP * V), -q / V, q * FEED / V]
    return np.array([valve, coil, tank, [0.0, 0.0, 0.0, 0.0]])


@dataclass(frozen=True)
class Stretch:
    """One stretch of the chain: from when, the state there, its rates, the flow."""

    begin: float
    state: FloatArray
    rates: FloatArray
    flow: float


class Heater:
    """Chain, leg and thermowell, moved on by matrix exponentials. `leg`: `dead_time` or `pipe`."""

    def __init__(self, leg: str) -> None:
        self.leg = leg
        opening = START_Q / POWER
        rest = np.array([opening, opening, SET_POINTS[0][1], 1.0])
        q = FLOWS[0][1]
        self.stretches = [Stretch(-1000.0, rest, np.zeros((4, 4)), q)]
        self.time, self.state = 0.0, rest
        self.read_time, self.reading, self.source = 0.0, SET_POINTS[0][1], -LEG_TIME
        self.stroke_speed = 0.0

    def advance(self, end: float, target: float) -> None:
        """Move the chain on to `end` with a constant valve target and flow."""
        q = in_force(FLOWS, self.time)
        while self.time < end:
            gap, speed, until = target - float(self.state[0]), 0.0, end
            limited = (abs(gap) - POSITIONER / STROKE) * STROKE
            if limited > 1e-12:
                speed, until = math.copysign(1.0 / STROKE, gap), min(end, self.time + limited)
                self.stroke_speed += until - self.time
            rates = chain(speed, target, q)
            self.stretches.append(Stretch(self.time, self.state, rates, q))
            self.state = expm(rates * (until - self.time)) @ self.state
            self.time = until

    def read(self, end: float) -> float:
        """The thermowell's temperature at `end`; the chain must have come far enough."""
        begins = [stretch.begin for stretch in self.stretches[-200:]]
        offset = len(self.stretches) - len(begins)
        while self.read_time < end:
            place = offset + bisect.bisect_right(begins, self.source + 1e-12) - 1
            stretch = self.stretches[place]
            rate = self._rate(stretch.flow)
            change = FLOWS[1][0]
            length = (change if self.read_time < change < end else end) - self.read_time
            if place + 1 < len(self.stretches):
                length = min(length, (self.stretches[place + 1].begin - self.source) / rate)
            self._well(stretch, rate, length)
        return self.reading

    def _rate(self, flow_at_entry: float) -> float:
        """ds/dt of the liquid that leaves the leg."""
        return 1.0 if self.leg == "dead_time" else in_force(FLOWS, self.read_time) / flow_at_entry

    def _well(self, stretch: Stretch, rate: float, length: float) -> None:
        """Move (x, Q, T, 1)(s) and the reading on over one stretch."""
        there = expm(stretch.rates * max(self.source - stretch.begin, 0.0)) @ stretch.state
        both = np.zeros((5, 5))
        both[:4, :4] = rate * stretch.rates
        both[4] = [0.0, 0.0, 1.0 / WELL, 0.0, -1.0 / WELL]
        moved = expm(both * length) @ np.append(there, self.reading)
        self.reading = float(moved[4])
        self.read_time, self.source = self.read_time + length, self.source + rate * length


class Stepped:
    """The same by DOP853; the leg reads the dense output of the tank."""

    def __init__(self, leg: str) -> None:
        self.leg = leg
        opening = START_Q / POWER
        self.time, self.state = 0.0, np.array([opening, opening, SET_POINTS[0][1] / 100.0, SET_POINTS[0][1] / 100.0])
        self.pieces: list[Piece] = []
        self.begins: list[float] = []

    def tank(self, time: float) -> float:
        """Tank temperature [100 K above 0 degC] at an earlier time."""
        place = bisect.bisect_right(self.begins, time) - 1
        return SET_POINTS[0][1] / 100.0 if place < 0 else float(self.pieces[place](time)[2])

    def entered(self, time: float) -> float:
        """When the liquid left the tank that is at the end of the leg."""
        change, (before, after) = FLOWS[1][0], (FLOWS[0][1], FLOWS[1][1])
        if self.leg == "dead_time":
            return time - LEG_TIME
        since = max(time - change, 0.0)
        if after * since >= LEG_VOLUME:
            return time - LEG_VOLUME / after
        return min(time, change) - (LEG_VOLUME - after * since) / before

    def advance(self, end: float, target: float) -> None:
        """Move on to `end` with a constant valve target and flow, cut where the valve leaves stroke speed."""
        q = in_force(FLOWS, self.time)
        while self.time < end:
            gap, speed, until = target - float(self.state[0]), 0.0, end
            limited = (abs(gap) - POSITIONER / STROKE) * STROKE
            if limited > 1e-12:
                speed, until = math.copysign(1.0 / STROKE, gap), min(end, self.time + limited)

            def rates(t: float, z: FloatArray, speed: float = speed) -> list[float]:
                move = speed or (target - z[0]) / POSITIONER
                heat = (q * (FEED / 100.0 - z[2]) + POWER * z[1] / (RHO * CP) / 100.0) / V
                return [move, (z[0] - z[1]) / COIL, heat, (self.tank(self.entered(t)) - z[3]) / WELL]

            piece = integrate(rates, self.time, until, list(self.state), 1e-13)
            self.pieces.append(piece)
            self.begins.append(self.time)
            self.time, self.state = until, piece.last

    def read(self, end: float) -> float:
        """The thermowell's temperature, which is always up to date here."""
        return 100.0 * float(self.state[3])


def discontinuities(end: float) -> list[float]:
    """Scans, arrivals of the signal at the valve, steps, and their echoes at the end of either leg."""
    scans = [number * SCAN for number in range(round(end / SCAN) + 1)]
    points = {*scans, *(scan + VALVE_DEAD_TIME for scan in scans), *instants(end, EVERY)}
    steps = {begin for begin, _ in [*FLOWS, *SET_POINTS]}
    echoes = {step + LEG_TIME for step in steps} | {step + LEG_VOLUME / FLOWS[1][1] for step in steps}
    return sorted(point for point in points | steps | echoes if point <= end)


def run(plant: Heater | Stepped, end: float) -> dict[float, tuple[float, float, float, float, float]]:
    """(x, Q, T, M, output) at the instants of the table up to `end`."""
    opening = START_Q / POWER
    controller = Controller(GAIN, INTEGRAL, output=opening, I=opening)
    signals = [(-1000.0, opening)]
    rows: dict[float, tuple[float, float, float, float, float]] = {}
    wanted = set(instants(end, EVERY))
    points = discontinuities(end)
    arrived = 0
    for begin, until in zip(points, [*points[1:], end], strict=True):
        if begin % SCAN == 0.0:
            controller.scan(SCAN, in_force(SET_POINTS, begin) / 100.0, plant.read(begin) / 100.0)
            signals.append((begin + VALVE_DEAD_TIME, controller.output))
        if begin in wanted:
            scale = 100.0 if isinstance(plant, Stepped) else 1.0
            x, heat, tank = (float(part) for part in plant.state[:3])
            rows[begin] = (x, POWER * heat, scale * tank, plant.read(begin), controller.output)
        while arrived + 1 < len(signals) and signals[arrived + 1][0] <= begin:
            arrived += 1
        plant.advance(until, min(max(signals[arrived][1], 0.0), 1.0))
    return rows


def _table(leg: str, rows: dict[float, tuple[float, float, float, float, float]]) -> Table:
    folder, method = f"{NAME}_{leg}", "matrix exponentials, nothing interpolated"
    table = Table(folder, f"{folder}/scenario.yaml", "feedback", method, sorted(rows))
    chosen = [rows[one] for one in sorted(rows)]
    table.add("TV-101.position", "%", [row[0] for row in chosen])
    table.add("coil.Q", "kW", [row[1] for row in chosen])
    table.add("tank.T", "degC", [row[2] + 273.15 for row in chosen])
    table.add("TT-101.pv", "degC", [row[3] + 273.15 for row in chosen])
    table.add("TIC-101.out", "%", [row[4] for row in chosen])
    return table


def tables() -> list[Table]:
    """A table for each kind of leg."""
    found = []
    for leg in ("dead_time", "pipe"):
        heater = Heater(leg)
        found.append(_table(leg, run(heater, END)))
        if heater.stroke_speed < 1.0:
            raise ArithmeticError("the valve was to reach its stroke speed")
    return found


def verify() -> float:
    """Exponentials against DOP853, the pipe beyond the flow step, the dead time beyond the set-point step."""
    worst = 0.0
    for leg, end in (("pipe", 600.0), ("dead_time", 1650.0)):
        worst = max(worst, largest_difference(_table(leg, run(Heater(leg), end)), _table(leg, run(Stepped(leg), end))))
    return worst


if __name__ == "__main__":
    main(tables, verify)

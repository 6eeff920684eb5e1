"""Cascade whose inner controller reaches its limit, is put in manual and moved, comes back, goes on its own set point.

Plant: stirred tank warmed by a constant heat and cooled by a cold feed whose flow a linear valve sets.
V*dT/dt = q*(T_in - T) + Q/(rho*cp); q = q_max*x; dx/dt = clip((signal - x)/positioner, ±1/stroke_time);
flow transmitter lag_F*dF/dt = q - F; temperature transmitter lag_T*dM/dt = T - M.
Outer TIC-1 (direct, scan 10 s) writes the set point of inner FIC-1 (reverse, scan 2 s, limits 0 and 69 %); at one
instant the outer executes first. Written law (reference_controller) and what goes back along the set-point wire:
- while FIC-1 stands at its upper limit the integral of TIC-1 only falls, at its lower limit it only rises;
- while FIC-1 is in manual, or on its own set point, TIC-1's output is FIC-1's set point and its integral follows, so
  the return moves nothing. In manual the set point stays.
An output within 1e-9 of a limit counts as standing at it: holding the integral at the limit leaves rounding in the sum.
Events lie between scans: by the next scan of TIC-1, FIC-1 has executed in its new mode.

Trust: valve position by formula, the rest by DOP853 restarted at every scan, tabulated instant and change between
stroke speed and lag; the whole run at rtol 1e-12 against 1e-13. Asserted: the limit is met, and never nearly met; no
step at a transfer.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

from reference_controller import Controller
from reference_tools import RTOL, FloatArray, Table, instants, integrate, largest_difference, main

NAME = "cascade_manual"
V, RHO, CP, Q = 0.6, 998.0, 4182.0, 60e3
Q_MAX, STROKE, POSITIONER = 5.0 / 3600.0, 8.0, 1.5
LAG_F, LAG_T = 1.0, 15.0
SPAN_T, SPAN_F = 100.0, Q_MAX  # 0 to 100 degC, 0 to 5 m^3/h
INNER_SCAN, OUTER_SCAN, END, EVERY = 2.0, 10.0, 3600.0, 5.0
FEEDS = [(0.0, 12.0), (1207.0, 15.0)]  # from [s], feed [degC]
SET_POINTS = [(0.0, 40.0), (100.0, 25.0), (407.0, 33.0)]
MODES = [(0.0, "cascade"), (1501.5, "manual"), (2101.5, "cascade"), (2701.5, "auto"), (3001.5, "cascade")]
MANUAL_OUTPUT, OWN_SET_POINT = 0.50, 2.5 / 5.0


def latest(steps: list[tuple[float, float]], time: float) -> float:
    """The value in force from `time` on."""
    return [value for begin, value in steps if begin <= time][-1]


@dataclass
class Run:
    """The run so far: states (T [100 K above 0 degC], readings of flow and temperature), position, valve signal."""

    rtol: float
    state: list[float]
    position: float
    signal: float
    sampled: dict[float, tuple[float, float, float, float]] = field(default_factory=dict)

    def advance(self, begin: float, end: float, feed: float, wanted: list[float]) -> None:
        """Move the plant on with the valve signal held, noting (T, F, M, position) at the wanted instants."""
        while begin < end:
            gap, speed, until = self.signal - self.position, 0.0, end
            limited = (abs(gap) - POSITIONER / STROKE) * STROKE
            if limited > 1e-12:
                speed, until = math.copysign(1.0 / STROKE, gap), min(end, begin + limited)
            self._smooth(begin, until, speed, feed, wanted)
            begin = until

    def _smooth(self, begin: float, end: float, speed: float, feed: float, wanted: list[float]) -> None:
        start, target = self.position, self.signal

        def position(t: float) -> float:
            if speed:
                return start + speed * (t - begin)
            return target + (start - target) * math.exp(-(t - begin) / POSITIONER)

        def rates(t: float, z: FloatArray) -> list[float]:
            q = Q_MAX * position(t)
            heat = (q * (feed / 100.0 - z[0]) + Q / (RHO * CP) / 100.0) / V
            return [heat, (position(t) - z[1]) / LAG_F, (z[0] - z[2]) / LAG_T]

        piece = integrate(rates, begin, end, self.state, self.rtol)
        for one in wanted:
            if begin <= one <= end:
                T, flow, reading = (float(part) for part in piece(one))
                self.sampled[one] = (T, flow, reading, position(one))
        self.state, self.position = [float(part) for part in piece.last], position(end)


class Loops:
    """Both controllers and what passes between them."""

    def __init__(self, flow: float) -> None:
        self.outer = Controller(4.0, 300.0, output=flow, I=flow, sign=-1.0)
        self.inner = Controller(0.4, 5.0, output=flow, I=flow, high=0.69)
        self.mode, self.mode_before, self.set_point = "cascade", "cascade", flow
        self.listens, self.may_rise, self.may_fall = True, True, True
        self.at_limit = 0

    def set_mode(self, mode: str) -> None:
        """An event: the mode, and what is set with it."""
        self.mode = mode
        if mode == "manual":
            self.inner.output = MANUAL_OUTPUT
        if mode == "auto":
            self.set_point = OWN_SET_POINT

    def scan(self, time: float, flow: float, temperature: float) -> None:
        """What falls due at `time`: the outer first."""
        if time % OUTER_SCAN == 0.0:
            follow = None if self.listens else self.set_point
            wanted = latest(SET_POINTS, time) / SPAN_T
            self.outer.scan(OUTER_SCAN, wanted, temperature, 0.0, self.may_rise, self.may_fall, follow)
        if self.mode == "cascade":
            self.set_point = self.outer.output
        self.inner.manual = self.mode == "manual"
        before = self.inner.output
        if self.mode != self.mode_before:
            self.inner.I = self.inner.output - self.inner.gain * (self.set_point - flow)
        self.inner.scan(INNER_SCAN, self.set_point, flow)
        if self.mode != self.mode_before and abs(self.inner.output - before) > self.inner.gain * INNER_SCAN / 5.0:
            raise ArithmeticError(f"{time} s: the output steps at a transfer")
        self.mode_before, self.listens = self.mode, self.mode == "cascade"
        self.may_rise = self.inner.output < self.inner.high - 1e-9
        self.may_fall = self.inner.output > self.inner.low + 1e-9
        self.at_limit += not self.may_rise
        if self.may_rise and self.inner.output > self.inner.high - 1e-3:
            raise ArithmeticError(f"{time} s: whether the output stands at its limit hangs on a small difference")


def run(rtol: float) -> tuple[Run, dict[float, tuple[float, float]]]:
    """The whole run: sampled states, and both outputs as they stand at the instants of the table."""
    time = instants(END, EVERY)
    flow = Q / (RHO * CP * (SET_POINTS[0][1] - FEEDS[0][1])) / Q_MAX
    rest = SET_POINTS[0][1] / 100.0
    plant, loops = Run(rtol, [rest, flow, rest], flow, flow), Loops(flow)
    outputs: dict[float, tuple[float, float]] = {}
    scans = [number * INNER_SCAN for number in range(round(END / INNER_SCAN) + 1)]
    points = sorted({begin for begin, _ in [*MODES, *FEEDS, *SET_POINTS]} | {*scans, *time})
    for begin, end in zip(points, [*points[1:], END], strict=True):
        for moment, mode in MODES[1:]:
            if moment == begin:
                loops.set_mode(mode)
        if begin in scans:
            loops.scan(begin, plant.state[1], plant.state[2])
        plant.signal = loops.inner.output
        if begin in time:
            outputs[begin] = (loops.outer.output, loops.inner.output)
        plant.advance(begin, end, latest(FEEDS, begin), [one for one in time if begin <= one <= end])
    if loops.at_limit < 5:
        raise ArithmeticError("the inner controller was to stand at its limit for a while")
    return plant, outputs


def _table(rtol: float) -> Table:
    plant, outputs = run(rtol)
    time = instants(END, EVERY)
    rows = [plant.sampled[one] for one in time]
    table = Table(NAME, f"{NAME}/scenario.yaml", "cascade", "DOP853, restarted at every scan", time)
    table.add("tank.T", "degC", [273.15 + 100.0 * row[0] for row in rows])
    table.add("TT-1.pv", "degC", [273.15 + 100.0 * row[2] for row in rows])
    table.add("FT-1.pv", "m^3/h", [Q_MAX * row[1] for row in rows])
    table.add("FV-1.position", "%", [row[3] for row in rows])
    table.add("FV-1.q", "m^3/h", [Q_MAX * row[3] for row in rows])
    table.add("TIC-1.out", "%", [outputs[one][0] for one in time])
    table.add("FIC-1.out", "%", [outputs[one][1] for one in time])
    return table


def tables() -> list[Table]:
    """The table of this case."""
    return [_table(RTOL)]


def verify() -> float:
    """Two tolerances."""
    return largest_difference(_table(RTOL), _table(0.1 * RTOL))


if __name__ == "__main__":
    main(tables, verify)

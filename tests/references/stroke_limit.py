"""Flow loop under the continuous law (scan 0 s) with a valve that reaches its stroke speed on big set-point steps.

u = Kc*(sp - F) + I, dI/dt = Kc/Ti*(sp - F) with F the flow reading in fractions of 0 to 10 m^3/h;
dx/dt = clip((u - x)/positioner, ±1/stroke_time); dF/dt = (x - F)/lag.
At a step of the set point P jumps, but not I or x.
Stroke speed is met and left inside a step, where |u - x| = positioner/stroke_time; the limits of the output are never
met (asserted).

In each of the two modes the system is linear with constant input: (x, F, I, 1) moves by a matrix exponential. The
instant of a change is the root of |u - x| - positioner/stroke_time on that exact solution (brentq, to rounding).

Trust: the exponentials against DOP853 with its own event location, restarted at each change.
"""

from __future__ import annotations

import math

import numpy as np
from reference_tools import RTOL, FloatArray, Table, instants, largest_difference, main
from scipy.integrate import solve_ivp
from scipy.linalg import expm
from scipy.optimize import brentq

NAME = "stroke_limit"
Q_MAX, STROKE, POSITIONER, LAG = 10.0 / 3600.0, 12.0, 1.5, 2.0
GAIN, INTEGRAL = 0.8, 6.0
STEPS = [(0.0, 0.30), (10.0, 0.65), (60.3, 0.20)]  # from [s], set point
END, EVERY = 120.0, 0.25
BAND = POSITIONER / STROKE


def output(z: FloatArray, sp: float) -> float:
    """Controller output for (x, F, I, …)."""
    return float(GAIN * (sp - z[1]) + z[2])


def matrix(mode: int, sp: float) -> FloatArray:
    """Rates of (x, F, I, 1): mode 0 within the band, +1 and -1 at stroke speed."""
    follow = [-1.0 / POSITIONER, -GAIN / POSITIONER, 1.0 / POSITIONER, GAIN * sp / POSITIONER]
    return np.array(
        [
            [0.0, 0.0, 0.0, mode / STROKE] if mode else follow,
            [1.0 / LAG, -1.0 / LAG, 0.0, 0.0],
            [0.0, -GAIN / INTEGRAL, 0.0, GAIN * sp / INTEGRAL],
            [0.0, 0.0, 0.0, 0.0],
        ]
    )


def mode_of(z: FloatArray, sp: float) -> int:
    """Which mode holds at the start of a stretch."""
    gap = output(z, sp) - float(z[0])
    return int(math.copysign(1.0, gap)) if abs(gap) > BAND else 0


def excess(z: FloatArray, sp: float) -> float:
    """By how much |u - x| is outside the band."""
    return abs(output(z, sp) - float(z[0])) - BAND


class Exact:
    """Moves by matrix exponentials; changes found on a grid of 0.01 s and refined by brentq."""

    def move(self, z: FloatArray, length: float, mode: int, sp: float) -> tuple[FloatArray, float]:
        """State after `length` or at the next change of mode, and how far it came."""
        rates = matrix(mode, sp)
        count = max(1, math.ceil(length / 0.01))
        step, here = expm(rates * length / count), z
        for number in range(count):
            after = step @ here
            left = excess(after, sp) > 1e-12 if mode == 0 else excess(after, sp) < -1e-12
            if left:
                root = brentq(lambda s, here=here: excess(expm(rates * s) @ here, sp), 0.0, length / count, xtol=1e-15)
                return expm(rates * root) @ here, number * length / count + root
            here = after
        return expm(rates * length) @ z, length


class Stepped:
    """Moves by DOP853 with its own event location."""

    def move(self, z: FloatArray, length: float, mode: int, sp: float) -> tuple[FloatArray, float]:
        """State after `length` or at the next change of mode, and how far it came."""

        def rates(_: float, y: FloatArray) -> list[float]:
            u = GAIN * (sp - y[1]) + y[2]
            move = mode / STROKE if mode else (u - y[0]) / POSITIONER
            return [move, (y[0] - y[1]) / LAG, GAIN / INTEGRAL * (sp - y[1]), 0.0]

        def change(_: float, y: FloatArray) -> float:
            return excess(y, sp)

        change.terminal, change.direction = True, -1.0 if mode else 1.0  # type: ignore[attr-defined]
        done = solve_ivp(rates, (0.0, length), z, method="DOP853", rtol=0.1 * RTOL, atol=0.01 * RTOL, events=change)
        return done.y[:, -1], float(done.t[-1])


def run(method: Exact | Stepped) -> tuple[dict[float, tuple[float, float, float]], list[float]]:
    """(x, F, u) at the instants of the table, and when stroke speed was met or left."""
    first = STEPS[0][1]
    z, rows, changes = np.array([first, first, first, 1.0]), {}, []
    time = instants(END, EVERY)
    points = sorted({*time, *(begin for begin, _ in STEPS)})
    mode = 0
    for begin, end in zip(points, [*points[1:], END], strict=True):
        sp = [value for start, value in STEPS if start <= begin][-1]
        if begin in [start for start, _ in STEPS]:
            mode = mode_of(z, sp)
        rows[begin] = (float(z[0]), float(z[1]), output(z, sp))
        while begin < end:
            z, length = method.move(z, end - begin, mode, sp)
            if length < end - begin:
                changes.append(begin + length)
                mode = 0 if mode else int(math.copysign(1.0, output(z, sp) - float(z[0])))
                begin += length
            else:
                begin = end
    return rows, changes


def _table(method: Exact | Stepped) -> Table:
    rows, changes = run(method)
    time = instants(END, EVERY)
    if len(changes) < 2 or not all(0.01 < rows[one][2] < 0.99 for one in time):
        raise ArithmeticError(f"stroke speed was to be left twice and the output to stay inside: {changes}")
    table = Table(NAME, f"{NAME}/scenario.yaml", "feedback", "matrix exponentials between changes", time)
    table.add("FV-1.position", "%", [rows[one][0] for one in time])
    table.add("FV-1.q", "m^3/h", [Q_MAX * rows[one][0] for one in time])
    table.add("FT-1.pv", "m^3/h", [Q_MAX * rows[one][1] for one in time])
    table.add("FIC-1.out", "%", [rows[one][2] for one in time])
    return table


def tables() -> list[Table]:
    """The table of this case."""
    return [_table(Exact())]


def verify() -> float:
    """Exponentials against DOP853."""
    return largest_difference(_table(Exact()), _table(Stepped()))


if __name__ == "__main__":
    main(tables, verify)

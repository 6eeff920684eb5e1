"""Dead times shorter than a scan (0.3 s in a loop with 2 s), and of 0.01 s under the continuous law.

Process: lag*dy/dt = u - y, measured as m(t) = y(t - dead time); PI controller in fractions of span.

Scanned: u is held between scans, y is an exact exponential from scan to scan, and the controller reads it 0.3 s back.
Continuous (scan 0 s): u = Kc*(sp - m) + I, dI/dt = Kc/Ti*(sp - m); at a set-point step P jumps and I does not.
With the state z = (y, I) this is a linear delay equation. Method of steps: on each stretch of one dead time (cut at
the set-point steps and their echoes) m is the known solution of the stretch before.
The limits are never reached (asserted).

Trust: scanned, exact exponentials against DOP853. Continuous, the stretches by Chebyshev collocation (18 points a
stretch of 0.01 s, time constants 0.05 s and more, so exact to rounding) against DOP853 with its own interpolation.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from reference_controller import Controller
from reference_lag import LagOfHeldSignal
from reference_tools import FloatArray, Piece, Table, instants, integrate, largest_difference, main

SCANNED, CONTINUOUS = "short_dead_time_scanned", "short_dead_time_continuous"
SCAN, SCAN_LAG, SCAN_DEAD_TIME, SCAN_GAIN, SCAN_INTEGRAL = 2.0, 20.0, 0.3, 4.0, 20.0
SCAN_STEPS = [(0.0, 0.40), (10.0, 0.50), (101.0, 0.40)]
SCAN_END, SCAN_EVERY = 200.0, 1.0
LAG, DEAD_TIME, GAIN, INTEGRAL = 1.0, 0.01, 20.0, 1.0
STEPS = [(0.0, 0.10), (0.102, 0.14), (1.006, 0.135)]
END, EVERY = 2.0, 0.004
POINTS = 18


# ---------------------------------------------------------------- scanned
def scanned() -> tuple[LagOfHeldSignal, list[float]]:
    """The lag, and the output after each scan."""
    start = SCAN_STEPS[0][1]
    process = LagOfHeldSignal(SCAN_LAG, 0.0, start)
    controller = Controller(SCAN_GAIN, SCAN_INTEGRAL, output=start, I=start)
    outputs = []
    for number in range(round(SCAN_END / SCAN) + 1):
        time = number * SCAN
        sp = [value for begin, value in SCAN_STEPS if begin <= time][-1]
        outputs.append(controller.scan(SCAN, sp, process.value(time - SCAN_DEAD_TIME)))
        process.change(time, outputs[-1])
    return process, outputs


def scanned_table(integrated: bool) -> Table:
    """The scanned case, by formula or by DOP853."""
    process, outputs = scanned()
    time = instants(SCAN_END, SCAN_EVERY)
    wanted = sorted({*time, *(one - SCAN_DEAD_TIME for one in time)})
    numbers = process.by_integration(wanted) if integrated else [process.value(one) for one in wanted]
    y = dict(zip(wanted, numbers, strict=True))
    table = Table(SCANNED, f"{SCANNED}/scenario.yaml", "feedback", "closed form from scan to scan", time)
    table.add("lag.y", "%", [y[one] for one in time])
    table.add("dead.y", "%", [y[one - SCAN_DEAD_TIME] for one in time])
    table.add("TIC-1.out", "%", [outputs[int(one // SCAN)] for one in time])
    return table


# ---------------------------------------------------------------- continuous
def set_point(time: float) -> float:
    """Set point in use from `time` on."""
    return [value for begin, value in STEPS if begin <= time + 1e-12][-1]


def stretches() -> list[tuple[float, float]]:
    """Stretches [s] no longer than one dead time, cut so that the stretch one dead time earlier is one of them too."""
    phases = sorted({round(begin % DEAD_TIME, 9) for begin, _ in STEPS})
    count = round(END / DEAD_TIME)
    points = sorted({round(number * DEAD_TIME + phase, 9) for number in range(count) for phase in phases} | {END})
    return list(pairwise(points))


class Collocation:
    """Chebyshev collocation of dz/dx = A z + f on one stretch: values at the points 0 … 1, ends included."""

    def __init__(self) -> None:
        angles = np.pi * np.arange(POINTS) / (POINTS - 1)
        self.x = 0.5 * (1.0 - np.cos(angles))
        weights = np.where(np.arange(POINTS) % 2 == 0, 1.0, -1.0)
        weights[[0, -1]] *= 0.5
        gaps = self.x[:, None] - self.x[None, :] + np.eye(POINTS)
        slopes = (weights[None, :] / weights[:, None]) / gaps
        np.fill_diagonal(slopes, 0.0)
        np.fill_diagonal(slopes, -slopes.sum(axis=1))
        self.slopes, self.weights = slopes, weights

    def solve(self, length: float, pull: float, start: float, forcing: FloatArray) -> FloatArray:
        """Values of z where dz/dt = pull*z + forcing(t), z = start at the first point."""
        system = self.slopes / length - pull * np.eye(POINTS)
        right = forcing.copy()
        system[0], right[0] = np.eye(POINTS)[0], start
        return np.asarray(np.linalg.solve(system, right), dtype=np.float64)

    def value(self, samples: FloatArray, x: float) -> float:
        """Between the points, by the barycentric formula."""
        gaps = x - self.x
        if np.any(gaps == 0.0):
            return float(samples[np.argmin(np.abs(gaps))])
        parts = self.weights / gaps
        return float(parts @ samples / parts.sum())


def by_collocation(times: list[float]) -> tuple[list[float], list[float], list[float]]:
    """y, m and u at the times [s]."""
    rule, start, stored = Collocation(), STEPS[0][1], STEPS[0][1]
    pieces: dict[float, tuple[float, FloatArray]] = {}
    found: dict[float, tuple[float, float, float]] = {}
    y = start
    for begin, end in stretches():
        length, sp = end - begin, set_point(begin)
        earlier = pieces.get(round(begin - DEAD_TIME, 9))
        m = np.full(POINTS, start) if earlier is None else earlier[1]
        integral = rule.solve(length, 0.0, stored, GAIN / INTEGRAL * (sp - m))
        u = GAIN * (sp - m) + integral
        curve = rule.solve(length, -1.0 / LAG, y, u / LAG)
        _inside(u)
        pieces[round(begin, 9)] = (length, curve)
        for one in times:
            if begin - 1e-12 <= one < end - 1e-12 or one == END == end:
                x = min(max((one - begin) / length, 0.0), 1.0)
                found[one] = (rule.value(curve, x), rule.value(m, x), rule.value(u, x))
        y, stored = float(curve[-1]), float(integral[-1])
    y_, m_, u_ = zip(*(found[one] for one in times), strict=True)
    return list(y_), list(m_), list(u_)


def by_steps(times: list[float]) -> tuple[list[float], list[float], list[float]]:
    """y, m and u at the times [s] by DOP853, the history read from its own interpolation."""
    state = [STEPS[0][1], STEPS[0][1]]
    pieces: dict[float, Piece] = {}
    found: dict[float, tuple[float, float, float]] = {}
    for begin, end in stretches():
        sp, earlier = set_point(begin), pieces.get(round(begin - DEAD_TIME, 9))

        def measured(t: float, earlier: Piece | None = earlier) -> float:
            return STEPS[0][1] if earlier is None else float(earlier(t - DEAD_TIME)[0])

        def output(t: float, stored: float, sp: float = sp) -> float:
            return GAIN * (sp - measured(t)) + stored

        def rates(t: float, z: FloatArray, sp: float = sp) -> list[float]:
            return [(output(t, z[1]) - z[0]) / LAG, GAIN / INTEGRAL * (sp - measured(t))]

        piece = integrate(rates, begin, end, state, 1e-13)
        pieces[round(begin, 9)] = piece
        for one in times:
            if begin - 1e-12 <= one < end - 1e-12 or one == END == end:
                z = piece(min(max(one, begin), end))
                found[one] = (float(z[0]), measured(one), output(one, float(z[1])))
        state = list(piece.last)
    y_, m_, u_ = zip(*(found[one] for one in times), strict=True)
    return list(y_), list(m_), list(u_)


def _inside(u: FloatArray) -> None:
    if u.min() <= 0.0 or u.max() >= 1.0:
        raise ArithmeticError("the output reaches its limit: the case is then another one")


def continuous_table(collocated: bool) -> Table:
    """The continuous case by one of the two methods."""
    time = instants(END, EVERY)
    y, m, u = by_collocation(time) if collocated else by_steps(time)
    table = Table(CONTINUOUS, f"{CONTINUOUS}/scenario.yaml", "feedback", "method of steps, Chebyshev collocation", time)
    table.add("lag.y", "%", y)
    table.add("dead.y", "%", m)
    table.add("TIC-1.out", "%", u)
    return table


def tables() -> list[Table]:
    """Both tables."""
    return [scanned_table(False), continuous_table(True)]


def verify() -> float:
    """Each case by its two methods."""
    return max(
        largest_difference(scanned_table(False), scanned_table(True)),
        largest_difference(continuous_table(True), continuous_table(False)),
    )


if __name__ == "__main__":
    main(tables, verify)

"""Continuous law (scan 0 s) at its output limit: the integral stands, then slides along the limit, and is let go.

Process: lag*dy/dt = u - y, 60 s, gain 1. u = clip(v, 10 %, 60 %), v = P + I, P = Kc*(sp - y), dI/dt = Kc/Ti*(sp - y),
Kc 3, Ti 60 s, `windup: hold`: I goes as far as the limit, never back. That is the scanned law for scans ever shorter:
- v beyond the limit and I pushed towards it: I stands;
- v on the limit, and P falls more slowly than I is pushed up: I = limit - P, so v stays on the limit;
- an error that has turned is never held.
Set point 40 %; 65 % from 30 s: the output stands at 60 %, and so never gets there; I stands until P has come down to
60 % - I, at y = sp - (60 % - 40 %)/Kc, then slides with it; 55 % from 330 s: P jumps, v leaves the limit at once.
Everything is exponentials; after the release (y, I, 1) moves by a matrix exponential. No limit is met there (asserted).

Trust: after the release against DOP853; and the whole against the scanned law at scans of 0.02 and 0.01 s: the
difference is below 1e-3 of span and halves with the scan (asserted).
"""

from __future__ import annotations

import math

import numpy as np
from reference_controller import Controller
from reference_lag import LagOfHeldSignal
from reference_tools import FloatArray, Table, instants, integrate, largest_difference, main
from scipy.linalg import expm

NAME = "continuous_limit"
LAG, GAIN, INTEGRAL, LOW, HIGH = 60.0, 3.0, 60.0, 0.10, 0.60
STEPS = [(0.0, 0.40), (30.0, 0.65), (330.0, 0.55)]
START, UP, RELEASE = STEPS[0][1], STEPS[1][0], STEPS[2][0]
END, EVERY = 600.0, 2.0


def at_limit(time: float) -> tuple[float, float]:
    """(y, I) between the first step and the release."""
    y = HIGH + (START - HIGH) * math.exp(-(time - UP) / LAG)
    return y, max(START, HIGH - GAIN * (STEPS[1][1] - y))


def rates() -> FloatArray:
    """Rates of (y, I, 1) after the release."""
    sp = STEPS[2][1]
    return np.array(
        [
            [-(1.0 + GAIN) / LAG, 1.0 / LAG, GAIN * sp / LAG],
            [-GAIN / INTEGRAL, 0.0, GAIN * sp / INTEGRAL],
            [0.0, 0.0, 0.0],
        ]
    )


def exact(time: float, integrated: bool = False) -> tuple[float, float]:
    """(y, u) at a time, after what happens at it."""
    if time < UP:
        return START, START
    if time < RELEASE:
        return at_limit(time)[0], HIGH
    y, I = at_limit(RELEASE)  # noqa: E741
    start = np.array([y, I, 1.0])
    if integrated and time > RELEASE:
        after = integrate(lambda _, z: list(rates() @ z), RELEASE, time, list(start)).last
    else:
        after = expm(rates() * (time - RELEASE)) @ start
    v = GAIN * (STEPS[2][1] - float(after[0])) + float(after[1])
    if not LOW < v < HIGH:
        raise ArithmeticError(f"{time} s: the output meets a limit again")
    return float(after[0]), v


def scanned(scan: float) -> float:
    """The largest distance of y, scanned, from the continuous law."""
    process = LagOfHeldSignal(LAG, 0.0, START)
    controller = Controller(GAIN, INTEGRAL, output=START, I=START, low=LOW, high=HIGH)
    worst = 0.0
    for number in range(round(END / scan)):
        time = number * scan
        sp = [value for begin, value in STEPS if begin <= time + 1e-9][-1]
        y = process.value(time)
        process.change(time, controller.scan(scan, sp, y))
        if number % round(EVERY / scan) == 0:
            worst = max(worst, abs(y - exact(number // round(EVERY / scan) * EVERY)[0]))
    return worst


def _table(integrated: bool) -> Table:
    time = instants(END, EVERY)
    rows = [exact(one, integrated) for one in time]
    table = Table(NAME, f"{NAME}/scenario.yaml", "feedback", "closed form, matrix exponential after the release", time)
    table.add("lag.y", "%", [row[0] for row in rows])
    table.add("TIC-1.out", "%", [row[1] for row in rows])
    return table


def tables() -> list[Table]:
    """The table of this case."""
    return [_table(False)]


def verify() -> float:
    """Against DOP853 and against ever shorter scans."""
    coarse, fine = scanned(0.02), scanned(0.01)
    if not (coarse < 1e-3 and 0.45 < fine / coarse < 0.55):
        raise ArithmeticError(f"the scanned law does not come to the continuous one: {coarse}, {fine}")
    return largest_difference(_table(False), _table(True))


if __name__ == "__main__":
    main(tables, verify)

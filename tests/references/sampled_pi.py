"""Scanned PI controller on a dead time and a first-order lag: scan 15 s, process lag 60 s, dead time 10 s. Closed form.

Process: y goes to u(t - 10 s) with 60 s; u is the controller's output, held between scans, so y is an exact exponential
from jump to jump. Controller: the written law (see reference_controller), gain 3, integral time 60 s, scans at
0, 15, 30 … s.
The set point steps at a scan instant (60 s: the scan at 60 s sees it) and once between scans (637 s: seen at 645 s).

Trust: the exact exponentials against DOP853; and the overshoot of a set-point step of 10 at a scan instant, which was
tabled apart from this script as 0.49, 1.51, 3.07, 3.93 (±0.02) for scans of 0.5, 5, 10, 15 s.
"""

from __future__ import annotations

from reference_controller import Controller
from reference_lag import LagOfHeldSignal
from reference_tools import Table, instants, largest_difference, main

NAME = "sampled_pi"
LAG, DEAD_TIME, GAIN, INTEGRAL = 60.0, 10.0, 3.0, 60.0
STEPS = [(0.0, 0.40), (60.0, 0.50), (637.0, 0.45)]  # from [s], set point
SCAN, END, EVERY = 15.0, 1200.0, 5.0
TABLED_OVERSHOOT = {0.5: 0.49, 5.0: 1.51, 10.0: 3.07, 15.0: 3.93}


def set_point(time: float) -> float:
    """Set point in use from `time` on."""
    return [value for begin, value in STEPS if begin <= time][-1]


def run(scan: float) -> tuple[LagOfHeldSignal, list[float]]:
    """The process and the output after each scan."""
    process = LagOfHeldSignal(LAG, DEAD_TIME, STEPS[0][1])
    controller = Controller(GAIN, INTEGRAL, output=STEPS[0][1], I=STEPS[0][1])
    outputs = []
    for number in range(round(END / scan) + 1):
        time = number * scan
        outputs.append(controller.scan(scan, set_point(time), process.value(time)))
        process.change(time, outputs[-1])
    return process, outputs


def overshoot(scan: float) -> float:
    """By how much y passes the set point, in the units of a set-point step of 10."""
    process, _ = run(scan)
    return 100.0 * (max(process.value(0.01 * number) for number in range(6000, 63700)) - STEPS[1][1])


def _table(y: list[float], outputs: list[float], method: str) -> Table:
    time = instants(END, EVERY)
    table = Table(NAME, f"{NAME}/scenario.yaml", "feedback", method, time)
    table.add("lag.y", "%", y)
    table.add("TIC-1.out", "%", [outputs[int(one // SCAN)] for one in time])
    return table


def tables() -> list[Table]:
    """The table of this case."""
    process, outputs = run(SCAN)
    return [_table([process.value(one) for one in instants(END, EVERY)], outputs, "closed form from jump to jump")]


def verify() -> float:
    """Exact exponentials against DOP853, and the tabled overshoots."""
    for scan, expected in TABLED_OVERSHOOT.items():
        if abs(overshoot(scan) - expected) > 0.02:
            raise ArithmeticError(f"scan {scan} s: overshoot {overshoot(scan):.3f}, tabled {expected}")
    process, outputs = run(SCAN)
    return largest_difference(tables()[0], _table(process.by_integration(instants(END, EVERY)), outputs, "DOP853"))


if __name__ == "__main__":
    main(tables, verify)

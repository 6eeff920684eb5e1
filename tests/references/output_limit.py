"""Ten minutes at the output limit and the release, for both ways against windup. Closed form.

Process: gain 1, lag 60 s behind a dead time of 10 s, its input held between scans, so exact exponentials.
Controller: PID, gain 1, integral 90 s, derivative 8 s (N 8), scan 5 s, output limits 10 % and 60 %, the written law
with `windup: hold` and with `windup: track` (tracking time: the integral time).
Set point: 40 %; 75 % from 60 s, out of reach for ten minutes (the measurement stops at 60 %); 45 % from 660 s; 2 % from
1200 s, out of reach below for ten minutes; 30 % from 1800 s.

Trust: exact exponentials against DOP853 (the law itself is the one used for sampled_pi, whose overshoots are tabled).
That the output leaves the limit at once is asserted, as is that it stood at both limits.
"""

from __future__ import annotations

from reference_controller import Controller
from reference_lag import LagOfHeldSignal
from reference_tools import Table, instants, largest_difference, main

NAME = "output_limit"
LAG, DEAD_TIME, SCAN = 60.0, 10.0, 5.0
LOW, HIGH = 0.10, 0.60
STEPS = [(0.0, 0.40), (60.0, 0.75), (660.0, 0.45), (1200.0, 0.02), (1800.0, 0.30)]
END, EVERY = 2400.0, 5.0


def run(windup: str) -> tuple[LagOfHeldSignal, list[float]]:
    """The process and the output after each scan."""
    start = STEPS[0][1]
    process = LagOfHeldSignal(LAG, DEAD_TIME, start)
    controller = Controller(1.0, 90.0, output=start, I=start, derivative=8.0, N=8.0, low=LOW, high=HIGH, windup=windup)
    outputs = []
    for number in range(round(END / SCAN) + 1):
        time = number * SCAN
        sp = [value for begin, value in STEPS if begin <= time][-1]
        outputs.append(controller.scan(SCAN, sp, process.value(time)))
        process.change(time, outputs[-1])
    _check(outputs)
    return process, outputs


def _check(outputs: list[float]) -> None:
    at = {time: outputs[round(time / SCAN)] for time in (655.0, 660.0, 1795.0, 1800.0)}
    stands = abs(at[655.0] - HIGH) < 1e-12 and abs(at[1795.0] - LOW) < 1e-12
    if not (stands and LOW < at[660.0] < HIGH - 0.05 and LOW + 0.05 < at[1800.0] < HIGH):
        raise ArithmeticError(f"the case does not stand at its limits and leave them: {at}")


def _table(windup: str, integrated: bool) -> Table:
    process, outputs = run(windup)
    time = instants(END, EVERY)
    table = Table(f"{NAME}_{windup}", f"{NAME}/scenario.yaml", windup, "closed form from jump to jump", time)
    table.add("lag.y", "%", process.by_integration(time) if integrated else [process.value(one) for one in time])
    table.add("TIC-1.out", "%", [outputs[int(one // SCAN)] for one in time])
    return table


def tables() -> list[Table]:
    """A table for each way against windup."""
    return [_table("hold", False), _table("track", False)]


def verify() -> float:
    """Exact exponentials against DOP853."""
    return max(largest_difference(_table(way, False), _table(way, True)) for way in ("hold", "track"))


if __name__ == "__main__":
    main(tables, verify)

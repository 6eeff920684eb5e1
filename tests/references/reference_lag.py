"""A first-order lag behind a signal that is held between jumps: exact values, and the same by integration.

time_constant*dy/dt = u(t - dead_time) - y with u piecewise constant: y goes to u as exp(-t/time_constant) from jump to
jump. Used for loops with a scanned controller, whose output is held between scans.
"""

from __future__ import annotations

import bisect
import math
from collections.abc import Sequence

from reference_tools import integrate


class LagOfHeldSignal:
    """y(t) for a held u(t); `start` is u = y before the first change, `dead_time` [s] lies before the lag."""

    def __init__(self, time_constant: float, dead_time: float, start: float) -> None:
        self.time_constant, self.dead_time = time_constant, dead_time
        self.begins, self.inputs, self.values = [-math.inf], [start], [start]

    def change(self, time: float, u: float) -> None:
        """From `time` [s] on the signal is u; times must rise."""
        arrival = time + self.dead_time
        self.values.append(self.value(arrival))
        self.begins.append(arrival)
        self.inputs.append(u)

    def value(self, time: float) -> float:
        """y at a time [s] up to the last known change and its dead time."""
        place = bisect.bisect_right(self.begins, time) - 1
        if place == 0:
            return self.values[0]
        fade = math.exp(-(time - self.begins[place]) / self.time_constant)
        return self.inputs[place] + (self.values[place] - self.inputs[place]) * fade

    def by_integration(self, times: Sequence[float]) -> list[float]:
        """y at rising times [s] by DOP853, restarted at each change of the input."""
        y, found = self.values[0], dict.fromkeys(times, self.values[0])
        ends = [min(end, times[-1]) for end in (*self.begins[2:], math.inf)]
        for begin, end, u in zip(self.begins[1:], ends, self.inputs[1:], strict=True):
            if begin >= end:
                break
            piece = integrate(lambda _, x, u=u: [(u - x[0]) / self.time_constant], begin, end, [y])  # type: ignore[misc]
            y = float(piece.last[0])
            found.update({one: float(piece(one)[0]) for one in times if begin <= one <= end})
        return [found[one] for one in times]

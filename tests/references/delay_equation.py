"""Three delay equations with closed forms, as blocks with `delayed`: what the dead-time history is worth by itself.

hayes: x'(t) = -x(t - 1), x = 1 up to t = 0. x = sum over k = 0 … floor(t) + 1 of (-1)^k (t - k + 1)^k/k!
(method of steps; Bellman and Cooke 1963; Hairer, Norsett and Wanner, Solving Ordinary Differential Equations I, II.17).
critical: x'(t) = -pi/2*x(t - 1), x = 1 up to t = 0: on the edge of stability, the swing neither grows nor fades.
fading: x'(t) = -exp(-1)*x(t - 1): the largest gain without overshoot.
For all, with gain a: x = sum of (-a)^k (t - k + 1)^k/k!, from the Laplace transform. Terms up to 24 are summed in exact
fractions (a rounded once), so nothing cancels.

Trust: the sums against the method of steps by Chebyshev interpolation and exact integration of each stretch; and the
published values x(2) = -1/2, x(3) = -1/6, x(4) = 5/24, x(5) = 19/120 for a = 1.
"""

from __future__ import annotations

import math
from fractions import Fraction

from numpy.polynomial import Chebyshev
from reference_tools import Table, instants, largest_difference, main

NAME = "delay_equation"
GAINS = {"hayes": 1.0, "critical": math.pi / 2.0, "fading": math.exp(-1.0)}
END, EVERY = 20.0, 0.125


def series(gain: float, time: float) -> float:
    """x at a time by the finite sum."""
    a, t = Fraction(gain), Fraction(time)
    total = Fraction(0)
    for k in range(math.floor(time) + 2):
        total += (-a) ** k * (t - k + 1) ** k / math.factorial(k)
    return float(total)


def by_steps(gain: float, times: list[float]) -> list[float]:
    """x by the method of steps: each stretch a polynomial, integrated exactly from the one before."""
    before, x, found = Chebyshev([1.0], domain=[-1.0, 0.0]), 1.0, {}
    for number in range(round(END)):
        shifted = Chebyshev(before.coef, domain=[number, number + 1])
        now = shifted.integ(lbnd=number) * -gain + x
        found.update({one: float(now(one)) for one in times if number <= one <= number + 1})
        before, x = now, float(now(number + 1.0))
    return [found[one] for one in times]


def _table(exact: bool) -> Table:
    time = instants(END, EVERY)
    table = Table(NAME, f"{NAME}/scenario.yaml", "none", "finite sum in exact fractions", time)
    for tag, gain in GAINS.items():
        table.add(f"{tag}.x", "dimensionless", [series(gain, one) for one in time] if exact else by_steps(gain, time))
    return table


def tables() -> list[Table]:
    """The table of this case."""
    return [_table(True)]


def verify() -> float:
    """Sums against steps, and the published values."""
    for time, published in ((2.0, -1.0 / 2.0), (3.0, -1.0 / 6.0), (4.0, 5.0 / 24.0), (5.0, 19.0 / 120.0)):
        if abs(series(1.0, time) - published) > 1e-12:
            raise ArithmeticError(f"x({time}) = {series(1.0, time)}, published {published}")
    return largest_difference(_table(True), _table(False))


if __name__ == "__main__":
    main(tables, verify)

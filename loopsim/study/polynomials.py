"""Where polynomials on 0…1 change sign: many at once, without a missed crossing.

Between two neighbouring turning points a polynomial is monotone, so that it has at most one root there, which bisection
finds. The turning points are the roots of the derivative, and so on down to the straight line.
"""

from __future__ import annotations

from functools import cache
from math import comb

import numpy as np
from numpy.typing import NDArray

from loopsim.results import FloatArray

BISECTIONS = 60  # halves an interval of 1 down to the spacing of the numbers


def coefficients(samples: FloatArray) -> FloatArray:
    """The quartics through samples (n, 5) at 0, 1/4, 1/2, 3/4, 1: coefficients (n, 5), lowest power first.

    Made of forward differences, so that equal samples give an exact constant.
    """
    columns = np.ascontiguousarray(samples.T)
    first, second, third, fourth = (np.diff(columns, order, axis=0)[0] for order in range(1, 5))
    powers = (
        first - second / 2 + third / 3 - fourth / 4,
        second / 2 - third / 2 + 11 * fourth / 24,
        third / 6 - fourth / 4,
        fourth / 24,
    )
    return np.stack([columns[0], *(4.0 ** (k + 1) * power for k, power in enumerate(powers))]).T


def value(polynomials: FloatArray, share: FloatArray) -> FloatArray:
    """The polynomials (n, d+1) at `share` (n,) or (n, k), by nested multiplication."""
    wide = share.ndim == 2
    total = np.zeros(share.shape)
    for column in polynomials.T[::-1]:
        total = total * share + (column[:, None] if wide else column)
    return total


def derivative(polynomials: FloatArray) -> FloatArray:
    """The derivatives by the share, (n, d)."""
    return polynomials[:, 1:] * np.arange(1, polynomials.shape[1])


def hull(polynomials: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Bounds (n,), (n,) between which each polynomial lies on 0…1: the least and greatest Bernstein coefficient."""
    matrix, columns = _to_bernstein(polynomials.shape[1]), polynomials.T
    low = high = columns[0]
    for j in range(1, len(columns)):
        bernstein = columns[0].copy()
        for k in range(1, j + 1):
            bernstein += matrix[k, j] * columns[k]
        low, high = np.minimum(low, bernstein), np.maximum(high, bernstein)
    return low, high


@cache
def _to_bernstein(size: int) -> FloatArray:
    degree = size - 1
    return np.array([[comb(j, k) / comb(degree, k) if k <= j else 0.0 for j in range(size)] for k in range(size)])


def sign_changes(polynomials: FloatArray) -> FloatArray:
    """Shares (n, d) in 0…1 where the polynomials (n, d+1) pass from above 0 to 0 or below, or back.

    Rising in each row, nan where there are fewer than d. A polynomial that only touches 0 from below does not pass.
    """
    found = np.full((len(polynomials), polynomials.shape[1] - 1), np.nan)
    rows, shares = changing(polynomials)
    found[rows] = shares
    return found


def changing(polynomials: FloatArray) -> tuple[NDArray[np.intp], FloatArray]:
    """Those that may change sign: their rows (r,), and where they do, (r, d) as in `sign_changes`."""
    low, high = hull(polynomials)
    rows = np.flatnonzero((low <= 0) & (high > 0))
    if polynomials.shape[1] == 1 or not rows.size:
        return rows[:0], np.zeros((0, polynomials.shape[1] - 1))
    return rows, _changes(polynomials[rows])


def _changes(polynomials: FloatArray) -> FloatArray:
    inner = sign_changes(derivative(polynomials))
    ends = np.zeros((len(polynomials), 1)), np.ones((len(polynomials), 1))
    edges = np.concatenate([ends[0], np.where(np.isnan(inner), 1.0, inner), ends[1]], axis=1)
    above = value(polynomials, edges) > 0
    rows, columns = np.nonzero(above[:, 1:] != above[:, :-1])
    found = np.full((len(polynomials), polynomials.shape[1] - 1), np.nan)
    found[rows, columns] = _bisect(
        polynomials[rows], edges[rows, columns], edges[rows, columns + 1], above[rows, columns]
    )
    return np.sort(found, axis=1)


def _bisect(polynomials: FloatArray, low: FloatArray, high: FloatArray, above_low: NDArray[np.bool_]) -> FloatArray:
    for _ in range(BISECTIONS):
        middle = 0.5 * (low + high)
        same = (value(polynomials, middle) > 0) == above_low
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    return 0.5 * (low + high)

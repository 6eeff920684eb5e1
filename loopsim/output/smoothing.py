"""A line through noise, for pictures only."""

from __future__ import annotations

import numpy as np

from loopsim.results import FloatArray

SHARE = 60  # of the run lies in one median
LEAST = 5  # points in one median
SMALL = 0.005  # of the range: noise below hides nothing
RANDOM = 0.4  # of the points are turning points, at least: two thirds are in pure noise (Bienaymé 1874; from memory)

FEW = 10  # different values: what has no more switches, or is counted in steps


def running_median(y: FloatArray) -> FloatArray | None:
    """The running median of a noisy signal (n,), which keeps steps where they are; None where there is no noise."""
    if len(y) < 4 * LEAST or not np.all(np.isfinite(y)) or len(np.unique(y)) <= FEW:
        return None
    half = max(LEAST, len(y) // SHARE) // 2
    padded = np.concatenate([np.full(half, y[0]), y, np.full(half, y[-1])])
    smooth = np.median(np.lib.stride_tricks.sliding_window_view(padded, 2 * half + 1), axis=1)
    spread = float(np.sqrt(np.mean((y - smooth) ** 2)))
    if spread <= SMALL * float(np.ptp(smooth)) or _turning(y) < RANDOM:
        return None
    return np.asarray(smooth, dtype=np.float64)


def _turning(y: FloatArray) -> float:
    """The share of points at which the signal turns round, values that are merely held left out."""
    moves = np.diff(y)
    ways = np.sign(moves[moves != 0])
    return float(np.mean(ways[1:] != ways[:-1])) if len(ways) > 2 else 0.0

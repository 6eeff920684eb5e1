"""A signal over a window at full resolution: extremes, integrals, crossings, travel.

A course is cut into pieces; on each the signal is the quartic through five equidistant samples (see `results.Pieces`).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from loopsim.results import FloatArray, Pieces

SHARES = np.array([0.0, 0.25, 0.5, 0.75, 1.0])
# the quartic's coefficients in u = 0..1 (highest power first) from the five samples
FROM_SAMPLES = np.linalg.inv(np.vander(SHARES, 5))
BOOLE = np.array([7.0, 32.0, 12.0, 32.0, 7.0]) / 90.0


@dataclass(frozen=True, slots=True)
class Course:
    """`start`, `length` (n,) [s] and `samples` (n, 5) [SI] of one signal, or of the difference of two."""

    start: FloatArray
    length: FloatArray
    samples: FloatArray

    def minus(self, other: Course | float) -> Course:
        """The difference to another signal of the same pieces, or to a level."""
        below = other.samples if isinstance(other, Course) else other
        return Course(self.start, self.length, self.samples - below)

    @property
    def end(self) -> float:
        """Where the last piece ends [s]."""
        return float(self.start[-1] + self.length[-1]) if len(self.start) else float("nan")

    def at(self, time: float, after: bool = True) -> float:
        """The value at a time [s]; at a jump the one after it, or before."""
        last = len(self.start) - 1
        place = int(np.searchsorted(self.start, time, side="right" if after else "left")) - 1
        place = min(max(place, 0), last)
        share = (time - self.start[place]) / self.length[place] if self.length[place] > 0 else 0.0
        return float(np.polyval(FROM_SAMPLES @ self.samples[place], min(max(share, 0.0), 1.0)))

    def within(self, begin: float, end: float) -> Course:
        """The part from `begin` to `end` [s], pieces cut exactly."""
        stop = self.start + self.length
        kept = (stop > begin) & (self.start < end) | ((self.length == 0) & (self.start >= begin) & (self.start <= end))
        start, stop, samples = self.start[kept].copy(), stop[kept].copy(), self.samples[kept].copy()
        for place in {0, len(start) - 1} if len(start) else set():
            low, high = max(start[place], begin), min(stop[place], end)
            if low > start[place] or high < stop[place]:
                shares = (low + SHARES * (high - low) - start[place]) / (stop[place] - start[place])
                samples[place] = np.polyval(FROM_SAMPLES @ samples[place], shares)
                start[place], stop[place] = low, high
        return Course(start, stop - start, samples)

    # ------------------------------------------------------------ extremes
    def maximum(self) -> tuple[float, float]:
        """The greatest value and the first time [s] at which it stands."""
        best_of = self.samples.max(axis=1)
        room = best_of + 0.5 * (best_of - self.samples.min(axis=1))
        best, when = -np.inf, float("nan")
        for place in np.flatnonzero(room >= best_of.max()):
            for share, value in _turning(self.samples[place]):
                if value > best:
                    best, when = value, float(self.start[place] + share * self.length[place])
        return float(best), when

    def minimum(self) -> tuple[float, float]:
        """The least value and the first time [s] at which it stands."""
        value, when = Course(self.start, self.length, -self.samples).maximum()
        return -value, when

    def largest(self) -> tuple[float, float]:
        """The value farthest from nought, with its sign, and its time."""
        high, low = self.maximum(), self.minimum()
        return high if high[0] >= -low[0] else low

    # ------------------------------------------------------------ integrals and crossings
    def absolute_integral(self) -> float:
        """The integral of the absolute value [SI * s]."""
        mixed = (self.samples.max(axis=1) > 0) & (self.samples.min(axis=1) < 0)
        plain = np.abs(self.samples[~mixed] @ BOOLE) * self.length[~mixed]
        total = float(plain.sum())
        for place in np.flatnonzero(mixed):
            total += self.length[place] * _absolute(self.samples[place])
        return total

    def time_outside(self, band: float) -> float:
        """How long [s] the absolute value is above `band`."""
        inside = np.abs(self.samples).max(axis=1) <= band
        outside = (self.samples.min(axis=1) > band) | (self.samples.max(axis=1) < -band)
        total = float(self.length[outside].sum())
        for place in np.flatnonzero(~inside & ~outside):
            for low, high in _shares_outside(self.samples[place], band):
                total += (high - low) * float(self.length[place])
        return total

    def last_outside(self, band: float) -> float | None:
        """The last time [s] at which the absolute value is above `band`, None when it never is."""
        for place in np.flatnonzero(np.abs(self.samples).max(axis=1) * 1.2 > band)[::-1]:
            spans = _shares_outside(self.samples[place], band)
            if spans:
                return float(self.start[place] + spans[-1][1] * self.length[place])
        return None

    # ------------------------------------------------------------ movement
    def path(self) -> FloatArray:
        """Values in order with every turning point between samples: what travel and reversals are counted on."""
        steps = np.diff(self.samples, axis=1)
        ends = self.samples[:, [0, 4]].ravel()
        places: list[int] = []
        values: list[float] = []
        for piece in np.flatnonzero((steps.max(axis=1) > 0) & (steps.min(axis=1) < 0)):
            turns = [value for _, value in _turning(self.samples[piece])[1:-1]]
            places += [2 * int(piece) + 1] * len(turns)
            values += turns
        whole = np.insert(ends, places, values)
        return whole[np.concatenate([[True], np.diff(whole) != 0])] if len(whole) else whole

    def travel(self, play: float = 0.0) -> float:
        """The sum of all movements, jumps included [SI], of something driven through a `play` [SI]."""
        path = self.path()
        if play <= 0.0:
            return float(np.abs(np.diff(path)).sum())
        total, follower = 0.0, float(path[0]) if len(path) else 0.0
        for value in path.tolist():
            moved = min(max(follower, value - play / 2), value + play / 2)
            total += abs(moved - follower)
            follower = moved
        return total

    def deviation(self) -> float:
        """The standard deviation over time [SI]."""
        whole = float(self.length.sum())
        mean = float((self.samples @ BOOLE) @ self.length) / whole
        square = float((((self.samples - mean) ** 2) @ BOOLE) @ self.length) / whole
        return float(np.sqrt(max(square, 0.0)))

    def reversals(self, dead_zone: float) -> int:
        """How often the direction of movement changes, swings up to `dead_zone` [SI] not counted."""
        count, direction, extreme = 0, 0, None
        for value in self.path().tolist():
            if extreme is None or (direction * (value - extreme) >= 0 and direction):
                extreme = value
            elif abs(value - extreme) > dead_zone:
                count += int(direction != 0)
                direction, extreme = (1 if value > extreme else -1), value
        return count

    def steepest(self) -> tuple[float, float]:
        """The largest rate of change [SI/s] and its time; a jump is infinitely steep."""
        jumps = np.abs(self.samples[1:, 0] - self.samples[:-1, 4])
        scale = 1e-9 * (np.abs(self.samples).max(initial=0.0) + 1e-300)
        if (jumps > scale).any():
            return float("inf"), float(self.start[1:][int(np.argmax(jumps))])
        whole = self.length > 0
        slopes = np.abs(np.gradient(self.samples[whole], 0.25, axis=1)) / self.length[whole, None]
        if not slopes.size:
            return 0.0, float("nan")
        place, part = np.unravel_index(int(np.argmax(slopes)), slopes.shape)
        return float(slopes[place, part]), float(self.start[whole][place] + SHARES[part] * self.length[whole][place])


def course_of(pieces: Pieces, name: str) -> Course:
    """The course of one signal over the whole run."""
    return Course(pieces.start, pieces.length, pieces.samples[:, :, pieces.names.index(name)])


def _turning(samples: FloatArray) -> list[tuple[float, float]]:
    """Shares and values at both ends and at every turning point between, in order."""
    polynomial = FROM_SAMPLES @ samples
    roots = _real_roots(np.polyder(polynomial))
    return [(share, float(np.polyval(polynomial, share))) for share in (0.0, *roots, 1.0)]


def _real_roots(polynomial: NDArray[Any]) -> list[float]:
    """Real roots inside 0..1, sorted."""
    scale = np.abs(polynomial).max(initial=0.0)
    if scale == 0:
        return []
    roots = np.roots(np.where(np.abs(polynomial) < 1e-14 * scale, 0.0, polynomial))
    real = roots.real[np.abs(roots.imag) < 1e-7]
    return sorted(float(root) for root in real if 0.0 < root < 1.0)


def _absolute(samples: FloatArray) -> float:
    """The integral of the absolute value over a piece of length 1."""
    polynomial = FROM_SAMPLES @ samples
    whole, total, before = np.polyint(polynomial), 0.0, 0.0
    for share in (*_real_roots(polynomial), 1.0):
        total += abs(float(np.polyval(whole, share) - np.polyval(whole, before)))
        before = share
    return total


def _shares_outside(samples: FloatArray, band: float) -> list[tuple[float, float]]:
    """The parts of a piece on which the absolute value is above `band`."""
    polynomial = FROM_SAMPLES @ samples
    edges = {0.0, 1.0}
    for level in (band, -band):
        edges.update(_real_roots(polynomial - np.array([0, 0, 0, 0, level])))
    order = sorted(edges)
    spans = zip(order, order[1:], strict=False)
    return [(low, high) for low, high in spans if abs(np.polyval(polynomial, 0.5 * (low + high))) > band]

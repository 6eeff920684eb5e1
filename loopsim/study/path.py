"""One signal over time at full resolution: extremes, integrals, movement, time on either side of a level.

A path is cut where something changes (a window's edge, a turning point, the crossing of a level) and never sampled, so
that what is found does not depend on how the run was cut into pieces.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from loopsim.results import FloatArray, Pieces
from loopsim.study.polynomials import changing, coefficients, derivative, hull, value

ROUNDING = 1e-12  # relative: two values this near are the same
STILL = 1e-6  # of the largest movement: what solvers leave of a signal at rest is no reversal
# Gauss-Legendre, five points: exact for polynomials up to degree 9 (square of a quartic: 8)
NODES, WEIGHTS = np.polynomial.legendre.leggauss(5)
NODES, WEIGHTS = 0.5 + 0.5 * NODES, 0.5 * WEIGHTS


@dataclass(frozen=True, slots=True)
class Path:
    """Pieces of one signal: begin and length [s] (n,), quartics (n, 5) in the share 0…1 of the piece [SI].

    Only the shares from `low` to `high` (n,) count. `before` is the value just before the path, nan where the
    path goes on smoothly from it or nothing is known.
    """

    start: FloatArray
    length: FloatArray
    quartics: FloatArray
    low: FloatArray
    high: FloatArray
    before: float = float("nan")

    def __len__(self) -> int:
        return len(self.start)

    def begins(self) -> FloatArray:
        """Where the parts begin [s], (n,)."""
        return self.start + self.low * self.length

    def ends(self) -> FloatArray:
        """Where the parts end [s], (n,)."""
        return self.start + self.high * self.length

    def first(self) -> FloatArray:
        """Values at the beginning of the parts [SI], (n,)."""
        return value(self.quartics, self.low)

    def last(self) -> FloatArray:
        """Values at the end of the parts [SI], (n,)."""
        return value(self.quartics, self.high)


@dataclass(frozen=True, slots=True)
class Point:
    """A value [SI, or SI per s] and when it stood [s]."""

    value: float
    at: float


# ---------------------------------------------------------------- making paths
@lru_cache(maxsize=16)
def path_of(pieces: Pieces, name: str) -> Path:
    """The whole path of one signal. Raises `ValueError` for a name that the pieces do not hold."""
    quartics = coefficients(pieces.samples[:, :, pieces.names.index(name)])
    count = len(pieces.start)
    return Path(pieces.start, pieces.length, quartics, np.zeros(count), np.ones(count))


def minus(path: Path, other: Path | float) -> Path:
    """The difference to a level, or to another whole path of the same pieces."""
    if isinstance(other, Path):
        return replace(path, quartics=path.quartics - other.quartics, before=path.before - other.before)
    return replace(path, quartics=_less(path.quartics, other), before=path.before - other)


def times(path: Path, factor: float) -> Path:
    """The path times a number."""
    return replace(path, quartics=path.quartics * factor, before=path.before * factor)


def _less(quartics: FloatArray, level: float) -> FloatArray:
    lowered = quartics.copy(order="K")
    lowered[:, 0] -= level
    return lowered


def between(path: Path, begin: float, end: float, closing: bool = False) -> Path:
    """The part of a path from `begin` to `end` [s], pieces cut exactly.

    A jump at `begin` belongs to it (`before` is the value it starts from), a jump at `end` only when it is `closing`.
    """
    tie = 1e-9 * max(1.0, abs(begin), abs(end))
    stop = path.ends()
    starts = path.begins()
    from_, until = np.maximum(starts, begin), np.minimum(stop, end)
    whole = (starts >= begin - tie) & (stop <= end + tie)
    part = (until - from_ > tie) | ((until > from_) & whole)
    instant = (stop == starts) & (starts >= begin - tie) & (starts <= end + tie if closing else starts < end - tie)
    rows = np.flatnonzero(part | instant)
    if not rows.size:
        return replace(_taken(path, rows), before=float("nan"))
    kept = _taken(path, rows)
    kept = replace(kept, low=_shares(kept, from_[rows], kept.low), high=_shares(kept, until[rows], kept.high))
    return replace(kept, before=_value_before(path, int(rows[0]), begin, tie))


def _taken(path: Path, rows: NDArray[np.intp]) -> Path:
    quartics = path.quartics.T.take(rows, axis=1).T  # each power stays in one stretch of memory
    return Path(path.start[rows], path.length[rows], quartics, path.low[rows], path.high[rows])


def _shares(path: Path, time: FloatArray, instead: FloatArray) -> FloatArray:
    """Times as shares; a piece of no length, and an edge that is the piece's own, keep the share they have."""
    with np.errstate(divide="ignore", invalid="ignore"):
        share = (time - path.start) / path.length
    own = (path.length == 0) | (time == path.start + instead * path.length)
    return np.where(own, instead, np.clip(share, 0.0, 1.0))


def _value_before(path: Path, first: int, begin: float, tie: float) -> float:
    if first == 0 or path.ends()[first - 1] < begin - tie or path.begins()[first] < begin - tie:
        return float("nan")
    return float(path.last()[first - 1])


def cut_at(path: Path, rows: NDArray[np.intp], shares: FloatArray) -> Path:
    """The path with its parts `rows` (r,) cut at shares (r, k), nan for none; shares outside the part do not count."""
    low, high = path.low[rows, None], path.high[rows, None]
    inside = (shares > low) & (shares < high)
    if not inside.any():
        return path
    edges = np.concatenate([low, np.sort(np.where(inside, shares, high), axis=1), high], axis=1)
    kept = edges[:, 1:] > edges[:, :-1]
    kept[:, 0] |= ~kept.any(axis=1)
    count, cut = np.ones(len(path), dtype=np.intp), np.zeros(len(path), dtype=np.bool_)
    count[rows], cut[rows] = kept.sum(axis=1), True
    parts = _taken(path, np.repeat(np.arange(len(path)), count))
    places = np.repeat(cut, count)
    parts.low[places], parts.high[places] = edges[:, :-1][kept], edges[:, 1:][kept]
    return replace(parts, before=path.before)


def cut_at_turns(path: Path) -> Path:
    """The path in parts on each of which it only rises or only falls."""
    return cut_at(path, *changing(derivative(path.quartics)))


def cut_at_levels(path: Path, *levels: float) -> Path:
    """The path in parts on each of which it stays on one side of every level."""
    for level in levels:
        path = cut_at(path, *changing(_less(path.quartics, level)))
    return path


# ---------------------------------------------------------------- values
def highest(path: Path) -> Point:
    """The greatest value, and the first instant [s] at which it stands. The path must not be empty."""
    ends = np.maximum(path.first(), path.last())
    top = float(ends.max())
    tie = ROUNDING * abs(top)
    rows = np.flatnonzero((hull(path.quartics)[1] >= top - tie) | (ends >= top - tie))
    parts = cut_at_turns(_taken(path, rows))
    first, last = parts.first(), parts.last()
    top = max(top, float(first.max()), float(last.max()))
    place = int(np.argmax(np.maximum(first, last) >= top - tie))
    at = parts.begins() if first[place] >= top - tie else parts.ends()
    return Point(top, float(at[place]))


def lowest(path: Path) -> Point:
    """The least value, and the first instant [s] at which it stands."""
    point = highest(times(path, -1.0))
    return Point(-point.value, point.at)


def farthest(path: Path) -> Point:
    """The value farthest from 0, with its sign, and the first instant [s] at which it stands."""
    high, low = highest(path), lowest(path)
    if abs(high.value + low.value) <= ROUNDING * abs(high.value):
        return high if high.at <= low.at else low
    return high if high.value > -low.value else low


# ---------------------------------------------------------------- integrals
def duration(path: Path) -> float:
    """How long the path is [s]."""
    return float(np.sum((path.high - path.low) * path.length))


def integral_of_size(path: Path) -> float:
    """The integral of the absolute value [SI * s]."""
    return float(np.abs(_integrals(cut_at_levels(path, 0.0), 1)).sum())


def mean(path: Path) -> float:
    """The mean over time. The path must not be empty; of an instant it is the value."""
    total = duration(path)
    return float(_integrals(path, 1).sum()) / total if total > 0 else float(path.last()[-1])


def mean_square(path: Path) -> float:
    """The mean over time of the square."""
    total = duration(path)
    return float(_integrals(path, 2).sum()) / total if total > 0 else float(path.last()[-1]) ** 2


def standard_deviation(path: Path) -> float:
    """The root mean square over time of what the signal is off its mean [SI]; 0 where that is rounding."""
    level = mean(path)
    found = float(np.sqrt(mean_square(minus(path, level))))
    return found if found > ROUNDING * abs(level) else 0.0


def _integrals(path: Path, power: int) -> FloatArray:
    width = path.high - path.low
    total = np.zeros(len(path))
    for node, weight in zip(NODES, WEIGHTS, strict=True):
        total += weight * value(path.quartics, path.low + node * width) ** power
    return total * width * path.length


# ---------------------------------------------------------------- movement
def corners(path: Path) -> FloatArray:
    """The values between which the signal only rises or only falls, in order; a jump is two corners."""
    parts = cut_at_turns(path)
    values = np.stack([parts.first(), parts.last()], axis=1).ravel()
    return values if np.isnan(path.before) else np.concatenate([[path.before], values])


def travel(path: Path, play: float = 0.0) -> float:
    """The sum of all movements up and down, jumps among them [SI], of something driven through a `play` [SI]."""
    values = corners(path)
    if play <= 0 or not len(values):
        return float(np.abs(np.diff(values)).sum())
    total, follower = 0.0, float(values[0])
    for one in _without_middles(values):
        moved = min(max(follower, one - play / 2), one + play / 2)
        total += abs(moved - follower)
        follower = moved
    return total


def reversals(path: Path, dead_zone: float = 0.0) -> int:
    """How often the movement turns round; movements smaller than `dead_zone` [SI] do not count.

    Nor do those under a millionth of the largest movement.
    """
    values = corners(path)
    if len(values) < 2:
        return 0
    still = max(STILL * float(np.ptp(values)), ROUNDING * float(np.abs(values).max()))
    smallest = max(dead_zone * (1 - 1e-9), still)
    count, way = 0, 0
    low = high = values[0]
    for one in _without_middles(values):
        low, high = min(low, one), max(high, one)
        back = high - one if way > 0 else one - low if way < 0 else max(high - one, one - low)
        if back < smallest or back == 0:
            continue
        count += way != 0
        way = -way or (1 if one == high else -1)
        low = high = one
    return count


def _without_middles(values: FloatArray) -> list[float]:
    """The values without those that lie on the way from their neighbour to the next."""
    moves = np.sign(np.diff(values))
    moved = np.flatnonzero(moves != 0)
    turns = moved[:-1][moves[moved[1:]] != moves[moved[:-1]]] + 1
    return [float(values[0]), *(float(one) for one in values[turns]), float(values[-1])]


def steepest(path: Path) -> Point:
    """The greatest rate of change, up or down [SI/s], and when; a jump is infinitely fast."""
    jump = largest_jump(path)
    if jump.value > 0:
        return Point(float("inf"), jump.at)
    lasting = ~_instants(path)
    if not lasting.any():
        return Point(0.0, float(path.start[0]))
    part = _taken(path, np.flatnonzero(lasting))
    rates = np.zeros_like(part.quartics)
    rates[:, :4] = derivative(part.quartics) / part.length[:, None]
    point = farthest(replace(part, quartics=rates))
    return Point(abs(point.value), point.at)


def largest_jump(path: Path) -> Point:
    """The size of the largest jump [SI] and when; 0 where there is none beyond rounding."""
    first, last = path.first(), path.last()
    between_parts = np.nan_to_num(np.abs(first - np.concatenate([[path.before], last[:-1]])))
    jumps = np.maximum(between_parts, np.where(_instants(path), np.abs(last - first), 0.0))
    place = int(np.argmax(jumps))
    if jumps[place] <= 1e-9 * float(np.maximum(np.abs(first), np.abs(last)).max() + np.nan_to_num(abs(path.before))):
        return Point(0.0, float(path.begins()[0]))
    return Point(float(jumps[place]), float(path.begins()[place]))


def _instants(path: Path) -> NDArray[np.bool_]:
    """Pieces (n,) too short for a rate of change to be told from rounding."""
    return path.length <= 1e-9 * np.maximum(1.0, np.abs(path.start))


# ---------------------------------------------------------------- time on either side of a level
@dataclass(frozen=True, slots=True)
class Stay:
    """A stretch from `begin` to `end` [s] on one side."""

    begin: float
    end: float


def stays_above(path: Path, level: float) -> tuple[Stay, ...]:
    """The stretches during which the signal is above a level, an instant at the end of a run among them."""
    parts = cut_at_levels(path, level)
    return _stays(parts, _middles(parts) > level)


def stays_outside(path: Path, size: float) -> tuple[Stay, ...]:
    """The stretches during which the absolute value is above `size`."""
    parts = cut_at_levels(path, size, -size)
    return _stays(parts, np.abs(_middles(parts)) > size)


def _middles(path: Path) -> FloatArray:
    return value(path.quartics, 0.5 * (path.low + path.high))


def _stays(path: Path, inside: NDArray[np.bool_]) -> tuple[Stay, ...]:
    """Neighbouring parts that are `inside` (n,) joined."""
    edges = np.diff(np.concatenate([[0], inside.astype(np.int8), [0]]))
    firsts, lasts = np.flatnonzero(edges == 1), np.flatnonzero(edges == -1) - 1
    begins, ends = path.begins()[firsts], path.ends()[lasts]
    return tuple(Stay(float(begin), float(end)) for begin, end in zip(begins, ends, strict=True))

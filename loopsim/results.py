"""Results as data: what every analysis returns and every output renders."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from loopsim.errors import Where
from loopsim.language.units import Unit

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Cell:
    """One cell of a table: its text, and a tone that outputs may colour: `plain`, `good`, `bad` or `open`."""

    text: str
    tone: str = "plain"


@dataclass(frozen=True, slots=True)
class Table:
    """A table: title, column heads, rows of cells, and sentences below it."""

    title: str
    heads: tuple[str, ...]
    rows: tuple[tuple[Cell, ...], ...]
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Curve:
    """One line of a panel. `step`: held between points; `dashed`: a set point; `faint`: what noise hides another by."""

    name: str
    x: FloatArray
    y: FloatArray
    step: bool = False
    dashed: bool = False
    faint: bool = False


@dataclass(frozen=True, slots=True)
class Band:
    """An area between two lines that a rule asks a signal to stay in; arrays of one shape."""

    name: str
    x: FloatArray
    low: FloatArray
    high: FloatArray


@dataclass(frozen=True, slots=True)
class Panel:
    """One pair of axes: curves that share a unit, level lines (limits) with their names, bands."""

    y_label: str
    curves: tuple[Curve, ...]
    levels: tuple[tuple[str, float], ...] = ()
    bands: tuple[Band, ...] = ()


@dataclass(frozen=True, slots=True)
class Figure:
    """Panels above each other with one x axis; `marks` are instants (x, text)."""

    title: str
    x_label: str
    panels: tuple[Panel, ...]
    marks: tuple[tuple[float, str], ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class LogEntry:
    """Something that happened in a run: time [s], what (a sentence), the block and the line it concerns."""

    time: float
    text: str
    block: str = ""
    where: Where | None = None


@dataclass(frozen=True, slots=True)
class Status:
    """How a run ended: `done`, or `stopped` with the time [s], a sentence and the place."""

    code: str
    sentence: str = ""
    time: float = 0.0
    where: Where | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Pieces:
    """Signals at full resolution: the run cut into pieces on each of which every signal is smooth.

    `start` and `length` have shape (n,) [s]; `samples` has shape (n, 5, m) in SI: the m signals of `names` at
    0, 1/4, 1/2, 3/4 and 1 of each piece. A jump lies between two pieces: the last sample of one and the first of
    the next differ at the same instant. The run's last instant is the end of the last piece; a piece of length 0 shows
    values that held for an instant only (after the events and scans at the very end of the run).
    """

    names: tuple[str, ...]
    start: FloatArray
    length: FloatArray
    samples: FloatArray


@dataclass(frozen=True, slots=True)
class Trends:
    """The result of a time run: one time base, a column in SI for each signal, units for people, and pieces.

    `columns[name]` has the shape of `time`; `units[name]` says how people read it.
    """

    time: FloatArray
    columns: Mapping[str, FloatArray]
    units: Mapping[str, Unit]
    pieces: Pieces
    status: Status
    log: Sequence[LogEntry] = ()
    assumed: Sequence[str] = ()
    statistics: Mapping[str, int] = field(default_factory=dict)

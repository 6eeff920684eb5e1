"""Figures as PNG and SVG, the same bytes for the same data."""

from __future__ import annotations

import os
import sys
import textwrap
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from multiprocessing import get_context
from pathlib import Path
from typing import TYPE_CHECKING

from loopsim.results import Curve, Figure, Panel

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure as Page

PAGE = 150  # letters of a note in one line
# a `$` in a text of the user's is a dollar, not mathematics
SETTINGS = {"svg.hashsalt": "loopsim", "font.size": 9.0, "svg.fonttype": "path", "text.parse_math": False}
MOST_TICKS = 9
TICKS = {"s": (1, 2, 5, 10, 15, 20, 30, 60), "min": (1, 2, 5, 10, 15, 20, 30, 60), "h": (1, 2, 3, 4, 6, 12, 24, 48)}

Pen = tuple[str, float, "str | tuple[int, tuple[int, ...]]"]  # colour, width, dashes

COLOURS = ("#1b5e8c", "#c2571a", "#3b7d4f", "#b0348f", "#8a6d00", "#555555")  # told apart without colour vision
# the first lie below and are wider, those above have gaps: curves which agree all show
LINES = ((2.6, "-"), (1.7, (0, (6, 2))), (2.1, "-"), (1.4, (0, (4, 4))))
ALONE: Pen = ("#333333", 1.3, "-")
WIDTH, HEIGHT, HEAD, FOOT = 9.0, 2.3, 0.35, 0.5  # inches: the picture, one panel, above and below them
LABEL = -0.088  # of a panel's width: where the names of the y axes stand
LEFT, RIGHT = 0.09, 0.84  # margins as shares: room for axis labels and the legend
ROW = 0.13  # inches: one row of marks or notes
LETTER = 0.06  # inches: the width of a letter of a mark
FARTHEST = 0.7  # of the curves' range: a limit farther off is told by an arrow instead of squeezing the curves


class Drawing:
    """Pictures drawn beside other work, in processes of their own where a process can be copied, else at once.

    Drawing takes longer than most runs.
    """

    def __init__(self) -> None:
        self._pool: Executor | None = None
        self._drawn: list[Future[list[Path]]] = []

    def __enter__(self) -> Drawing:
        if sys.platform == "linux":
            count = os.cpu_count() or 1
            self._pool = ProcessPoolExecutor(count, get_context("fork"))
            for _ in range(count):
                self._pool.submit(_ready)
        return self

    def draw(self, figure: Figure, stem: Path) -> None:
        """Write `stem.png` and `stem.svg` by the end of the `with`."""
        if self._pool is None:
            write_pictures(figure, stem)
        else:
            self._drawn.append(self._pool.submit(write_pictures, figure, stem))

    def __exit__(self, kind: object, *_: object) -> None:
        if self._pool is not None:
            self._pool.shutdown(wait=kind is None, cancel_futures=kind is not None)
        if kind is not None:
            return
        for one in self._drawn:
            one.result()


def _ready() -> None:
    import matplotlib.backends.backend_agg
    import matplotlib.backends.backend_svg  # noqa: F401


def write_pictures(figure: Figure, stem: Path) -> list[Path]:
    """Write `stem.png` and `stem.svg`; settings of the user's own for pictures are left aside."""
    import matplotlib
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.backends.backend_svg import FigureCanvasSVG

    png, svg = (stem.with_name(f"{stem.name}.{ending}") for ending in ("png", "svg"))
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(SETTINGS)  # type: ignore[arg-type]
        drawing = _drawn(figure)
        FigureCanvasAgg(drawing).print_png(  # type: ignore[no-untyped-call]
            png, metadata={"Software": None}
        )
        FigureCanvasSVG(drawing).print_svg(  # type: ignore[no-untyped-call]
            svg, metadata={"Date": None, "Creator": None}
        )
    return [png, svg]


def _drawn(figure: Figure) -> Page:
    from matplotlib.figure import Figure as Page

    rows, notes = _mark_rows(figure), [line for note in figure.notes for line in textwrap.wrap(note, PAGE)]
    head, foot = HEAD + ROW * (max(rows, default=0) + 1), FOOT + ROW * len(notes)
    height = head + foot + HEIGHT * len(figure.panels)
    drawing = Page(figsize=(WIDTH, height))
    # fixed margins, without laying out twice
    drawing.subplots_adjust(left=LEFT, right=RIGHT, bottom=foot / height, top=1 - head / height, hspace=0.14)
    axes = list(drawing.subplots(len(figure.panels), 1, sharex=True, squeeze=False)[:, 0])
    _panels(axes, figure)
    _marks(axes, figure, rows)
    axes[-1].set_xlabel(figure.x_label)
    _ticks(axes[-1], figure)
    for one in axes:
        one.yaxis.set_label_coords(LABEL, 0.5)  # below each other, without measuring all the numbers
    drawing.text(0.01, 1 - 0.1 / height, figure.title, ha="left", va="top", fontsize=11)
    for number, note in enumerate(reversed(notes)):
        drawing.text(0.01, (0.08 + ROW * number) / height, note, ha="left", fontsize=7, color="#444444")
    return drawing


# ---------------------------------------------------------------- panels
def _panels(axes: list[Axes], figure: Figure) -> None:
    names = dict.fromkeys(curve.name for panel in figure.panels for curve in panel.curves if not curve.dashed)
    several = [name for name in names if name]
    pens = {name: (COLOURS[k % len(COLOURS)], *LINES[k % len(LINES)]) for k, name in enumerate(several)}
    if len(several) == 1:
        pens[several[0]] = (COLOURS[0], *ALONE[1:])
    legend: list[str] = []
    for one, panel in zip(axes, figure.panels, strict=True):
        _panel(one, panel, {**pens, "": ALONE})
        named = [curve.name for curve in panel.curves if curve.name and not curve.faint]
        if named and named != legend:
            one.legend(loc="center left", bbox_to_anchor=(1.01, 0.5), frameon=False, fontsize=8, handlelength=1.8)
        legend = named or legend


def _panel(axes: Axes, panel: Panel, pens: dict[str, Pen]) -> None:
    axes.margins(x=0)
    for band in panel.bands:
        axes.fill_between(band.x, band.low, band.high, step="post", color="#000000", alpha=0.07, lw=0, zorder=0)
        end = float(band.x[-1]), float(band.high[-2 if len(band.high) > 1 else -1])
        axes.annotate(band.name, end, xytext=(-3, -2), ha="right", va="top",
                      textcoords="offset points", fontsize=7, color="#666666")  # fmt: skip
    for curve in panel.curves:
        _curve(axes, curve, pens)
    _levels(axes, panel)
    axes.set_ylabel(panel.y_label)
    axes.grid(True, lw=0.3, color="#dddddd")
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)


def _curve(axes: Axes, curve: Curve, pens: dict[str, Pen]) -> None:
    shape = "steps-post" if curve.step else "default"
    if curve.dashed:
        axes.plot(
            curve.x, curve.y, color="#222222", lw=0.9, ls=(0, (4, 3)), label=curve.name, drawstyle=shape, zorder=4
        )
        return
    colour, width, dashes = pens[curve.name]
    if curve.faint:
        axes.plot(curve.x, curve.y, color=colour, lw=0.5, alpha=0.35, drawstyle=shape, zorder=1)
    else:
        axes.plot(
            curve.x, curve.y, color=colour, lw=width, ls=dashes, label=curve.name or None, drawstyle=shape, zorder=2
        )


def _levels(axes: Axes, panel: Panel) -> None:
    """Limits as lines where they are near the curves, else as words beside the panel."""
    low, high = axes.get_ylim()
    reach = FARTHEST * (high - low)
    for name, level in panel.levels:
        if low - reach <= level <= high + reach:
            axes.axhline(level, color="#999999", lw=0.9, dashes=(6, 3))
            axes.annotate(name, (1.0, level), xycoords=("axes fraction", "data"), xytext=(-3, 1), ha="right",
                          textcoords="offset points", fontsize=7, color="#666666")  # fmt: skip
    above = [f"{name} lies above" for name, level in panel.levels if level > high + reach]
    below = [f"{name} lies below" for name, level in panel.levels if level < low - reach]
    for place, side, names in ((1.0, "top", above), (0.0, "bottom", below)):
        axes.text(1.01, place, "\n".join(names), transform=axes.transAxes, va=side, fontsize=7, color="#666666")


def _ticks(axes: Axes, figure: Figure) -> None:
    """Ticks of a time axis as clocks have them."""
    from matplotlib.ticker import MultipleLocator

    word = figure.x_label.partition("[")[2].rstrip("]")
    step = next((one for one in TICKS.get(word, ()) if _span(figure)[1] <= MOST_TICKS * one), None)
    if step is not None:
        axes.xaxis.set_major_locator(MultipleLocator(step))


# ---------------------------------------------------------------- marks
def _span(figure: Figure) -> tuple[float, float]:
    first = figure.panels[0].curves[0].x
    return float(first[0]), max(float(first[-1]) - float(first[0]), 1e-12)


def _mark_rows(figure: Figure) -> list[int]:
    """The row, from below, in which the text of each mark has room."""
    begin, span = _span(figure)
    inches = WIDTH * (RIGHT - LEFT)
    taken: list[float] = []  # where each row is free from
    rows = []
    for x, text in figure.marks:
        place, room = (x - begin) / span * inches, LETTER * len(text) + 0.1
        place = min(place, max(inches - room, 0.0))
        row = next((number for number, end in enumerate(taken) if end <= place), len(taken))
        taken[row:] = [place + room, *taken[row + 1 :]]
        rows.append(row)
    return rows


def _marks(axes: list[Axes], figure: Figure, rows: list[int]) -> None:
    """A thin line through all panels for each instant, its text above the first."""
    begin, span = _span(figure)
    inches = WIDTH * (RIGHT - LEFT)
    for (x, text), row in zip(figure.marks, rows, strict=True):
        for one in axes:
            one.axvline(x, color="#777777", lw=0.7, ls=(0, (1, 2)), zorder=0.5)
        fits = (x - begin) / span * inches + LETTER * len(text) <= inches
        axes[0].annotate(text, (x, 1.0), xycoords=("data", "axes fraction"), xytext=(0, 3 + 72 * ROW * row),
                         textcoords="offset points", ha="left" if fits else "right", fontsize=7, color="#333333",
                         annotation_clip=False)  # fmt: skip

"""Figures as PNG and SVG, the same bytes for the same data."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from loopsim.results import Figure, Panel

if TYPE_CHECKING:
    from matplotlib.axes import Axes

# distinguishable without colour vision, also in grey through their line styles
PENS = (("#1b5e8c", "-"), ("#c2571a", "-"), ("#3b7d4f", "-"), ("#7b4ea3", "-"), ("#555555", "--"), ("#a67c00", "-."))
HEIGHT = 2.3  # inches of one panel


def write_pictures(figure: Figure, stem: Path) -> list[Path]:
    """Write `stem.png` and `stem.svg`."""
    import matplotlib
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.backends.backend_svg import FigureCanvasSVG
    from matplotlib.figure import Figure as Drawing

    with matplotlib.rc_context({"svg.hashsalt": "loopsim", "font.size": 9.0, "svg.fonttype": "path"}):
        height = 0.9 + HEIGHT * len(figure.panels)
        drawing = Drawing(figsize=(9.0, height))
        # fixed margins: room for axis labels, the legend and the marks, without laying out twice
        drawing.subplots_adjust(left=0.09, right=0.84, bottom=0.5 / height, top=1 - 0.6 / height, hspace=0.14)
        axes = drawing.subplots(len(figure.panels), 1, sharex=True, squeeze=False)[:, 0]
        names = dict.fromkeys(curve.name for panel in figure.panels for curve in panel.curves if not curve.dashed)
        pens = {name: PENS[place % len(PENS)] for place, name in enumerate(sorted(names, key=lambda one: one == ""))}
        for panel, one in zip(figure.panels, axes, strict=True):
            _panel(one, panel, pens)
        _marks(axes[0], figure)
        axes[-1].set_xlabel(figure.x_label)
        drawing.suptitle(figure.title, x=0.01, ha="left", fontsize=11)
        png, svg = stem.with_suffix(".png"), stem.with_suffix(".svg")
        FigureCanvasAgg(drawing).print_png(  # type: ignore[no-untyped-call]
            png, metadata={"Software": None}
        )
        FigureCanvasSVG(drawing).print_svg(  # type: ignore[no-untyped-call]
            svg, metadata={"Date": None, "Creator": None}
        )
    return [png, svg]


def _panel(axes: Axes, panel: Panel, pens: dict[str, tuple[str, str]]) -> None:
    for curve in panel.curves:
        if curve.dashed:
            axes.plot(curve.x, curve.y, color="#222222", lw=0.8, ls=(0, (4, 3)), label=curve.name, zorder=1)
            continue
        colour, style = pens[curve.name]
        shape = "steps-post" if curve.step else "default"
        axes.plot(curve.x, curve.y, style, color=colour, lw=1.2, label=curve.name, drawstyle=shape)
    for name, level in panel.levels:
        axes.axhline(level, color="#999999", lw=0.8, dashes=(6, 3))
        axes.annotate(
            name,
            (1.0, level),
            xycoords=("axes fraction", "data"),
            xytext=(-3, 2),
            textcoords="offset points",
            ha="right",
            fontsize=7,
            color="#666666",
        )
    axes.set_ylabel(panel.y_label)
    axes.grid(True, lw=0.3, color="#dddddd")
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    axes.margins(x=0)
    if any(curve.name for curve in panel.curves):
        axes.legend(loc="center left", bbox_to_anchor=(1.01, 0.5), frameon=False, fontsize=8, handlelength=1.8)


def _marks(axes: Axes, figure: Figure) -> None:
    for x, text in figure.marks:
        axes.axvline(x, ymin=0.94, color="#333333", lw=1.0)
        axes.annotate(text, (x, 1.0), xycoords=("data", "axes fraction"), xytext=(2, 2), textcoords="offset points",
                      fontsize=7, color="#333333")  # fmt: skip

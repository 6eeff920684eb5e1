"""Tables as text for a terminal or a file."""

from __future__ import annotations

import os
import shutil
import sys
import textwrap
from collections.abc import Iterable

from loopsim.results import Cell, Table

COLOURS = {"good": "36", "bad": "35;1", "open": "33"}
GAP = "   "


def render(tables: Iterable[Table], width: int | None = None, colour: bool | None = None) -> str:
    """The tables below each other; colour and width from the terminal unless they are given."""
    wide = width or (shutil.get_terminal_size((110, 24)).columns if sys.stdout.isatty() else 160)
    bright = colour if colour is not None else sys.stdout.isatty() and "NO_COLOR" not in os.environ
    return "\n".join(_table(table, wide, bright) for table in tables if table.rows or table.notes)


def _table(table: Table, width: int, colour: bool) -> str:
    lines = [table.title, "=" * min(len(table.title), width)]
    if table.rows:
        widths = _widths(table, width)
        if any(table.heads):
            lines += [
                _row([Cell(head) for head in table.heads], widths, False),
                "-" * min(sum(widths) + 3 * len(widths) - 3, width),
            ]
        lines += [_row(list(row), widths, colour) for row in table.rows]
    for note in table.notes:
        lines += textwrap.wrap(note, width, initial_indent="* ", subsequent_indent="  ")
    return "\n".join(lines) + "\n"


def _widths(table: Table, width: int) -> list[int]:
    """Column widths that fit; the first column gives way first."""
    columns = zip(table.heads, *[[cell.text for cell in row] for row in table.rows], strict=True)
    widths = [max(len(text) for text in column) for column in columns]
    excess = sum(widths) + len(GAP) * (len(widths) - 1) - width
    if excess > 0:
        widths[0] = max(16, widths[0] - excess)
    return widths


def _row(cells: list[Cell], widths: list[int], colour: bool) -> str:
    wrapped = [textwrap.wrap(cell.text, wide) or [""] for cell, wide in zip(cells, widths, strict=True)]
    lines = []
    for number in range(max(len(parts) for parts in wrapped)):
        parts = []
        for cell, lines_of, wide in zip(cells, wrapped, widths, strict=True):
            text = (lines_of[number] if number < len(lines_of) else "").ljust(wide)
            code = COLOURS.get(cell.tone)
            parts.append(f"\x1b[{code}m{text}\x1b[0m" if colour and code else text)
        lines.append(GAP.join(parts).rstrip())
    return "\n".join(lines)

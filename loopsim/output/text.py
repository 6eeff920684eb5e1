"""Tables as text for a terminal or a file."""

from __future__ import annotations

import os
import re
import shutil
import sys
import textwrap
from collections.abc import Iterable, Sequence

from loopsim.results import Cell, Table

COLOURS = {"good": "36", "bad": "35;1", "open": "33"}
WIDE_GAP, NARROW_GAP, NARROW = 3, 2, 100
UNIT = r"(?<=\d) (?=\S)"  # the space between a number and what it counts
JOIN = "\u00a0"  # stands between a number and its unit, which stay together


def _wrap(text: str, width: int, later: str = "", first: str = "") -> list[str]:
    """Lines of a text; numbers stay with their units, tags such as TIC-101 stay whole."""
    joined = re.sub(UNIT, JOIN, text)
    lines = textwrap.wrap(joined, width, initial_indent=first, subsequent_indent=later, break_on_hyphens=False)
    return [line.replace(JOIN, " ") for line in lines]


def render(tables: Iterable[Table], width: int | None = None, colour: bool | None = None) -> str:
    """The tables below each other, lines of `width` characters at most; colour and width from the terminal by default.

    The environment's NO_COLOR takes the colours away.
    """
    wide = width or (shutil.get_terminal_size((110, 24)).columns if sys.stdout.isatty() else 160)
    bright = colour if colour is not None else sys.stdout.isatty() and not os.environ.get("NO_COLOR")
    return "\n".join(_table(table, wide, bright) for table in tables if table.rows or table.notes)


def _table(table: Table, width: int, colour: bool) -> str:
    title = _clean(table.title)
    lines = [*_wrap(title, width), "=" * min(len(title), width)]
    if table.rows:
        lines += _grid(table, width, colour)
    for note in table.notes:
        lines += _wrap(_clean(note), width, later="  ", first="* ")
    return "\n".join(lines) + "\n"


def _grid(table: Table, width: int, colour: bool) -> list[str]:
    """Heads, a rule and the rows; columns that say nothing are left out."""
    heads = [Cell(_clean(head)) for head in table.heads]
    rows = [[Cell(_clean(cell.text), cell.tone) for cell in row] for row in table.rows]
    kept = [place for place in range(len(heads)) if any(row[place].text for row in (heads, *rows))]
    heads, rows = [heads[place] for place in kept], [[row[place] for place in kept] for row in rows]
    gap = WIDE_GAP if width >= NARROW else NARROW_GAP
    widths = _widths([[row[place].text for row in (heads, *rows)] for place in range(len(kept))], width, gap)
    if sum(widths) + gap * (len(widths) - 1) > width:
        return [line for row in rows for line in _upright(heads, row, width, colour)]
    shown = [_row(row, widths, gap, colour) for row in rows]
    if not any(head.text for head in heads):
        return shown
    return [_row(heads, widths, gap, False), "-" * (sum(widths) + gap * (len(widths) - 1)), *shown]


def _upright(heads: Sequence[Cell], row: Sequence[Cell], width: int, colour: bool) -> list[str]:
    """A row on a page too narrow for its columns: one cell below the other, each with its head before it."""
    lines = _wrap(row[0].text, width) or [""]
    for head, cell in zip(heads[1:], row[1:], strict=True):
        if cell.text:
            code = COLOURS.get(cell.tone)
            told = _wrap(f"{head.text}: {cell.text}" if head.text else cell.text, width, later="    ", first="  ")
            lines += [f"\x1b[{code}m{line}\x1b[0m" if colour and code else line for line in told]
    return lines


def _widths(columns: Sequence[Sequence[str]], width: int, gap: int) -> list[int]:
    """Column widths that fit if they can: the widest gives way first, down to its longest word."""
    widths = [max(len(text) for text in column) for column in columns]
    words = [
        max((len(word) for text in column for word in re.sub(UNIT, JOIN, text).split(" ")), default=1)
        for column in columns
    ]
    excess = sum(widths) + gap * (len(widths) - 1) - width
    while excess > 0:
        loose = [place for place in range(len(widths)) if widths[place] > words[place]]
        if not loose:
            break
        widths[max(loose, key=lambda place: widths[place])] -= 1
        excess -= 1
    return widths


def _row(cells: Sequence[Cell], widths: Sequence[int], gap: int, colour: bool) -> str:
    wrapped = [_wrap(cell.text, wide) or [""] for cell, wide in zip(cells, widths, strict=True)]
    lines = []
    for number in range(max(len(parts) for parts in wrapped)):
        parts = []
        for cell, lines_of, wide in zip(cells, wrapped, widths, strict=True):
            text = (lines_of[number] if number < len(lines_of) else "").ljust(wide)
            code = COLOURS.get(cell.tone)
            parts.append(f"\x1b[{code}m{text}\x1b[0m" if colour and code else text)
        lines.append((" " * gap).join(parts).rstrip())
    return "\n".join(lines)


def _clean(text: str) -> str:
    """A text of the user's without what would steer a terminal."""
    return "".join(one if one.isprintable() else " " for one in text)

"""Recorded series that an event follows: a CSV file with a time column and named columns."""

from __future__ import annotations

import csv
import math
import re
from pathlib import Path

from loopsim.documents.types import Event
from loopsim.errors import fail, nearest
from loopsim.language.units import Unit, UnitError, parse_unit, to_si

HEAD = re.compile(r"^(?P<name>.*?)\s*(?:\[(?P<unit>[^\]]*)\])?$")


def read_series(event: Event, unit: Unit, air_pressure: float) -> tuple[list[float], list[float]]:
    """Times [s] and values [SI] of the column that an event names; the file is looked for beside the scenario.

    The first column is the time (`time [s]`, `time [min]`, …); values are in the event's `unit:`, else in the one in
    brackets behind the column's name.
    """
    path = Path(event.where.file).parent / event.file
    rows = _rows(path, event)
    heads = [_split(head) for head in rows[0]]
    names = [name for name, _ in heads]
    if event.column not in names:
        raise fail(f"{path} has no column '{event.column}'", event.where, nearest(event.column, names, "columns"))
    place = names.index(event.column)
    time_unit = _unit(heads[0][1] or "s", event)
    own = event.unit or _unit(heads[place][1], event)
    if own.dimension != unit.dimension or own.point != unit.point:
        raise fail(f"column '{event.column}' is in {own.text} where {unit.text} is wanted", event.where)
    times = [to_si(_number(row[0], path, line, event), time_unit) for line, row in enumerate(rows[1:], 2)]
    values = [to_si(_number(row[place], path, line, event), own, air_pressure) for line, row in enumerate(rows[1:], 2)]
    if times != sorted(set(times)):
        raise fail(f"the times in {path} do not rise", event.where, "sort the rows and take repeated times out")
    return times, values


def _rows(path: Path, event: Event) -> list[list[str]]:
    try:
        with path.open(newline="", encoding="utf-8-sig") as file:
            rows = [row for row in csv.reader(file) if row]
    except OSError as error:
        raise fail(f"the file {path} cannot be read: {error.strerror}", event.where) from None
    except UnicodeDecodeError:
        raise fail(f"the file {path} is not text in UTF-8", event.where) from None
    width = len(rows[0]) if rows else 0
    if len(rows) < 2 or any(len(row) != width for row in rows):
        raise fail(f"{path} is not a table: a head and at least one row of {width} columns are wanted", event.where)
    return rows


def _split(head: str) -> tuple[str, str]:
    match = HEAD.match(head.strip())
    assert match is not None
    return match["name"], match["unit"] or ""


def _unit(text: str, event: Event) -> Unit:
    try:
        return parse_unit(text)
    except UnitError as error:
        raise fail(f"the column's unit '{text}' is not known: {error.what}", event.where, error.hint) from None


def _number(text: str, path: Path, line: int, event: Event) -> float:
    try:
        value = float(text)
    except ValueError:
        raise fail(f"{path}, line {line}: '{text}' is not a number", event.where) from None
    if not math.isfinite(value):
        raise fail(f"{path}, line {line}: '{text}' is not a finite number", event.where)
    return value

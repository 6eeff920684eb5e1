"""`steady`: the operating point of plant and controllers together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from loopsim.documents.load import read_scenario
from loopsim.errors import fail, nearest
from loopsim.language.units import from_si
from loopsim.model.choice import Source, scenario_sources, source_of
from loopsim.model.graph import dead_time_in_loop, influences
from loopsim.model.numbers import System
from loopsim.model.rest import OperatingPoint, eigenvalues, rest
from loopsim.model.types import Model
from loopsim.results import Cell, Table


@dataclass(frozen=True, slots=True)
class SteadyReport:
    """What `steady` gives."""

    tables: tuple[Table, ...]
    json: dict[str, Any]


def steady_values(plant: Path, strategies: Sequence[Path] = ()) -> dict[str, float]:
    """The value at rest of every signal [SI]."""
    model = source_of(plant, strategies).law()
    point = rest(model)
    return {name: point.values[model.in_use.get(name, name)] for name in model.signals}


def steady(source: Source, points: Sequence[str] = ("",)) -> SteadyReport:
    """The operating point of a model, at its own values or at named points of its plant."""
    for name in points:
        if name and name not in source.points:
            raise fail(f"no operating point is called '{name}'", None, nearest(name, source.points, "points"))
    found = {name: _steady(source, name) for name in points}
    tables = [table for name, one in found.items() for table in _steady_tables(name or source.name, *one)]
    if list(points) == [""]:
        return SteadyReport(tuple(tables), _steady_json(*found[""]))
    return SteadyReport(tuple(tables), {"points": {name: _steady_json(*one) for name, one in found.items()}})


def _steady(source: Source, point: str) -> tuple[Model, OperatingPoint, bool | None]:
    law, found = source.law(point), source.rested(point)
    timed = source.timed(point=point)
    if dead_time_in_loop(timed, influences(timed)):
        return law, found, None
    roots = eigenvalues(System(law), found.values)
    return law, found, bool(all(root.real < 1e-9 for root in roots))


def _steady_tables(name: str, model: Model, point: OperatingPoint, stable: bool | None) -> list[Table]:
    rows = []
    for signal, about in model.signals.items():
        value = point.values.get(model.in_use.get(signal, signal))
        if value is not None:
            rows.append((Cell(signal), Cell(f"{from_si(value, about.unit, model.air_pressure):.5g}"),
                         Cell(about.unit.text), Cell(about.about)))  # fmt: skip
    words = {True: "The point is stable.", False: "The point is NOT stable: left alone, the plant goes away from it.",
             None: "Stability is not told: a dead time lies in a loop, so it is a question for the roots."}  # fmt: skip
    notes = [one.sentence for one in point.unreached] + [words[stable], *(f"assumed: {one}" for one in model.assumed)]
    return [Table(f"{name} at rest", ("signal", "value", "unit", ""), tuple(rows), tuple(notes))]


def _steady_json(model: Model, point: OperatingPoint, stable: bool | None) -> dict[str, Any]:
    signals: dict[str, dict[str, Any]] = {}
    for name, about in model.signals.items():
        value = point.values.get(model.in_use.get(name, name))
        if value is not None:
            signals[name] = {"value": from_si(value, about.unit, model.air_pressure), "unit": about.unit.text}
    limits = [_limit(name, one["value"]) for name, one in signals.items() if one["unit"] == "%"]
    report: dict[str, Any] = {"signals": signals, "stable": stable, "limits": limits}
    report["unreached"] = [one.sentence for one in point.unreached]
    return {**report, "assumed": list(model.assumed)}


def _limit(name: str, value: float) -> dict[str, Any]:
    """How far a signal in per cent is from nought and a hundred."""
    room = min(value, 100.0 - value)
    return {"signal": name, "value": value, "low": 0.0, "high": 100.0, "headroom_percent": room}


def model_source(path: Path, strategies: Sequence[Path], strategy: str) -> Source:
    """The model that a command's words mean: a plant with strategies, or one strategy of a scenario."""
    if not path.is_file():
        raise fail(f"there is no file '{path}'", None, "name a plant file or a scenario file")
    if not path.read_text("utf-8", errors="replace").startswith("scenario:"):
        return source_of(path, strategies)
    scenario = read_scenario(path)
    name = strategy or next(iter(scenario.strategies))
    return scenario_sources(path, name)[1][name]

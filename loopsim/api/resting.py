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
from loopsim.model.numbers import System, system_of
from loopsim.model.rest import OperatingPoint, all_rests, eigenvalues, rest
from loopsim.model.types import Model
from loopsim.results import Cell, Table

LIMITS = ("value", "low", "high", "headroom_percent")


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


def steady(source: Source, points: Sequence[str] = ("",), every: bool = False) -> SteadyReport:
    """The operating point of a model, at its own values or at named points of its plant; `every`: other rests too."""
    for name in points:
        if name and name not in source.points:
            raise fail(f"no operating point is called '{name}'", None, nearest(name, source.points, "points"))
    found = {name: _steady(source, name, every) for name in points}
    tables = tuple(table for name, one in found.items() for table in _steady_tables(name or source.name, one))
    documents = {name: _steady_json(one, every) for name, one in found.items()}
    return SteadyReport(tables, documents[""] if list(points) == [""] else {"points": documents})


@dataclass(frozen=True, slots=True)
class _Steady:
    """A law model, where it rests, and whether each of these is stable (None: not told)."""

    model: Model
    rests: tuple[OperatingPoint, ...]
    stable: tuple[bool | None, ...]


def _steady(source: Source, point: str, every: bool) -> _Steady:
    law, first = source.law(point), source.rested(point)
    rests = (first, *all_rests(law)[1:]) if every else (first,)
    timed = source.timed(point=point)
    if dead_time_in_loop(timed, influences(timed)):
        return _Steady(law, rests, (None,) * len(rests))
    system = system_of(law)
    return _Steady(law, rests, tuple(_is_stable(system, one) for one in rests))


def _is_stable(system: System, point: OperatingPoint) -> bool:
    return all(root.real < 1e-9 for root in eigenvalues(system, point.values).tolist())


def _steady_tables(name: str, found: _Steady) -> list[Table]:
    model, first = found.model, found.rests[0]
    rows = []
    for signal, about in model.signals.items():
        flat = model.in_use.get(signal, signal)
        if flat in first.values:
            values = [f"{from_si(one.values[flat], about.unit, model.air_pressure):.5g}" for one in found.rests]
            rows.append(tuple(Cell(text) for text in (signal, *values, about.unit.text, about.about)))
    words = {True: "The point is stable.", False: "The point is NOT stable: left alone, the plant goes away from it.",
             None: "Stability is not told: a loop has a dead time, which this version does not compute."}  # fmt: skip
    notes = [one.sentence for one in first.unreached]
    notes += [words[found.stable[0]]] if len(found.rests) == 1 else _stabilities(found.stable)
    notes += [f"assumed: {one}" for one in model.assumed]
    columns = ("value",) if len(found.rests) == 1 else tuple(f"rest {number + 1}" for number in range(len(found.rests)))
    whole = Table(f"{name} at rest", ("signal", *columns, "unit", ""), tuple(rows), tuple(notes))
    return [whole, _limit_table(model, first)]


def _stabilities(stable: Sequence[bool | None]) -> list[str]:
    words = {True: "is stable", False: "is NOT stable", None: "may be stable or not: a dead time lies in a loop"}
    told = [f"Rest {number} {words[one]}." for number, one in enumerate(stable, 1)]
    return [*told, "Found by a search from many starts; that there are no more is not proven."]


def _steady_json(found: _Steady, every: bool) -> dict[str, Any]:
    documents = [_rest_json(found.model, *one) for one in zip(found.rests, found.stable, strict=True)]
    others = {"others": documents[1:]} if every else {}
    return {**documents[0], **others, "assumed": list(found.model.assumed)}


def _rest_json(model: Model, point: OperatingPoint, stable: bool | None) -> dict[str, Any]:
    signals: dict[str, dict[str, Any]] = {}
    for name, about in model.signals.items():
        value = point.values.get(model.in_use.get(name, name))
        if value is not None:
            signals[name] = {"value": from_si(value, about.unit, model.air_pressure), "unit": about.unit.text}
    limits = _limits(model, point)
    unreached = [one.sentence for one in point.unreached]
    return {"signals": signals, "stable": stable, "limits": limits, "unreached": unreached}


def _limits(model: Model, point: OperatingPoint) -> list[dict[str, Any]]:
    """How far every computed signal in per cent is from its ends: a controller's limits, else 0 % and 100 %."""
    found = []
    for name, about in model.signals.items():
        value = point.values.get(model.in_use.get(name, name))
        if value is None or about.unit.text != "%" or name in model.slots:
            continue
        ends = [model.slots.get(f"{about.tag}.limits.{end}") for end in ("low", "high")]
        own = any(one.out == name for one in model.controllers)
        low, high = (100.0 * end.value if own and end else bare for end, bare in zip(ends, (0.0, 100.0), strict=True))
        room = min(100.0 * value - low, high - 100.0 * value)
        found.append({"signal": name, "value": 100.0 * value, "low": low, "high": high, "headroom_percent": room})
    return found


def _limit_table(model: Model, point: OperatingPoint) -> Table:
    rows = [
        tuple(Cell(text) for text in (one["signal"], *(f"{one[key]:.4g} %" for key in LIMITS)))
        for one in _limits(model, point)
    ]
    return Table("room to the limits", ("signal", "value", "low", "high", "room"), tuple(rows))


def model_source(path: Path, strategies: Sequence[Path], strategy: str) -> Source:
    """The model that a command's words mean: a plant with strategies, or one strategy of a scenario."""
    if not path.is_file():
        raise fail(f"there is no file '{path}'", None, "name a plant file or a scenario file")
    if not path.read_text("utf-8", errors="replace").startswith("scenario:"):
        return source_of(path, strategies)
    scenario = read_scenario(path)
    name = strategy or next(iter(scenario.strategies))
    return scenario_sources(path, name)[1][name]

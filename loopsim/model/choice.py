"""Which model a command means: a plant with strategies, or one strategy of a scenario."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import lru_cache, partial
from pathlib import Path
from typing import Any

from loopsim.documents.catalogue import Catalogue
from loopsim.documents.load import read_diagram, read_scenario
from loopsim.documents.types import Diagram, Given, Scenario
from loopsim.errors import InputError, Problems, Where, fail, nearest
from loopsim.model.assemble import assemble
from loopsim.model.audit import audit
from loopsim.model.rest import OperatingPoint, rest
from loopsim.model.types import Model


@dataclass(frozen=True)
class Source:
    """A plant and strategies as read, and the library that they draw on.

    Models and rests are kept once they have been asked for: several scenarios share them.
    """

    name: str
    diagrams: tuple[Diagram, ...]
    catalogue: Catalogue
    values: Mapping[str, Given] = field(default_factory=dict)
    _kept: dict[tuple[object, ...], Any] = field(default_factory=dict)

    def law(self, point: str = "") -> Model:
        """The continuous law of all of it, at an operating point of the plant ('' for its own values)."""
        make = partial(assemble, self.diagrams, self.catalogue, law=True, values=self.values, point=point)
        law: Model = self._once(("law", point), make)
        return law

    def rested(self, point: str = "") -> OperatingPoint:
        """Where plant and controllers rest together, signs audited. Raises `ComputationError`, `InputError`."""
        found: OperatingPoint = self._once(("rest", point), partial(_audited, self.law(point)))
        return found

    def timed(self, free: frozenset[str] = frozenset(), point: str = "") -> Model:
        """What is simulated; `free` names what events may change."""
        make = partial(assemble, self.diagrams, self.catalogue, free=free, values=self.values, point=point)
        timed: Model = self._once(("timed", free, point), make)
        return timed

    def _once(self, key: tuple[object, ...], make: Callable[[], Any]) -> Any:
        if key not in self._kept:
            self._kept[key] = make()
        return self._kept[key]

    @property
    def points(self) -> tuple[str, ...]:
        """The names of the plant's operating points."""
        return tuple(name for diagram in self.diagrams for name in diagram.points)


def _audited(law: Model) -> OperatingPoint:
    found = rest(law)
    problems = audit(law, found.wished)
    if problems:
        raise InputError(problems)
    return found


def source_of(plant: Path, strategies: Sequence[Path], name: str = "", asked_at: Where | None = None) -> Source:
    """Read a plant and strategies; all problems of all files together. Files that have not changed are read once."""
    return _source(plant, tuple(strategies), name or plant.stem, asked_at, _stamps(plant, strategies))


def _stamps(plant: Path, strategies: Sequence[Path]) -> tuple[tuple[str, int, int], ...]:
    """When and how large the files are that a model is made from: these, and the blocks beside the plant."""
    files = [plant, *strategies, *sorted((plant.parent / "blocks").rglob("*.yaml"))]
    stats = [(str(path), path.stat()) for path in files if path.is_file()]
    return tuple((path, stat.st_mtime_ns, stat.st_size) for path, stat in stats)


@lru_cache(maxsize=64)
def _source(
    plant: Path,
    strategies: tuple[Path, ...],
    name: str,
    asked_at: Where | None,
    stamps: tuple[tuple[str, int, int], ...],
) -> Source:
    problems = Problems()
    diagrams: list[Diagram] = []
    for path in (plant, *strategies):
        with problems.collecting():
            diagrams.append(read_diagram(path, asked_at))
    problems.raise_if_any()
    return Source(name, tuple(diagrams), Catalogue(plant.parent))


def scenario_sources(path: Path, only: str = "") -> tuple[Scenario, dict[str, Source]]:
    """A scenario and the models of its strategies; `only` picks one of them by name."""
    scenario = read_scenario(path)
    if only and only not in scenario.strategies:
        hint = nearest(only, scenario.strategies, "strategies")
        raise fail(f"the scenario has no strategy '{only}'", scenario.where, hint)
    problems, found = Problems(), dict[str, Source]()
    for name, files in scenario.strategies.items():
        if only and name != only:
            continue
        with problems.collecting():
            paths = [path.parent / one for one in files]
            found[name] = source_of(path.parent / scenario.plant, paths)
    problems.raise_if_any()
    return scenario, found

"""Which model a command means: a plant with strategies, or one strategy of a scenario."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from loopsim.documents.library import Library
from loopsim.documents.load import read_diagram, read_scenario
from loopsim.documents.types import Diagram, Given, Scenario
from loopsim.errors import Problems, Where, fail, nearest
from loopsim.model.assemble import assemble
from loopsim.model.types import Model


@dataclass(frozen=True, slots=True)
class Source:
    """A plant and strategies as read, and the library that they draw on."""

    name: str
    diagrams: tuple[Diagram, ...]
    library: Library
    values: Mapping[str, Given] = field(default_factory=dict)

    def law(self, point: str = "") -> Model:
        """The continuous law of all of it, at an operating point of the plant ('' for its own values)."""
        return assemble(self.diagrams, self.library, law=True, values=self.values, point=point)

    def timed(self, free: frozenset[str] = frozenset(), point: str = "") -> Model:
        """What is simulated; `free` names what events may change."""
        return assemble(self.diagrams, self.library, free=free, values=self.values, point=point)

    @property
    def points(self) -> tuple[str, ...]:
        """The names of the plant's operating points."""
        return tuple(name for diagram in self.diagrams for name in diagram.points)


def source_of(plant: Path, strategies: Sequence[Path], name: str = "", asked_at: Where | None = None) -> Source:
    """Read a plant and strategies; all problems of all files together."""
    problems = Problems()
    diagrams: list[Diagram] = []
    for path in (plant, *strategies):
        with problems.collecting():
            diagrams.append(read_diagram(path, asked_at))
    problems.raise_if_any()
    return Source(name or plant.stem, tuple(diagrams), Library(plant.parent))


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
            found[name] = source_of(path.parent / scenario.plant, paths, name, scenario.where)
    problems.raise_if_any()
    return scenario, found

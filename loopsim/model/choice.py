"""Which model a command means: a plant with strategies, or one strategy of a scenario."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cache, lru_cache
from pathlib import Path
from typing import Any

from loopsim import store
from loopsim.documents.catalogue import Catalogue, shipped
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

    Models and rests are kept once they have been asked for, on disk too: several scenarios share them, and a plant
    whose files have not changed is not read again. `key` names the files' contents, '' for nothing kept on disk.
    """

    name: str
    plant: Path
    strategies: tuple[Path, ...] = ()
    asked_at: Where | None = None
    values: Mapping[str, Given] = field(default_factory=dict)
    key: str = ""
    _kept: dict[str, Any] = field(default_factory=dict)

    @property
    def diagrams(self) -> tuple[Diagram, ...]:
        """The plant and the strategies. Raises `InputError` with all problems of all files."""
        found: tuple[Diagram, ...] = self.once("diagrams", self._read)
        return found

    @property
    def catalogue(self) -> Catalogue:
        """The blocks that they can use."""
        if "catalogue" not in self._kept:
            self._kept["catalogue"] = Catalogue(self.plant.parent)
        found: Catalogue = self._kept["catalogue"]
        return found

    def law(self, point: str = "") -> Model:
        """The continuous law of all of it, at an operating point of the plant ('' for its own values)."""
        return self._model(f"law at {point}", law=True, point=point)

    def rested(self, point: str = "") -> OperatingPoint:
        """Where plant and controllers rest together, signs audited. Raises `ComputationError`, `InputError`."""
        found: OperatingPoint = self.once(f"rest at {point}", lambda: _audited(self.law(point)))
        return found

    def timed(self, free: frozenset[str] = frozenset(), point: str = "") -> Model:
        """What is simulated; `free` names what events may change."""
        return self._model(f"timed at {point} free {sorted(free)}", free=free, point=point)

    def _model(self, what: str, **choices: Any) -> Model:
        def make() -> Model:
            made = assemble(self.diagrams, self.catalogue, values=self.values, **choices)
            return replace(made, key=store.digest([self.key, what]) if self.key else "")

        found: Model = self.once(what, make)
        return found

    def once(self, what: str, make: Callable[[], Any]) -> Any:
        """What was made under this name before, in this process or an earlier one; else made now."""
        if what not in self._kept:
            self._kept[what] = store.kept(store.digest([self.key, what]), make) if self.key else make()
        return self._kept[what]

    def _read(self) -> tuple[Diagram, ...]:
        problems = Problems()
        diagrams: list[Diagram] = []
        for path in (self.plant, *self.strategies):
            with problems.collecting():
                diagrams.append(read_diagram(path, self.asked_at))
        problems.raise_if_any()
        return tuple(diagrams)

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
    return _source(plant, tuple(strategies), name or plant.stem, asked_at, _contents(plant, strategies))


def _contents(plant: Path, strategies: Sequence[Path]) -> str:
    """A name for what a model is made from: these files, the blocks beside the plant, those shipped; '' if unread."""
    beside = sorted((plant.parent / "blocks").rglob("*.yaml"))
    try:
        return store.digest([_shipped_blocks(), *_parts([plant, *strategies, *beside])])
    except OSError:
        return ""


@cache
def _shipped_blocks() -> str:
    return store.digest(_parts(sorted(shipped("blocks").rglob("*.yaml"))))


def _parts(paths: Iterable[Path]) -> Iterator[str | bytes]:
    for path in paths:
        yield str(path)
        yield path.read_bytes()


@lru_cache(maxsize=64)
def _source(plant: Path, strategies: tuple[Path, ...], name: str, asked_at: Where | None, key: str) -> Source:
    source = Source(name, plant, strategies, asked_at, key=key)
    source.diagrams  # noqa: B018 - mistakes are told now
    return source


def _scenario(path: Path) -> Scenario:
    """A scenario file, read again only when it or the names beside it have changed."""
    try:
        beside = sorted(one.name for one in path.parent.iterdir())
        key = store.digest([str(path), path.read_bytes(), *beside])
    except OSError:
        return read_scenario(path)
    return store.kept(key, lambda: read_scenario(path))


def scenario_sources(path: Path, only: str = "") -> tuple[Scenario, dict[str, Source]]:
    """A scenario and the models of its strategies; `only` picks one of them by name."""
    scenario = _scenario(path)
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

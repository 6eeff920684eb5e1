"""`check`: files read and checked, everything that is wrong told together."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from loopsim.documents.load import read_document
from loopsim.documents.types import Block, Diagram, Scenario
from loopsim.errors import ComputationError, InputError, Problems, fail
from loopsim.model.choice import Source, scenario_sources, source_of
from loopsim.simulation.analysis import Wishes
from loopsim.simulation.case import case_of
from loopsim.simulation.generate import generate
from loopsim.simulation.machine import build


def check(paths: Sequence[Path], strategies: Sequence[Path] = ()) -> list[str]:
    """Notes on files that are in order. Raises `InputError` with all problems of all files.

    A plant is checked with the strategies laid over it; a scenario with each of its own; signs of loops too. Plants and
    strategies that a scenario among the files uses are checked with it.
    """
    problems, notes = Problems(), list[str]()
    used = set[Path]().union(*(_used_by(path) for path in paths))
    for path in paths:
        if path.resolve() in used:
            continue
        with problems.collecting():
            notes += _one(path, strategies, problems)
    problems.raise_if_any()
    return list(dict.fromkeys(notes))


def _used_by(path: Path) -> set[Path]:
    """The plant and strategies of a scenario file; nothing for other files and those that cannot be read."""
    try:
        document = read_document(path)
    except InputError:
        return set()
    if not isinstance(document, Scenario):
        return set()
    names = {document.plant, *(name for files in document.strategies.values() for name in files)}
    return {(path.parent / name).resolve() for name in names}


def _one(path: Path, strategies: Sequence[Path], problems: Problems) -> list[str]:
    document = read_document(path)
    if isinstance(document, Block):
        return []
    if isinstance(document, Scenario):
        return _scenario(path, problems)
    assert isinstance(document, Diagram)
    if document.kind == "strategy":
        return [f"{path}: a strategy alone; it is checked in full with `loopsim check PLANT --with {path}`"]
    return _source(source_of(path, strategies))


def _scenario(path: Path, problems: Problems) -> list[str]:
    scenario, sources = scenario_sources(path)
    notes: list[str] = []
    for name, source in sources.items():
        with problems.collecting():
            try:
                case = case_of(name, scenario, source)
                notes += [f"{name}: {note}" for note in case.model.notes]
                notes += [f"{name}: assumed {one}" for one in case.model.assumed]
            except ComputationError as error:
                notes.append(f"{name}: {error.problems[0].what}")
    return notes


def _source(source: Source) -> list[str]:
    model = source.timed()
    notes = [*model.notes, *(f"assumed: {one}" for one in model.assumed)]
    try:
        notes += [one.sentence for one in source.rested().unreached]
    except ComputationError as error:
        notes.append(error.problems[0].what)
    return notes


def generated_text(path: Path, strategies: Sequence[Path] = ()) -> str:
    """The text that is run for a plant, or for the first strategy of a scenario."""
    document = read_document(path)
    if isinstance(document, Block):
        raise fail(f"'{path}' is a block; code is made for a plant or a scenario", document.where)
    source = (
        next(iter(scenario_sources(path)[1].values()))
        if isinstance(document, Scenario)
        else source_of(path, strategies)
    )
    model = source.timed()
    names = tuple(name for name in model.signals if name in model.assignments or name in model.states)
    return build(generate(model, Wishes(recorded=names)).text, native=False).text

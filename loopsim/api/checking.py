"""`check`: files read and checked, everything that is wrong told together."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from loopsim.api.listing import key_text, text
from loopsim.api.running import time_models
from loopsim.documents.load import catalogue_around, read_document
from loopsim.documents.types import Block, Diagram, Scenario, Use
from loopsim.errors import ComputationError, InputError, Problems, fail
from loopsim.model.choice import Source, scenario_sources, source_of
from loopsim.model.types import Model
from loopsim.simulation.analysis import Wishes
from loopsim.simulation.check_case import run_check
from loopsim.simulation.generate import generate
from loopsim.simulation.machine import build
from loopsim.study.checks import check_scenario


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
        return _block(path, document, problems)
    if isinstance(document, Scenario):
        return _scenario(path, problems)
    assert isinstance(document, Diagram)
    if document.kind == "strategy":
        return [f"{path}: a strategy alone; it is checked in full with `loopsim check PLANT --with {path}`"]
    source = source_of(path, strategies)
    return _notes(source.timed(), source, resting=True)


def _block(path: Path, block: Block, problems: Problems) -> list[str]:
    """A block's `check:` cases are carried out."""
    agreed = 0
    for check in block.checks:
        with problems.collecting():
            try:
                value, agrees = run_check(block, check, catalogue_around(path))
            except ComputationError as error:
                problems.add(f"the check cannot be carried out: {error.problems[0].what}", check.where)
                continue
            agreed += agrees
            if not agrees:
                unit = f" {check.expected.unit.text}" if check.expected.unit is not None else ""
                what = f"the check gives {value:.9g}{unit}, where its source says {check.expected.text}"
                problems.add(what, check.where, f"within {check.within.text} of it is allowed")
    return (
        [f"{path}: {agreed} check{'s agree' if agreed > 1 else ' agrees'} with what the source says"] if agreed else []
    )


def _scenario(path: Path, problems: Problems) -> list[str]:
    scenario, sources = scenario_sources(path)
    notes: list[str] = []
    models = time_models(scenario, sources)
    check_scenario(scenario, models, problems)
    for name, source in sources.items():
        with problems.collecting():
            notes += [f"{name}: {note}" for note in _notes(models[name], source, scenario.starts == "steady")]
    return notes


def _notes(model: Model, source: Source, resting: bool) -> list[str]:
    """What is worth knowing of a model that is in order; signs are audited where it rests."""
    notes = [*model.notes, *_replaced(source), *(f"assumed: {one}" for one in model.assumed)]
    if not resting:
        return notes
    try:
        notes += [one.sentence for one in source.rested().unreached]
    except ComputationError as error:
        notes.append(error.problems[0].what)
    return notes


def _replaced(source: Source) -> list[str]:
    """Where a strategy's wire takes the place of a value or default of a block that is not its own."""
    notes = []
    for strategy in source.diagrams:
        if strategy.kind != "strategy":
            continue
        for wire in strategy.wires:
            tag, _, port = wire.target.partition(".")
            uses = [one.blocks[tag] for one in source.diagrams if one is not strategy and tag in one.blocks]
            for old in (old for use in uses if (old := _stood(source, use, port))):
                notes.append(f"the wire '{wire.source} -> {wire.target}' takes the place of {old}")
    return notes


def _stood(source: Source, use: Use, port: str) -> str:
    """What stood at an input before a wire: its value or its default; '' for neither."""
    if port in use.values:
        return f"the value {text(use.values[port].value)}"
    inputs = {key_text(one.key): one for one in source.catalogue.block(use.block).inputs}
    default = inputs[port].default if port in inputs else None
    return f"the default {text(default)}" if default is not None else ""


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

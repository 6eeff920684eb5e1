"""One strategy of one scenario, from files to trends."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

from loopsim.documents.types import Scenario
from loopsim.language.units import to_si
from loopsim.model.choice import Source
from loopsim.model.rest import OperatingPoint
from loopsim.model.types import Model
from loopsim.simulation.actions import free_names
from loopsim.simulation.conditions import resolve
from loopsim.simulation.run import PATIENCE, RunResult, prepare, program_of, run

ROWS = 1000  # recorded rows of a run that does not say how often it records


@dataclass(frozen=True, slots=True)
class Case:
    """A strategy ready to run: its time model, its law, and where it rests (None for `starts: given`)."""

    name: str
    scenario: Scenario
    model: Model
    law: Model
    point: OperatingPoint | None


def case_of(name: str, scenario: Scenario, source: Source, point: str = "") -> Case:
    """Assemble, find the rest, and audit the signs.

    Raises `InputError` for wrong signs and other mistakes, `ComputationError` where there is no rest.
    """
    return at_rest(assembled(name, scenario, source, point), source, point)


def assembled(name: str, scenario: Scenario, source: Source, point: str = "") -> Case:
    """A case whose rest is still to be found."""
    law = source.law(point)
    return Case(name, scenario, source.timed(free_names(scenario.events, law), point), law, None)


def at_rest(case: Case, source: Source, point: str = "") -> Case:
    """The case at its operating point, where it starts steady."""
    return replace(case, point=source.rested(point)) if case.scenario.starts == "steady" else case


def text_of(case: Case, judged: Iterable[str]) -> str:
    """The program of a case as text, ready to be compiled; its rest need not be known."""
    return program_of(case.model, case.scenario, _judged(case, judged), recorded_names(case))[1].text


def run_case(
    case: Case, judged: Iterable[str], number: int = 0, native: bool = True, patience: float = PATIENCE
) -> RunResult:
    """The run of a case; `judged` are names as people write them, unknown ones left out; `patience` as in `run`."""
    scenario = case.scenario
    lasts = to_si(scenario.lasts.value, scenario.lasts.unit) if scenario.lasts.unit else scenario.lasts.value
    every = lasts / ROWS
    if scenario.record_every is not None and scenario.record_every.unit is not None:
        every = to_si(scenario.record_every.value, scenario.record_every.unit)
    wanted, recorded = _judged(case, judged), recorded_names(case)
    return run(prepare(case.model, case.law, case.point, scenario, wanted, recorded, number, native), every, patience)


def _judged(case: Case, names: Iterable[str]) -> dict[str, str]:
    found = {name: resolve(case.model, name) for name in names}
    return {name: flat for name, flat in found.items() if flat is not None}


def recorded_names(case: Case) -> dict[str, str]:
    """What trends hold: the name that people read -> the model's name."""
    chosen = case.scenario.record_signals
    names = chosen if chosen is not None else tuple(case.model.signals)
    found = {name: resolve(case.model, name) for name in names}
    return {name: flat for name, flat in found.items() if flat is not None}

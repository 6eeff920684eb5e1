"""One strategy of one scenario, from files to trends."""

from __future__ import annotations

from collections.abc import Iterable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

from loopsim.documents.types import Scenario
from loopsim.language.units import to_si
from loopsim.model.choice import Source
from loopsim.model.rest import OperatingPoint
from loopsim.model.types import Model
from loopsim.simulation.actions import free_names
from loopsim.simulation.conditions import resolve
from loopsim.simulation.machine import build
from loopsim.simulation.run import RunResult, prepare, program_of, run

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
    law = source.law(point)
    model = source.timed(free_names(scenario.events, law), point)
    resting = source.rested(point) if scenario.starts == "steady" else None
    return Case(name, scenario, model, law, resting)


def compile_ahead(cases: Iterable[tuple[Case, Iterable[str]]]) -> None:
    """Compile the programs of several cases, each with the names it judges, at once.

    Most of that work runs outside Python and can be shared out.
    """
    texts = {
        program_of(one.model, one.scenario, _judged(one, names), recorded_names(one))[1].text for one, names in cases
    }
    if len(texts) > 1:
        with ThreadPoolExecutor(2) as pool:
            list(pool.map(build, texts))


def run_case(case: Case, judged: Iterable[str], number: int = 0, native: bool = True) -> RunResult:
    """The run of a case; `judged` are names as people write them, unknown ones left out."""
    scenario = case.scenario
    lasts = to_si(scenario.lasts.value, scenario.lasts.unit) if scenario.lasts.unit else scenario.lasts.value
    every = lasts / ROWS
    if scenario.record_every is not None and scenario.record_every.unit is not None:
        every = to_si(scenario.record_every.value, scenario.record_every.unit)
    wanted, recorded = _judged(case, judged), recorded_names(case)
    return run(prepare(case.model, case.law, case.point, scenario, wanted, recorded, number, native), every)


def _judged(case: Case, names: Iterable[str]) -> dict[str, str]:
    found = {name: resolve(case.model, name) for name in names}
    return {name: flat for name, flat in found.items() if flat is not None}


def recorded_names(case: Case) -> dict[str, str]:
    """What trends hold: the name that people read -> the model's name."""
    chosen = case.scenario.record_signals
    names = chosen if chosen is not None else tuple(case.model.signals)
    found = {name: resolve(case.model, name) for name in names}
    return {name: flat for name, flat in found.items() if flat is not None}

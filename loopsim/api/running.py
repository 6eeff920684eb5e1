"""`run`: every strategy of scenarios run, judged and compared."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from loopsim import __version__
from loopsim.documents.catalogue import Catalogue
from loopsim.documents.types import Scenario
from loopsim.errors import ComputationError, InputError, Problems, fail, nearest
from loopsim.model.choice import Source, scenario_sources
from loopsim.model.types import Model
from loopsim.results import Table, Trends
from loopsim.simulation.actions import free_names
from loopsim.simulation.case import Case, assembled, at_rest, case_of, run_case, text_of
from loopsim.simulation.machine import build
from loopsim.simulation.run import PATIENCE
from loopsim.study.checks import check_scenario
from loopsim.study.compare import compare
from loopsim.study.export import comparison_json, to_json
from loopsim.study.judge import judge
from loopsim.study.observe import names_to_judge, rule_names, run_of
from loopsim.study.tables import comparison_table, metrics_table, verdict_table
from loopsim.study.types import FAILED, NOT_JUDGED, PASSED, Comparison, Judged, not_run
from loopsim.study.windows import seconds

CAUTION = "design and training aid; not a safety system and no part of one"


@dataclass(frozen=True, slots=True)
class Judgement:
    """One scenario at one operating point ('' for the plant's own values), judged: its strategies in order.

    `run_id` is a name that follows from its files.
    """

    scenario: Scenario
    point: str
    run_id: str
    strategies: tuple[Judged, ...]

    @property
    def title(self) -> str:
        """What it is called where several stand together."""
        return _title(self.scenario, self.point)


def _title(scenario: Scenario, point: str) -> str:
    return f"{scenario.name} at {point}" if point else scenario.name


@dataclass(frozen=True, slots=True)
class RunReport:
    """What `run` gives for one or several scenarios; `status` is the exit status of the command."""

    judgements: tuple[Judgement, ...]
    comparison: Comparison | None
    status: int

    def tables(self) -> list[Table]:
        """Verdicts and figures of each scenario, then the comparison."""
        found = [table(one.strategies) for one in self.judgements for table in (verdict_table, metrics_table)]
        return [*found, comparison_table(self.comparison)] if self.comparison is not None else found

    def json(self, trends: Mapping[str, Mapping[str, str]] | None = None) -> dict[str, Any]:
        """The JSON document; `trends`: title -> strategy -> name of the file with its trend."""
        files = trends or {}
        documents = [_document(one, files.get(one.title, {})) for one in self.judgements]
        whole: dict[str, Any] = documents[0] if len(documents) == 1 else {"scenarios": documents}
        if self.comparison is not None:
            whole["comparison"] = comparison_json(self.comparison)
        return {**whole, "caution": CAUTION}


def _document(one: Judgement, trends: Mapping[str, str]) -> dict[str, Any]:
    document = {**to_json(one.run_id, one.strategies, trends), "scenario": one.scenario.name}
    point = {"point": one.point} if one.point else {}
    return {**document, **point, "version": __version__, "seed": one.scenario.seed}


def run(
    paths: Sequence[Path],
    strategy: str = "",
    points: Sequence[str] = (),
    native: bool = True,
    judged: Callable[[Judgement], None] = lambda one: None,
    patience: float = PATIENCE,
) -> RunReport:
    """Run and judge every strategy of the scenarios (files, or folders that hold them).

    `points`: operating points of the plant, `all` for every one of them; by default those that the scenario names, or
    the plant's own values. `native`: compiled, else interpreted (the same bits). `judged` is called with each
    judgement as soon as it stands. `patience` [s] is how long the computing of one run may take.

    Raises `InputError`; a strategy that cannot be computed is told in its column, and the others go on.
    """
    plans = [
        (path, scenario, sources, point)
        for path, scenario, sources in ((path, *scenario_sources(path, strategy)) for path in scenario_files(paths))
        for point in _points(scenario, sources, points)
    ]
    titles = [_title(scenario, point) for _, scenario, _, point in plans]
    if len(set(titles)) < len(titles):
        twice = next(title for title in titles if titles.count(title) > 1)
        raise fail(f"two scenarios are called '{twice}'", None, "rename one, or run them apart")
    for plan in plans:
        _check(*plan)
    # what any of the scenarios judges is kept in all of them, so that they share one program
    names = tuple(dict.fromkeys(name for _, scenario, _, _ in plans for name in rule_names(scenario)))
    judgements = []
    for path, scenario, sources, point in plans:
        strategies = _judged(scenario, sources, point, names, native, patience)
        judgements.append(Judgement(scenario, point, run_id(path, scenario, point), strategies))
        judged(judgements[-1])
    every = [one for judgement in judgements for one in judgement.strategies]
    several = any(len(one.strategies) > 1 for one in judgements)
    comparison = compare(every) if several and any(one.verdicts for one in every) else None
    return RunReport(tuple(judgements), comparison, _status(judgements))


def _points(scenario: Scenario, sources: Mapping[str, Source], asked: Sequence[str]) -> tuple[str, ...]:
    known = next(iter(sources.values())).points if sources else ()
    wanted = tuple(asked) or scenario.points or ("",)
    found = known if wanted == ("all",) else wanted
    problems = Problems()
    for name in found:
        if name and name not in known:
            where = None if asked else scenario.where
            problems.add(f"no operating point is called '{name}'", where, nearest(name, known, "points"))
    problems.raise_if_any()
    return found


def _check(path: Path, scenario: Scenario, sources: Mapping[str, Source], point: str) -> None:
    """Events and rules that no strategy can follow are told before anything runs."""
    problems = Problems()
    models = {**time_models(scenario, sources, point), **_other_models(path, scenario, sources, point)}
    check_scenario(scenario, models, problems)
    problems.raise_if_any()


def _status(judgements: Sequence[Judgement]) -> int:
    """3 where a run could not be finished, 1 where a strategy that must pass did not, else 0."""
    every = [one for judgement in judgements for one in judgement.strategies]
    if any(one.run.trends.status.code != "done" for one in every):
        return 3
    for judgement in judgements:
        wanted = judgement.scenario.must_pass
        for one in judgement.strategies:
            if (wanted is None or one.run.strategy in wanted) and one.verdict not in (PASSED, NOT_JUDGED):
                return 1
    return 0


def scenario_files(paths: Sequence[Path]) -> list[Path]:
    """The files named, and the scenarios in the folders named, in order of name."""
    found: list[Path] = []
    for path in paths:
        if path.is_dir():
            inside = [one for one in sorted(path.glob("*.yaml")) if one.read_text("utf-8").startswith("scenario:")]
            if not inside:
                raise fail(f"the folder '{path}' holds no scenario", None, "a scenario file begins with `scenario:`")
            found += inside
        else:
            found.append(path)
    return found


def _judged(
    scenario: Scenario,
    sources: Mapping[str, Source],
    point: str,
    names: tuple[str, ...],
    native: bool,
    patience: float,
) -> tuple[Judged, ...]:
    problems, cases, failures = Problems(), dict[str, Case](), dict[str, str]()
    wanted: dict[str, tuple[str, ...]] = {}
    # machine code is made beside the search for rests: most of that work runs outside Python
    with ThreadPoolExecutor(2) as pool:
        for name, source in sources.items():
            with problems.collecting():
                case = assembled(name, scenario, source, point)
                wanted[name] = (*names, *names_to_judge(case))
                if native:
                    pool.submit(build, text_of(case, wanted[name]))
                try:
                    cases[name] = at_rest(case, source, point)
                except ComputationError as error:
                    failures[name] = f"{error.problems[0].what}; {error.problems[0].hint}"
    problems.raise_if_any()
    runs = [
        not_run(name, failures[name], seconds(scenario.lasts))
        if name in failures
        else run_of(
            cases[name], run_case(cases[name], wanted[name], native=native, patience=patience), computing(source)
        )
        for name, source in sources.items()
    ]
    return tuple(
        judge(_title(scenario, point), one, scenario.accept)
        if one.strategy in cases
        else Judged(_title(scenario, point), one, FAILED, (), ())
        for one in runs
    )


def computing(source: Source) -> frozenset[str]:
    """The tags of blocks that only compute: a strategy's, whose files lie in a folder `control` or `logic`.

    In a plant such a block stands for something physical, such as two flows that meet.
    """

    def find() -> frozenset[str]:
        uses = [use for one in source.diagrams if one.kind == "strategy" for use in one.blocks.values()]
        return frozenset(tag for use in uses for tag in _computing(source.catalogue, use.tag, use.block))

    found: frozenset[str] = source.once("computing", find)
    return found


def _computing(catalogue: Catalogue, tag: str, name: str) -> list[str]:
    inside = catalogue.block(name).blocks
    if inside:
        return [found for use in inside.values() for found in _computing(catalogue, f"{tag}.{use.tag}", use.block)]
    return [tag] if catalogue.path(name).parent.name in ("control", "logic") else []


def time_models(scenario: Scenario, sources: Mapping[str, Source], point: str = "") -> dict[str, Model]:
    """What is simulated for each strategy. Raises `InputError` with the problems of all of them."""
    problems, models = Problems(), dict[str, Model]()
    for name, source in sources.items():
        with problems.collecting():
            models[name] = source.timed(free_names(scenario.events, source.law(point)), point)
    problems.raise_if_any()
    return models


def _other_models(path: Path, scenario: Scenario, sources: Mapping[str, Source], point: str) -> dict[str, Model]:
    """Strategies that are not run now may have what a rule or an event speaks of; their own mistakes wait."""
    models: dict[str, Model] = {}
    for name in scenario.strategies:
        if name not in sources:
            with suppress(InputError):
                models |= time_models(scenario, scenario_sources(path, name)[1], point)
    return models


def run_id(path: Path, scenario: Scenario, point: str = "") -> str:
    """A name for this run that follows from its files, the version, the seed and the point, and from nothing else."""
    digest = hashlib.sha256("/".join((__version__, str(scenario.seed), *([point] if point else []))).encode())
    names = {path.name, scenario.plant, *(one for files in scenario.strategies.values() for one in files)}
    for name in sorted(names):
        digest.update(name.encode() + b"\0" + (path.parent / name).read_bytes() + b"\0")
    return digest.hexdigest()[:16]


def simulate(path: Path, strategy: str) -> Trends:
    """The trends of one strategy of a scenario."""
    scenario, sources = scenario_sources(path, strategy)
    case = case_of(strategy, scenario, sources[strategy])
    return run_case(case, names_to_judge(case)).trends

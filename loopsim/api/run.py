"""`run`: every strategy of scenarios run, judged and compared."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from loopsim import __version__
from loopsim.documents.types import Rule, Scenario
from loopsim.errors import ComputationError, Problems, fail, nearest
from loopsim.language.tree import Name
from loopsim.language.units import difference_of
from loopsim.model.choice import Source, scenario_sources
from loopsim.model.graph import influences, reached_from
from loopsim.model.types import Model
from loopsim.results import Table, Trends
from loopsim.simulation.case import Case, case_of, run_case
from loopsim.simulation.run import RunResult, resolve
from loopsim.study.compare import Comparison, ControllerView, Structure, compare
from loopsim.study.judge import judge
from loopsim.study.tables import comparison_table, metrics_table, rule_table, strategy_json
from loopsim.study.types import Happening, Loop, Run, StrategyVerdict


@dataclass(frozen=True, slots=True)
class RunReport:
    """What `run` gives for one or several scenarios."""

    tables: tuple[Table, ...]
    json: dict[str, Any]
    verdicts: Mapping[str, Mapping[str, StrategyVerdict]]
    comparison: Comparison
    status: int
    notes: tuple[str, ...] = ()


# ---------------------------------------------------------------- run
def run(paths: Sequence[Path], strategy: str = "", point: str = "") -> RunReport:
    """Run and judge every strategy of the scenarios.

    Raises `InputError`; a strategy that cannot be computed is told in its column, and the others go on.
    """
    verdicts: dict[str, dict[str, StrategyVerdict]] = {}
    structures: dict[str, Structure] = {}
    reports: list[dict[str, Any]] = []
    tables, computed = list[Table](), True
    for path in scenario_files(paths):
        scenario, sources = scenario_sources(path, strategy)
        found = _run_scenario(scenario, sources, point, structures)
        verdicts[scenario.name] = found
        tables += [rule_table(scenario.name, found), metrics_table(scenario.name, found)]
        reports.append(_scenario_json(scenario, found, run_id(path, scenario)))
        computed = computed and all(_computed(one) for one in found.values())
    comparison = compare(verdicts, structures)
    if comparison.sentence:
        tables.append(comparison_table(comparison))
    json: dict[str, Any] = reports[0] if len(reports) == 1 else {"scenarios": reports}
    json["comparison"] = {"winner": comparison.winner or None, "sentence": comparison.sentence,
                          "reasons": list(comparison.reasons)}  # fmt: skip
    passed = all(_must_pass(one) for one in verdicts.values())
    return RunReport(tuple(tables), json, verdicts, comparison, 3 if not computed else 0 if passed else 1)


def _computed(verdict: StrategyVerdict) -> bool:
    trends = verdict.run.trends
    return trends is not None and trends.status.code == "done"


def _must_pass(found: Mapping[str, StrategyVerdict]) -> bool:
    scenario = next(iter(found.values())).run.scenario
    wanted = scenario.must_pass if scenario.must_pass is not None else tuple(found)
    return all(found[name].verdict in ("passed", "not_judged") for name in wanted if name in found)


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


def _run_scenario(
    scenario: Scenario, sources: Mapping[str, Source], point: str, structures: dict[str, Structure]
) -> dict[str, StrategyVerdict]:
    problems, cases, failures = Problems(), dict[str, Case](), dict[str, str]()
    for name, source in sources.items():
        with problems.collecting():
            try:
                cases[name] = case_of(name, scenario, source, point)
            except ComputationError as error:
                failures[name] = error.problems[0].what + "; " + error.problems[0].hint
    problems.raise_if_any()
    _check_names(scenario, cases)
    found = {}
    for name in sources:
        if name in failures:
            found[name] = judge(Run(name, scenario, None, failure=failures[name]))
            continue
        case = cases[name]
        structures.setdefault(name, structure_of(case.model))
        found[name] = judge(_judgeable(case, run_case(case, _judged_names(case))))
    return found


def _judged_names(case: Case) -> list[str]:
    """Signals that rules and figures look at."""
    rules = case.scenario.accept
    names = [rule.signal for rule in rules] + [rule.of for rule in rules if isinstance(rule.of, str)]
    for one in loops_of(case.model):
        names += [one.pv, one.sp, one.out]
    return [name for name in dict.fromkeys(names) if name]


def _check_names(scenario: Scenario, cases: Mapping[str, Case]) -> None:
    """A signal, tag or target that no strategy has is a mistake."""
    problems = Problems()
    for rule in scenario.accept:
        for name in _rule_names(rule):
            if cases and not any(_knows(case.model, name) for case in cases.values()):
                known = {one for case in cases.values() for one in case.model.signals}
                problems.add(f"no strategy has a signal '{name}'", rule.where, nearest(name, known))
    problems.raise_if_any()


def _rule_names(rule: Rule) -> list[str]:
    names = [rule.signal, rule.of if isinstance(rule.of, str) else "", rule.loop]
    return [name for name in names if name]


def _knows(model: Model, name: str) -> bool:
    return resolve(model, name) is not None or any(one.tag == name for one in model.controllers)


def loops_of(model: Model) -> tuple[Loop, ...]:
    """The controllers of a model as the judging sees them."""
    found = []
    for one in model.controllers:
        unit = model.signals[one.sp].unit if one.sp in model.signals else None
        ends = [model.slots.get(f"{one.tag}.range.{end}") for end in ("low", "high")]
        if unit is not None and ends[0] is not None and ends[1] is not None:
            found.append(Loop(one.tag, one.pv, one.sp, one.out, ends[1].value - ends[0].value, difference_of(unit)))
    return tuple(found)


def _judgeable(case: Case, result: RunResult) -> Run:
    graph, model = influences(case.model), case.model
    happenings = []
    for one in result.happened:
        event = case.scenario.events[one.number]
        reached = reached_from(graph, one.target)
        names = {name for name in (*model.signals, *_judged_names(case)) if _reached(model, name, reached)}
        text = result.trends.log[0].text if result.trends.log else event.kind
        happenings.append(
            Happening(one.time, event.kind, one.target, text, one.before, one.after, frozenset(names), event.where)
        )
    names = {name for rule in case.scenario.accept for name in _rule_names(rule)}
    lacking = frozenset(name for name in names if not _knows(model, name))
    return Run(
        case.name, case.scenario, result.trends, tuple(happenings), loops_of(model), lacking, "", model.air_pressure
    )


def _reached(model: Model, name: str, reached: frozenset[str]) -> bool:
    return name in reached or resolve(model, name) in reached


def structure_of(model: Model) -> Structure:
    """The graph and controllers of a model, for the reasons of a comparison."""
    controllers = {}
    for one in model.controllers:
        measured = _measured(model, one.pv)
        controllers[one.tag] = ControllerView(one.pv, one.sp, one.out, one.ff, measured)
    return Structure(influences(model), controllers)


def _measured(model: Model, pv: str) -> tuple[str, ...]:
    """The plant signals that go into the instrument behind a measurement."""
    driver = model.assignments[pv].tree if pv in model.assignments else None
    if not isinstance(driver, Name):
        return ()
    tag = model.assignments[driver.name].tag if driver.name in model.assignments else driver.name.rpartition(".")[0]
    inputs = [one.tree for one in model.assignments.values() if one.tag == tag and isinstance(one.tree, Name)]
    return tuple(sorted(tree.name for tree in inputs if not tree.name.startswith(f"{tag}.")))


def run_id(path: Path, scenario: Scenario) -> str:
    """A name for this run that follows from its files, the version and the seed, and from nothing else."""
    digest = hashlib.sha256(f"{__version__}/{scenario.seed}".encode())
    names = {path.name, scenario.plant, *(one for files in scenario.strategies.values() for one in files)}
    for name in sorted(names):
        digest.update(name.encode() + b"\0" + (path.parent / name).read_bytes() + b"\0")
    return digest.hexdigest()[:16]


def _scenario_json(scenario: Scenario, found: Mapping[str, StrategyVerdict], identity: str) -> dict[str, Any]:
    strategies = {name: strategy_json(one, None) for name, one in found.items()}
    return {"scenario": scenario.name, "run_id": identity, "version": __version__, "seed": scenario.seed,
            "strategies": strategies}  # fmt: skip


def simulate(path: Path, strategy: str) -> Trends:
    """The trends of one strategy of a scenario."""
    scenario, sources = scenario_sources(path, strategy)
    case = case_of(strategy, scenario, sources[strategy])
    return run_case(case, _judged_names(case)).trends

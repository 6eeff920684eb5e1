"""Which strategy wins, and why: said from the structure of the plant, not from names."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import networkx as nx

from loopsim.study.types import StrategyVerdict


@dataclass(frozen=True, slots=True)
class ControllerView:
    """A controller's signals by their flat names, and the plant signals that its measurement is made from."""

    pv: str
    sp: str
    out: str
    ff: str
    measured: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Structure:
    """A strategy's graph of influences and its controllers by tag."""

    graph: nx.DiGraph[str]
    controllers: Mapping[str, ControllerView]


@dataclass(frozen=True, slots=True)
class Comparison:
    """The winner ('' for none), a sentence that says so, and the reasons."""

    winner: str
    sentence: str
    reasons: tuple[str, ...]


def compare(scenarios: Mapping[str, Mapping[str, StrategyVerdict]], structures: Mapping[str, Structure]) -> Comparison:
    """The winner over all scenarios: passes most rules, none failed first; then the one with most headroom left.

    `scenarios`: scenario -> strategy -> verdict. Headroom is the least share of a limit that is left in any rule.
    """
    strategies = list(next(iter(scenarios.values()), {}))
    if len(strategies) < 2:
        return Comparison("", "", ())
    scores = {name: _score([one[name] for one in scenarios.values() if name in one]) for name in strategies}
    ranked = sorted(strategies, key=lambda name: (-scores[name][0], -scores[name][1]))
    best, second = ranked[0], ranked[1]
    reasons = tuple(_disturbance_reasons(scenarios, structures, best))
    if scores[best][2] == 0:
        return Comparison("", "No rule could be judged, so no strategy wins.", reasons)
    if scores[best][:2] == scores[second][:2]:
        even = " and ".join(f"'{name}'" for name in ranked if scores[name][:2] == scores[best][:2])
        return Comparison("", f"{even} do equally well.", reasons)
    passed, _, judged = scores[best]
    if passed == judged:
        rivals = [name for name in ranked[1:] if scores[name][0] == judged]
        how = "passes every rule" if rivals else "is the only one that passes every rule"
        more = f" and keeps most in hand ({100 * scores[best][1]:.0f} % of its tightest limit)" if rivals else ""
        return Comparison(best, f"'{best}' wins: it {how}{more}.", reasons)
    return Comparison("", f"No strategy passes every rule; '{best}' comes nearest ({passed} of {judged}).", reasons)


def _score(verdicts: Sequence[StrategyVerdict]) -> tuple[int, float, int]:
    """Rules passed, least headroom, rules judged."""
    rules = [one for verdict in verdicts for one in verdict.rules if one.verdict in ("passed", "failed")]
    left = [one.headroom for one in rules if one.headroom is not None]
    failed_runs = sum(1 for verdict in verdicts if verdict.run.trends is None)
    return sum(one.verdict == "passed" for one in rules) - failed_runs, min(left, default=0.0), len(rules)


# ---------------------------------------------------------------- reasons
def _disturbance_reasons(
    scenarios: Mapping[str, Mapping[str, StrategyVerdict]], structures: Mapping[str, Structure], best: str
) -> list[str]:
    """For each thing that disturbs: where it enters, as each strategy's measurements see it."""
    sentences: list[str] = []
    targets = dict.fromkeys(
        one.target for verdicts in scenarios.values() for verdict in verdicts.values() for one in verdict.run.happenings
    )
    for target in targets:
        views: dict[str, list[str]] = {}
        for name, structure in structures.items():
            view = where_it_enters(structure, target)
            if view:
                views.setdefault(view, []).append(name)
        for view, names in views.items():
            sentences.append(f"{target} {view} ({', '.join(names)}).")
    return sentences


def where_it_enters(structure: Structure, target: str) -> str:
    """How a strategy's measurements see a disturbance: fed forward, in an inner loop, or at the end; '' if none."""
    graph, controllers = structure.graph, structure.controllers
    if target not in graph or any(target == one.sp for one in controllers.values()):
        return ""
    cut = _plant_only(structure)
    reached = {target} | nx.descendants(cut, target)
    open_graph = _without(graph, [one.pv for one in controllers.values()])
    parts = []
    for tag, one in sorted(controllers.items()):
        if one.ff and target in open_graph and one.ff in nx.descendants(open_graph, target):
            parts.append(f"is measured and fed forward to {tag}")
    for inner, one in sorted(controllers.items()):
        outer = _outer_of(structure, inner)
        if outer and one.pv in reached and _sees_all(cut, target, one, controllers[outer]):
            parts.append(f"enters inside the loop of {inner}, which sees it before {outer} does")
    if parts:
        return " and ".join(parts)
    seeing = [tag for tag, one in sorted(controllers.items()) if one.pv in reached]
    if not seeing:
        return "reaches no measurement"
    return f"is answered only once the measurement of {' and '.join(seeing)} moves"


def _without(graph: nx.DiGraph[str], names: Sequence[str]) -> nx.DiGraph[str]:
    kept = graph.copy()
    kept.remove_nodes_from([name for name in names if name in kept])
    return kept


def _plant_only(structure: Structure) -> nx.DiGraph[str]:
    """The graph without what controllers do: their outputs taken out."""
    return _without(structure.graph, [one.out for one in structure.controllers.values()])


def _outer_of(structure: Structure, inner: str) -> str:
    """The controller whose output drives this one's set point, '' for none."""
    controllers = structure.controllers
    measured = [one.pv for one in controllers.values()]
    for tag, one in sorted(controllers.items()):
        others = [other.out for name, other in controllers.items() if name != tag]
        path = _without(structure.graph, [*measured, *others])
        if tag != inner and one.out in path and controllers[inner].sp in nx.descendants(path, one.out):
            return tag
    return ""


def _sees_all(cut: nx.DiGraph[str], target: str, inner: ControllerView, outer: ControllerView) -> bool:
    """Whether a disturbance reaches the outer measurement only by way of what the inner one measures."""
    rest = _without(cut, inner.measured)
    return target not in rest or outer.pv not in nx.descendants(rest, target)

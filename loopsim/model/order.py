"""Orders: what must be computed before what, loops of algebra, and which controller runs first."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass

import networkx as nx

from loopsim.errors import Where, fail
from loopsim.language.tree import Expression, Name, Operation, names_in
from loopsim.model.types import Assignment, DeadTime, Implicit, Latch, Model, Noise, ScanLatch, ScanTask


@dataclass(frozen=True, slots=True)
class Loop:
    """Equations to be solved together: `unknowns`, what is computed from them in order, and their residuals."""

    unknowns: tuple[str, ...]
    inner: tuple[Assignment, ...]
    residuals: tuple[Expression, ...]
    starts: tuple[Expression, ...]
    limits: tuple[tuple[Expression | None, Expression | None, bool], ...]
    tag: str
    where: Where


Step = Assignment | Loop | DeadTime | Noise | Latch


def dependencies(model: Model, name: str) -> frozenset[str]:
    """What must be known before `name`, itself not counted unless it is an unknown."""
    if name in model.assignments:
        return names_in(model.assignments[name].tree)
    if name in model.implicits:
        return names_in(model.implicits[name].residual)
    if name in model.dead_times:
        return names_in(model.dead_times[name].lag)
    if name in model.noises:
        return names_in(model.noises[name].every)
    if name in model.latches:
        latch = model.latches[name]
        before = names_in(latch.condition)
        return before | (names_in(latch.argument) if latch.argument is not None else frozenset())
    return frozenset()


def ordered(model: Model, wanted: Iterable[str]) -> list[Step]:
    """Everything needed for the wanted names, sources before users, loops of algebra gathered.

    The order depends on names only, so it is the same however the files are arranged.
    """
    graph: nx.DiGraph[str] = nx.DiGraph()
    pending = sorted(set(wanted))
    while pending:
        name = pending.pop()
        if name in graph:
            continue
        graph.add_node(name)
        pending += sorted(dependencies(model, name))
    for name in list(graph):
        graph.add_edges_from((before, name) for before in dependencies(model, name))
    condensed = nx.condensation(graph)
    first = {part: min(data["members"]) for part, data in condensed.nodes(data=True)}
    steps: list[Step] = []
    for part in nx.lexicographical_topological_sort(condensed, key=lambda one: first[one]):
        members = condensed.nodes[part]["members"]
        step = _step(model, graph, members)
        if step is not None:
            steps.append(step)
    return steps


def _step(model: Model, graph: nx.DiGraph[str], members: set[str]) -> Step | None:
    (name, *others) = sorted(members)
    looped = bool(others) or graph.has_edge(name, name) or name in model.implicits
    if looped:
        return _loop(model, graph.subgraph(members))
    for kind in (model.assignments, model.dead_times, model.noises, model.latches):
        if name in kind:
            return kind[name]
    return None


def _loop(model: Model, graph: nx.DiGraph[str]) -> Loop:
    """Cut a loop at its implicit unknowns, then at the names that lie on most of what is left."""
    unknowns = sorted(name for name in graph if name in model.implicits)
    rest = graph.subgraph([name for name in graph if name not in unknowns]).copy()
    while True:
        rings = [part for part in nx.strongly_connected_components(rest) if _rings(rest, part)]
        if not rings:
            break
        ring = rest.subgraph(min(rings, key=min))
        tear = max(sorted(ring), key=lambda one: ring.in_degree(one) * ring.out_degree(one))
        _refuse(model, tear)
        unknowns.append(tear)
        rest.remove_node(tear)
    inner = [model.assignments[one] for one in nx.lexicographical_topological_sort(rest) if one in model.assignments]
    facts = [_unknown(model, name) for name in unknowns]
    first = facts[0]
    return Loop(
        tuple(unknowns),
        tuple(inner),
        tuple(one.residual for one in facts),
        tuple(one.start for one in facts),
        tuple((one.low, one.high, one.stops) for one in facts),
        first.tag,
        first.where,
    )


def _rings(graph: nx.DiGraph[str], part: set[str]) -> bool:
    return len(part) > 1 or any(graph.has_edge(one, one) for one in part)


def _unknown(model: Model, name: str) -> Implicit:
    if name in model.implicits:
        return model.implicits[name]
    assignment = model.assignments[name]
    residual = Operation("-", (assignment.tree, Name(name)))
    return Implicit(name, assignment.tag, residual, Name(name), assignment.where)


def _refuse(model: Model, name: str) -> None:
    """A loop through an on/off quantity or an engine primitive has no slope to solve it by."""
    tree = model.assignments[name].tree if name in model.assignments else None
    while isinstance(tree, Name) and tree.name in model.assignments and tree.name != name:
        tree = model.assignments[tree.name].tree
    if tree is None or (isinstance(tree, Operation) and tree.operator in _LOGICAL):
        where = model.assignments[name].where if tree is not None else None
        raise fail(
            f"'{name}' depends on itself in the same instant, through an on/off quantity or a dead time",
            where,
            "put something with a memory between, such as a block with a scan",
        )


_LOGICAL = ("and", "or", "not", "<", "<=", ">", ">=", "==", "!=")


# ---------------------------------------------------------------- scans
def order_scans(
    tasks: list[ScanTask], assignments: Mapping[str, Assignment], states: Collection[str]
) -> tuple[list[ScanTask], list[str]]:
    """Tasks with sources before users along the wires; a ring is cut at its first tag and reported.

    A state does not jump with an execution, so reading one makes nobody a user.
    """
    writers = {stored: task.tag for task in tasks for stored, _ in task.writes if stored not in states}
    graph: nx.DiGraph[str] = nx.DiGraph()
    graph.add_nodes_from(sorted(task.tag for task in tasks))
    for task in tasks:
        for name in _read_by(task, assignments):
            if name in writers and writers[name] != task.tag:
                graph.add_edge(writers[name], task.tag)
    notes = []
    while True:
        rings = [sorted(part) for part in nx.strongly_connected_components(graph) if len(part) > 1]
        if not rings:
            break
        ring = min(rings)
        graph.remove_edges_from([(before, ring[0]) for before in ring[1:] if graph.has_edge(before, ring[0])])
        notes.append(f"{', '.join(ring)} run in a ring; {ring[0]} runs first and sees the others one scan late")
    places = {tag: place for place, tag in enumerate(nx.lexicographical_topological_sort(graph))}
    return sorted(tasks, key=lambda one: places[one.tag]), notes


def _read_by(task: ScanTask, assignments: Mapping[str, Assignment]) -> set[str]:
    """All names that an execution reads, answers not counted."""
    found: set[str] = set()
    pending = [name for one in task.statements for name in statement_names(one)]
    pending += [name for _, tree in task.writes for name in names_in(tree)]
    while pending:
        name = pending.pop()
        if name in found or name.endswith((".takes", ".up", ".down")):
            continue
        found.add(name)
        if name in assignments:
            pending += names_in(assignments[name].tree)
    return found


def statement_names(statement: Assignment | ScanLatch) -> frozenset[str]:
    """The names that a statement of a scan reads."""
    if isinstance(statement, Assignment):
        return names_in(statement.tree)
    before = names_in(statement.condition)
    return before | (names_in(statement.argument) if statement.argument is not None else frozenset())


def sorted_statements(task: ScanTask) -> list[Assignment | ScanLatch]:
    """The statements of one execution in an order that can be computed; a circle is refused by name."""
    by_name = {one.name: one for one in task.statements}
    graph: nx.DiGraph[str] = nx.DiGraph()
    graph.add_nodes_from(sorted(by_name))
    for name, statement in by_name.items():
        graph.add_edges_from((before, name) for before in statement_names(statement) if before in by_name)
    try:
        return [by_name[name] for name in nx.lexicographical_topological_sort(graph)]
    except nx.NetworkXUnfeasible:
        circle = [edge[0].rstrip("'") for edge in nx.find_cycle(graph)]
        raise fail(
            f"in the scan of '{task.tag}' each of {', '.join(circle)} depends on the next",
            by_name[nx.find_cycle(graph)[0][0]].where,
            "use was(…) where the previous value is meant",
        ) from None

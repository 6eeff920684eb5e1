"""What influences what: the graph behind the audit, the judging and the reasons."""

from __future__ import annotations

import networkx as nx

from loopsim.language.tree import names_in
from loopsim.model.order import statement_names
from loopsim.model.types import Model


def influences(model: Model) -> nx.DiGraph[str]:
    """Edges from each name to every name that depends on it, through states, scans and dead times.

    Nodes carry `block`, the tag they belong to ('' for boundary values). Answers along wires are left out.
    """
    graph: nx.DiGraph[str] = nx.DiGraph()
    for name, reads, tag in _readers(model):
        graph.add_node(name, block=tag)
        graph.add_edges_from((before, name) for before in reads if not _is_answer(before))
    for name, slot in model.slots.items():
        graph.add_node(name, block="" if slot.kind == "boundary" else name.rpartition(".")[0])
    for shown, memory in model.in_use.items():
        graph.add_edge(memory, f"{shown} in use", block=shown.rpartition(".")[0])
    return graph


def _is_answer(name: str) -> bool:
    return name.endswith((".takes", ".up", ".down"))


def _readers(model: Model) -> list[tuple[str, frozenset[str], str]]:
    """Every name with the names that it is computed from and its tag."""
    found = [(name, names_in(one.tree), one.tag) for name, one in model.assignments.items() if not _is_answer(name)]
    found += [(name, names_in(one.rate), one.tag) for name, one in model.states.items()]
    found += [(name, names_in(one.residual), one.tag) for name, one in model.implicits.items()]
    found += [(name, frozenset[str](), one.tag) for name, one in model.memory.items()]
    for name, dead_time in model.dead_times.items():
        swept = frozenset({dead_time.swept}) if dead_time.swept else frozenset()
        found.append((name, names_in(dead_time.argument) | names_in(dead_time.lag) | swept, dead_time.tag))
    for name, latch in model.latches.items():
        argument = names_in(latch.argument) if latch.argument is not None else frozenset()
        found.append((name, names_in(latch.condition) | argument, latch.tag))
    for task in model.scans:
        found += [(one.name, statement_names(one), task.tag) for one in task.statements]
        found += [(stored, names_in(tree), task.tag) for stored, tree in task.writes]
    return found


def reached_from(graph: nx.DiGraph[str], name: str) -> frozenset[str]:
    """The name itself and everything that depends on it."""
    if name not in graph:
        return frozenset({name})
    return frozenset({name} | nx.descendants(graph, name))


def dead_time_in_loop(model: Model, graph: nx.DiGraph[str]) -> bool:
    """Whether a dead time lies in a loop, so that stability is a question for characteristic roots."""
    for part in nx.strongly_connected_components(graph):
        if len(part) > 1 and any(name in model.dead_times for name in part):
            return True
    return False

"""Where a disturbance enters relative to what is measured, told from the graph of influences, never from names.

The process is what is left of the graph without controllers and blocks that only compute. A loop sees a disturbance
that reaches its measured value through the process. The inner loop of a cascade sees it first when it gets to the inner
measurement without passing what lies between the inner measurement and the outer one. It is fed forward where it gets
to a controller's feedforward input or set point, or to what its output is combined with, by a way that the controller's
own output does not act upon.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import takewhile

import networkx as nx

from loopsim.study.types import Loop, Run
from loopsim.study.words import listed


@dataclass(frozen=True, slots=True)
class Sight:
    """How a loop meets a disturbance: `ahead` of its measurement, as the `outer` loop alone, or `unseen`; a sentence.

    `measured` holds the process's signals that the loop is for, the same in strategies that control the same thing.
    """

    kind: str
    sentence: str
    measured: frozenset[str] = frozenset()

    @property
    def rank(self) -> int:
        """Higher is seen sooner."""
        return ("unseen", "outer", "ahead").index(self.kind)


@dataclass(frozen=True, slots=True)
class Structure:
    """One strategy's graph, its process alone, its loops, and for each loop what is measured for it."""

    graph: nx.DiGraph[str]
    process: nx.DiGraph[str]
    loops: tuple[Loop, ...]
    measured: dict[str, frozenset[str]]
    forward: dict[str, frozenset[str]]

    def block(self, name: str) -> str:
        """The tag of the block that a signal belongs to, '' for a boundary value."""
        return _block(self.graph, name)


def structure_of(run: Run) -> Structure | None:
    """The structure of a run's strategy, None where its graph is not known."""
    graph = run.graph
    if graph is None:
        return None
    control = {loop.tag for loop in run.loops} | run.computing
    process = graph.subgraph([name for name in graph if _block(graph, name) not in control])
    measured = {loop.tag: _taps(graph, run, [loop.pv]) for loop in run.loops}
    forward = {loop.tag: _taps(graph, run, _forward_inputs(graph, run, loop)) for loop in run.loops}
    return Structure(graph, process, run.loops, measured, forward)


def _block(graph: nx.DiGraph[str], name: str) -> str:
    return str(graph.nodes[name].get("block", name.rpartition(".")[0]))


def _forward_inputs(graph: nx.DiGraph[str], run: Run, loop: Loop) -> list[str]:
    """Where something may be fed forward to a loop: its feedforward input, its set point, what its output meets."""
    computed = graph.subgraph([one for one in graph if one == loop.out or _block(graph, one) in run.computing])
    return [loop.ff, loop.sp, *(nx.descendants(computed, loop.out) if loop.out in computed else ())]


def _taps(graph: nx.DiGraph[str], run: Run, inputs: list[str]) -> frozenset[str]:
    """The process's signals that inputs of a controller are made of, back through whatever only computes.

    What comes out of another controller is not followed: it is that one's business.
    """
    controllers = {loop.tag for loop in run.loops}
    found: set[str] = set()
    seen: set[str] = set()
    waiting = list(inputs)
    while waiting:
        one = waiting.pop()
        if one in seen or one not in graph:
            continue
        seen.add(one)
        block = _block(graph, one)
        if block in run.computing or (block in controllers and one in inputs):
            waiting += graph.predecessors(one)
        elif block not in controllers:
            found.add(one)
    return frozenset(found)


# ---------------------------------------------------------------- sights
def sights(structure: Structure, disturbance: str) -> tuple[Sight, ...]:
    """How each outermost loop that a disturbance reaches meets it; one that none sees is `unseen`.

    Nothing is said of what is done to a controller itself, unless it is to its set point.
    """
    if disturbance not in structure.graph:
        return ()
    set_points = [loop for loop in structure.loops if _own_set_point(structure, loop, disturbance)]
    if set_points:
        return tuple(_set_point(structure, loop, disturbance) for loop in set_points)
    if disturbance not in structure.process:
        return ()
    found = [_sight(structure, loop, disturbance) for loop in structure.loops if not _masters(structure, loop)]
    known = tuple(one for one in found if one is not None)
    return known or (Sight("unseen", f"{disturbance} reaches nothing that a controller measures"),)


def _sight(structure: Structure, outer: Loop, disturbance: str) -> Sight | None:
    measured = structure.measured[outer.tag]
    if not _gets_to(structure.process, disturbance, measured):
        return None
    sentences = []
    inner = _inner_that_sees(structure, outer, disturbance)
    for loop in (outer, *_below(structure, outer)):
        meter = _fed_forward(structure, loop, disturbance)
        if meter is not None:
            by = f"is measured by {meter} and " if meter else "is "
            sentences.append(f"{disturbance} {by}fed forward to {loop.tag}")
    if inner is not None:
        sentences.append(_inside(structure, outer, inner, disturbance))
    if sentences:
        return Sight("ahead", "; ".join(sentences), measured)
    return Sight("outer", _alone(structure, outer, disturbance), measured)


def _inside(structure: Structure, outer: Loop, inner: Loop, disturbance: str) -> str:
    chain, common = _chains(structure, outer, inner)
    here = structure.block(common[-1]) if common else ""
    later = [structure.block(one) for one in chain[len(common) :]]
    first = next((tag for tag in later if tag not in ("", here)), here)
    before = f", which sees it before {first} does" if first else ""
    return f"{disturbance} enters upstream of {_meters(structure, inner)} inside the inner loop of {inner.tag}{before}"


def _alone(structure: Structure, outer: Loop, disturbance: str) -> str:
    meter = _meters(structure, outer)
    if _below(structure, outer) or structure.forward[outer.tag]:
        return (
            f"{disturbance} enters downstream of everything measured but {meter}: "
            f"only the {'outer loop' if _below(structure, outer) else 'loop'} of {outer.tag} sees it"
        )
    return f"{disturbance} is seen by {outer.tag} alone, once it shows at {meter}"


def _set_point(structure: Structure, loop: Loop, disturbance: str) -> Sight:
    measured = structure.measured[loop.tag]
    if loop.ff and loop.ff in nx.descendants(_without(structure.graph, _all_measured(structure)), disturbance):
        return Sight("ahead", f"{disturbance} is the set point of {loop.tag}, and is fed forward to it", measured)
    return Sight("outer", f"{disturbance} is the set point of {loop.tag}: its own loop alone acts on it", measured)


def _own_set_point(structure: Structure, loop: Loop, name: str) -> bool:
    return name == loop.sp or structure.graph.has_edge(name, loop.sp)


def _meters(structure: Structure, loop: Loop) -> str:
    tags = sorted(
        {structure.block(one) or one for one in structure.measured[loop.tag] if not _is_given(structure, one)}
    )
    return listed(tags) or loop.pv


def _is_given(structure: Structure, name: str) -> bool:
    """A value that nothing in the process drives, such as a parameter."""
    return structure.block(name) != "" and not any(True for _ in structure.graph.predecessors(name))


# ---------------------------------------------------------------- cascades
def _masters(structure: Structure, loop: Loop) -> list[Loop]:
    """The loops whose output sets this one's set point, without any measurement between."""
    cut = _without(structure.graph, _all_measured(structure) | {one.pv for one in structure.loops})
    return [
        one
        for one in structure.loops
        if one.tag != loop.tag and one.out in cut and loop.sp in nx.descendants(cut, one.out)
    ]


def _below(structure: Structure, outer: Loop) -> list[Loop]:
    """The inner loops under an outer one, the innermost last."""
    under = [loop for loop in structure.loops if outer in _masters(structure, loop)]
    return sorted(under, key=lambda loop: (len(_masters(structure, loop)), loop.tag))


def _inner_that_sees(structure: Structure, outer: Loop, disturbance: str) -> Loop | None:
    """The innermost loop that a disturbance gets to before it gets to what the outer loop measures."""
    for inner in reversed(_below(structure, outer)):
        chain, common = _chains(structure, outer, inner)
        process = _without(structure.process, frozenset(chain[len(common) :]))
        if _gets_to(process, disturbance, structure.measured[inner.tag]):
            return inner
    return None


def _chains(structure: Structure, outer: Loop, inner: Loop) -> tuple[list[str], list[str]]:
    """What no way from the inner output to the outer measurement bypasses; and the part that leads to the inner one."""
    to_outer = _bottlenecks(structure, inner.out, structure.measured[outer.tag])
    to_inner = _bottlenecks(structure, inner.out, structure.measured[inner.tag])
    common = [one for one, _ in takewhile(lambda two: two[0] == two[1], zip(to_outer, to_inner, strict=False))]
    return to_outer, common


def _bottlenecks(structure: Structure, source: str, targets: frozenset[str]) -> list[str]:
    """The process's signals that every way from a controller's output to the first of the targets passes, in order."""
    if source not in structure.graph:
        return []
    process = structure.graph.subgraph([*structure.process, source])
    reached = nx.descendants(process, source)
    target = next((one for one in sorted(targets) if one in reached), None)
    if target is None:
        return []
    above = nx.immediate_dominators(process, source)
    chain = [target]
    while chain[-1] != source and above[chain[-1]] is not None and above[chain[-1]] != chain[-1]:
        chain.append(above[chain[-1]])
    return [one for one in reversed(chain) if one != source]


# ---------------------------------------------------------------- feedforward
def _fed_forward(structure: Structure, loop: Loop, disturbance: str) -> str | None:
    """The tag of the instrument through which a disturbance is fed forward ('' if none), None when it is not."""
    acted_on = frozenset(_bottlenecks(structure, loop.out, structure.measured[loop.tag]))
    process = _without(structure.process, acted_on - {disturbance})
    for tap in sorted(structure.forward[loop.tag]):
        if tap == disturbance:
            return ""
        if disturbance in process and tap in process and nx.has_path(process, disturbance, tap):
            return _instrument(structure, nx.shortest_path(process, disturbance, tap))
    return None


def _instrument(structure: Structure, way: list[str]) -> str:
    """The first block on a way that acts on nothing any loop measures: it only tells; else the last block."""
    measured = _all_measured(structure)
    for name in way[1:]:
        reached = nx.descendants(structure.process, name) | {name}
        if structure.block(name) and not reached & measured:
            return structure.block(name)
    return structure.block(way[-1])


# ---------------------------------------------------------------- graphs
def _all_measured(structure: Structure) -> frozenset[str]:
    return frozenset().union(*structure.measured.values())


def _without(graph: nx.DiGraph[str], names: frozenset[str] | set[str]) -> nx.DiGraph[str]:
    return graph.subgraph([one for one in graph if one not in names])


def _gets_to(process: nx.DiGraph[str], source: str, targets: frozenset[str]) -> bool:
    return source in process and bool(targets & (nx.descendants(process, source) | {source}))

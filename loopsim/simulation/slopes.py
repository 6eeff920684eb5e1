"""The matrix of slopes d rates / d states as text, by forward differentiation of the same straight lines."""

from __future__ import annotations

from collections.abc import Iterator

from loopsim.language.tree import Expression, Name, Number, names_in
from loopsim.model.order import Loop
from loopsim.model.types import Assignment
from loopsim.simulation.bodies import Bodies
from loopsim.simulation.loops import total_derivative
from loopsim.simulation.text import Writer

Slopes = dict[str, dict[str, Expression]]


def slopes_functions(bodies: Bodies) -> Iterator[str]:
    """`slopes` fills the entries that are not nought; `by_differences` says which columns it leaves out.

    Those are swept volumes, which reach into the history, and all of them where a loop of algebra lies between.
    """
    wanted = {name for tree in bodies.rates.values() for name in names_in(tree)}
    looped = any(isinstance(step, Loop) for step in bodies.analysis.needed(wanted))
    swept = {one.swept for one in bodies.model.dead_times.values() if one.swept}
    left_out = [name for name in bodies.states if looped or name in swept]
    lines = [] if looped else _lines(bodies, wanted, [name for name in bodies.states if name not in swept])
    yield bodies.function("slopes(t, side, x, m, p, b, h, n, z, matrix)", [*lines, "return 0.0"])
    places = sorted(bodies.states[name] for name in left_out)
    tests = [line for place in places for line in (f"if k == {place}:", "    return 1")]
    yield bodies.function("by_differences(k)", [*tests, "return 0"])


def _lines(bodies: Bodies, wanted: set[str], states: list[str]) -> list[str]:
    writer = bodies.writer()
    lines = bodies.body(wanted, writer)
    known: Slopes = {state: {state: Number(1.0)} for state in states}
    for step in bodies.analysis.needed(wanted):
        if isinstance(step, Assignment):
            lines += _carried(bodies, step.name, bodies.analysis.trees[step.name], known, writer)
    for row, rate in bodies.rates.items():
        for state, total in _by_state(rate, known).items():
            place = bodies.states[row] * len(bodies.states) + bodies.states[state]
            text = writer.value(total)
            lines += [*writer.take(), f"matrix[{place}] = {text}"]
    return lines


def _carried(bodies: Bodies, name: str, tree: Expression, known: Slopes, writer: Writer) -> list[str]:
    """The slopes of one quantity, each under a name of its own unless it is a name or a number already."""
    lines: list[str] = []
    found = _by_state(tree, known)
    for state, total in found.items():
        if not isinstance(total, Name | Number):
            slope = Name(f"d {name} by {state}")
            text = writer.value(total)
            lines += [*writer.take(), f"{bodies.identifiers.of(slope.name)} = {text}"]
            found[state] = slope
    if found:
        known[name] = found
    return lines


def _by_state(tree: Expression, known: Slopes) -> dict[str, Expression]:
    """The total derivatives of a tree by each state that it depends on, noughts left out."""
    states = sorted({state for name in names_in(tree) for state in known.get(name, {})})
    totals = {
        state: total_derivative(
            tree, {name: known[name][state] for name in names_in(tree) if state in known.get(name, {})}
        )
        for state in states
    }
    return {state: total for state, total in totals.items() if total != Number(0.0)}

"""The text of one model: the functions that the engine calls, in restricted Python."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise

from loopsim.language.evaluate import Table
from loopsim.language.tree import Expression, names_in
from loopsim.model.order import Loop, Step
from loopsim.model.types import PRIME, Assignment, Latch, Model, ScanLatch, ScanTask
from loopsim.simulation.analysis import Wishes, switch_numbers
from loopsim.simulation.bodies import ARRAYS, Bodies, Program, place_text
from loopsim.simulation.loops import loop_functions
from loopsim.simulation.slopes import slopes_functions
from loopsim.simulation.text import Writer, number_text

DEAD_ZONE = 1e-12


def generate(model: Model, wishes: Wishes) -> Program:
    """The text of a model for one kind of run."""
    bodies = Bodies(model, wishes)
    return Program(
        "\n".join(_functions(bodies)),
        bodies.states,
        bodies.memory,
        bodies.parameters,
        bodies.size_of_p,
        tuple(bodies.watched),
        wishes.recorded,
        tuple(task.tag for task in model.scans),
        tuple(bodies.dead_times),
        tuple(bodies.noises),
        tuple(bodies.analysis.switches.found),
        wishes.conditions,
        bodies.motion,
        tuple(one.tie for one in bodies.analysis.switches.found),
        tuple(bodies.loops),
    )


def _functions(bodies: Bodies) -> Iterator[str]:
    yield _constants(bodies)
    for name, table in bodies.model.tables.items():
        yield from _table(bodies.tables[name], table)
    yield _prepare(bodies)
    for number, loop in enumerate(bodies.loops):
        yield from loop_functions(bodies, loop, number)
    yield _rates(bodies)
    yield from slopes_functions(bodies)
    yield _listed(bodies, "watched", "w", list(bodies.watched))
    yield _listed(bodies, "recorded", "r", list(bodies.wishes.recorded))
    yield _switches(bodies)
    yield _clocks(bodies)
    yield _latches(bodies)
    for number, task in enumerate(bodies.model.scans):
        yield _scan(bodies, number, task)
    yield _dispatch(bodies)
    yield _settle(bodies)
    yield _timing(bodies)
    yield from _facts(bodies)


def _constants(bodies: Bodies) -> str:
    numbers = {
        "NX": len(bodies.states),
        "NM": len(bodies.memory),
        "NP": bodies.size_of_p,
        "NB": len(bodies.analysis.switches.found),
        "NW": len(bodies.watched),
        "ND": len(bodies.dead_times),
        "NR": len(bodies.wishes.recorded),
        "NC": len(bodies.model.scans),
        "NQ": len(bodies.wishes.conditions),
        "NZ": len(bodies.noises),
        "KEEP": int(bodies.lags_may_change()),
    }
    return "\n".join(f"{name} = {number}" for name, number in numbers.items()) + "\n\n"


def _table(number: str, table: Table) -> Iterator[str]:
    """Straight lines between the points of a curve, ends held; and its slope."""
    points = list(zip(table.x, table.y, strict=True))
    for function in ("interp", "interp_slope"):
        lines = [f"def {function}_{number}(a):"]
        slope_only = function == "interp_slope"
        first, last = points[0], points[-1]
        lines += [f"    if a <= {first[0]!r}:", f"        return {0.0 if slope_only else first[1]!r}"]
        for (x0, y0), (x1, y1) in pairwise(points):
            slope = (y1 - y0) / (x1 - x0)
            text = f"{slope!r}" if slope_only else f"{y0!r} + {number_text(slope)}*(a - {number_text(x0)})"
            lines += [f"    if a < {x1!r}:", f"        return {text}"]
        lines += [f"    return {0.0 if slope_only else last[1]!r}", ""]
        yield "\n".join(lines)


def _prepare(bodies: Bodies) -> str:
    """Settled values, computed at the start and after events."""
    writer, lines = bodies.writer(), []
    for name, tree in _settled_in_order(bodies):
        text = writer.value(tree)
        lines += [*writer.take(), f"{bodies.read(name)} = {text}  # {name}"]
    return bodies.function("prepare(p)", lines)


def _settled_in_order(bodies: Bodies) -> Iterator[tuple[str, Expression]]:
    settled, done = bodies.analysis.settled, set[str]()

    def visit(name: str) -> Iterator[tuple[str, Expression]]:
        if name in done or name not in settled:
            return
        done.add(name)
        for before in sorted(names_in(settled[name])):
            yield from visit(before)
        yield name, settled[name]

    for name in settled:
        yield from visit(name)


def _rates(bodies: Bodies) -> str:
    writer = bodies.writer()
    wanted = {name for tree in bodies.rates.values() for name in names_in(tree)}
    lines = bodies.body(wanted, writer)
    for name, place in bodies.states.items():
        text = writer.value(bodies.rates[name])
        where = bodies.model.states[name].where
        lines += [*writer.take(), f"dx[{place}] = {text}  # d {name}/dt: {place_text(where)}"]
    return bodies.function(f"rates(t, side, {ARRAYS}, dx)", lines)


def _listed(bodies: Bodies, function: str, target: str, names: list[str]) -> str:
    """A function that writes the values of a list of names."""
    writer = bodies.writer()
    wanted = {one for name in names for one in _reads(bodies, name)}
    lines = bodies.body(wanted, writer)
    for place, name in enumerate(names):
        tree = bodies.arguments.get(name.removeprefix("into ")) if name.startswith("into ") else None
        text = bodies.read(name) if tree is None else writer.value(tree)
        lines += [*writer.take(), f"{target}[{place}] = {text}  # {name}"]
    return bodies.function(f"{function}(t, side, {ARRAYS}, {target})", lines)


def _reads(bodies: Bodies, name: str) -> frozenset[str]:
    if name.startswith("into "):
        return names_in(bodies.arguments[name.removeprefix("into ")])
    return frozenset((name,))


# ---------------------------------------------------------------- switches
def _switches(bodies: Bodies) -> str:
    """All comparisons, each after the steps that it needs; with `live` the positions follow at once."""
    analysis, writer, done = bodies.analysis, bodies.writer(), set[int]()
    trees = [*bodies.rates.values(), *bodies.arguments.values(), *bodies.lags.values()]
    trees += [tree for pair in bodies.latches.values() for tree in pair if tree is not None]
    wanted = {
        name for switch in analysis.switches.found for side in (switch.left, switch.right) for name in names_in(side)
    }
    wanted |= {name for tree in trees for name in names_in(tree)} | analysis.switch_names(trees)
    lines = bodies.motion_lines()
    for step in analysis.needed(wanted, sticky=True):
        solved = bodies.step_lines(step, writer) if isinstance(step, Loop) else []
        # a loop is solved with its switches as they stand, and then they are compared with what came out
        lines += solved
        for tree in _trees(bodies, step):
            lines += _compared(bodies, tree, writer, done)
        lines += [] if solved else bodies.step_lines(step, writer)
    for tree in trees:
        lines += _compared(bodies, tree, writer, done)
    for number in range(len(analysis.switches.found)):
        lines += _one_switch(bodies, number, writer, done)
    return bodies.function(f"switches(live, t, side, {ARRAYS}, g)", lines)


def _trees(bodies: Bodies, step: Step) -> list[Expression]:
    if isinstance(step, Assignment):
        return [bodies.analysis.trees[step.name]]
    if isinstance(step, Loop):
        return [*(bodies.analysis.trees[one.name] for one in step.inner), *bodies.analysis.residuals(step)]
    if isinstance(step, Latch):
        return [tree for tree in bodies.latches[step.name] if tree is not None]
    return [bodies.lags[step.name]] if step.name in bodies.lags else []


def _compared(bodies: Bodies, tree: Expression, writer: Writer, done: set[int]) -> list[str]:
    return [line for number in sorted(switch_numbers(tree)) for line in _one_switch(bodies, number, writer, done)]


def _one_switch(bodies: Bodies, number: int, writer: Writer, done: set[int]) -> list[str]:
    if number in done:
        return []
    done.add(number)
    switch = bodies.analysis.switches.found[number]
    lines = [line for side in (switch.left, switch.right) for line in _compared(bodies, side, writer, done)]
    left, right = writer.value(switch.left), writer.value(switch.right)
    lines += [*writer.take(), f"first = {left}", f"second = {right}", "gap = first - second"]
    lines += [
        f"if abs(gap) <= {DEAD_ZONE}*(abs(first) + abs(second)) + {switch.zone!r}:",
        "    gap = 0.0",
        f"g[{number}] = gap",
    ]
    lines += ["if live == 1 and gap > 0.0:", f"    b[{number}] = 1.0"]
    return [*lines, "if live == 1 and gap < 0.0:", f"    b[{number}] = 0.0"]


# ---------------------------------------------------------------- dead times, latches, scans
def _clocks(bodies: Bodies) -> str:
    writer = bodies.writer()
    lines = bodies.body({name for tree in bodies.lags.values() for name in names_in(tree)}, writer)
    for place, name in enumerate(bodies.dead_times):
        swept = bodies.model.dead_times[name].swept
        clock = f"x[{bodies.states[swept]}]" if swept else "t"
        text = writer.value(bodies.lags[name])
        lines += [*writer.take(), f"c[{place}] = {clock} - {text}"]
    return bodies.function(f"clocks(t, side, {ARRAYS}, c)", lines)


def _latches(bodies: Bodies) -> str:
    """What is followed continuously: `since`, `held`, the last solutions of loops, flows that reverse."""
    writer, model = bodies.writer(), bodies.model
    wanted = set(model.latches) | {loop.unknowns[0] for loop in bodies.loops}
    wanted |= {name for tree in bodies.flows for name in names_in(tree)}
    wanted |= {name for pair in bodies.latches.values() for tree in pair if tree is not None for name in names_in(tree)}
    lines = bodies.motion_lines()
    for step in bodies.analysis.needed(wanted):
        if isinstance(step, Latch):
            lines += _update(bodies, step, writer)
        lines += bodies.step_lines(step, writer)
        if isinstance(step, Loop):
            lines += [f"m[{bodies.memory['last of ' + unknown]}] = {bodies.read(unknown)}" for unknown in step.unknowns]
    for tree in bodies.flows:
        text = writer.value(tree)
        lines += [*writer.take(), f"if {text} < 0.0:", "    n[4] = 1"]
    return bodies.function(f"latches(t, side, {ARRAYS})", lines)


def _update(bodies: Bodies, latch: Latch, writer: Writer) -> list[str]:
    condition, argument = bodies.latches[latch.name]
    test = writer.condition(condition)
    value = "t" if argument is None else writer.value(argument)
    return [*writer.take(), *_latch_lines(bodies, latch.slots, test, value)]


def _latch_lines(bodies: Bodies, slots: tuple[str, str], test: str, value: str) -> list[str]:
    start, active = (f"m[{bodies.memory[slot]}]" for slot in slots)
    return [
        f"if {test}:",
        f"    if {active} < 0.5:",
        f"        {start} = {value}",
        f"        {active} = 1.0",
        "else:",
        f"    {active} = 0.0",
    ]


def _scan(bodies: Bodies, number: int, task: ScanTask) -> str:
    writer = bodies.writer(sticky=True)
    statements = bodies.statements[task.tag]
    trees = [one.tree for one in statements if isinstance(one, Assignment)]
    trees += [one.condition for one in statements if isinstance(one, ScanLatch)]
    trees += [one.argument for one in statements if isinstance(one, ScanLatch) and one.argument is not None]
    trees += [tree for _, tree in bodies.writes[task.tag]]
    wanted = {name for tree in trees for name in names_in(tree) if not name.endswith(PRIME)}
    lines = ["side = 1", *bodies.body(wanted, writer, sticky=True), *_since_previous(bodies, task)]
    for one in statements:
        lines += _statement(bodies, one, writer)
    writes = bodies.writes[task.tag]
    values = [f"new_{place} = {writer.value(tree)}" for place, (_, tree) in enumerate(writes)]
    lines += [*writer.take(), *values]
    lines += [f"{bodies.read(stored)} = new_{place}  # {stored}" for place, (stored, _) in enumerate(writes)]
    return bodies.function(f"scan_{number}(t, {ARRAYS})", lines)


def _since_previous(bodies: Bodies, task: ScanTask) -> list[str]:
    """`scan` inside a scan: time since the previous execution; at the first one the parameter."""
    name, previous = bodies.identifiers.of(f"{task.tag}.scan{PRIME}"), f"m[{bodies.memory[task.previous]}]"
    if task.continuous:
        return [f"{name} = 0.0"]
    writer = bodies.writer()
    period = writer.value(bodies.periods[task.tag][0])
    return [f"{name} = (t - {previous} if {previous} >= 0.0 else {period})", f"{previous} = t"]


def _statement(bodies: Bodies, one: Assignment | ScanLatch, writer: Writer) -> list[str]:
    if isinstance(one, Assignment):
        text = writer.value(one.tree)
        return [*writer.take(), f"{bodies.read(one.name)} = {text}  # {place_text(one.where)}"]
    test = writer.condition(one.condition)
    value = "t" if one.argument is None else writer.value(one.argument)
    start, active = (f"m[{bodies.memory[slot]}]" for slot in one.slots)
    off = "0.0" if one.argument is None else value
    on = f"t - {start}" if one.argument is None else start
    lines = [*writer.take(), *_latch_lines(bodies, one.slots, test, value)]
    return [*lines, f"{bodies.read(one.name)} = ({on} if {active} > 0.5 else {off})"]


def _dispatch(bodies: Bodies) -> str:
    lines = []
    for number in range(len(bodies.model.scans)):
        lines += [f"if task == {number}:", f"    scan_{number}(t, {ARRAYS})"]
    return bodies.function(f"scan(task, t, {ARRAYS})", lines)


def _settle(bodies: Bodies) -> str:
    """Before an event: what the continuous law has come to, put where the scan text will look for it."""
    writer = bodies.writer()
    settles = bodies.settles
    lines = ["side = -1", *bodies.body({name for _, tree in settles for name in names_in(tree)}, writer)]
    values = [f"new_{place} = {writer.value(tree)}" for place, (_, tree) in enumerate(settles)]
    lines += [*writer.take(), *values]
    lines += [f"{bodies.read(stored)} = new_{place}  # {stored}" for place, (stored, _) in enumerate(settles)]
    return bodies.function(f"settle(t, {ARRAYS})", lines)


def _timing(bodies: Bodies) -> str:
    writer, lines = bodies.writer(), []
    for place, task in enumerate(bodies.model.scans):
        period, phase = (writer.value(tree) for tree in bodies.periods[task.tag])
        lines += [f"period[{place}] = {0.0 if task.continuous else period}", f"phase[{place}] = {phase}"]
    for place, name in enumerate(bodies.noises):
        lines.append(f"every[{place}] = {writer.value(bodies.every[name])}")
    return bodies.function("timing(p, period, phase, every)", lines)


def _facts(bodies: Bodies) -> Iterator[str]:
    """What the engine asks about dead times."""
    model = bodies.model
    kinds, arguments, volumes, watched = [], [], [], []
    for name in bodies.dead_times:
        swept = model.dead_times[name].swept
        kinds.append(1 if swept else 0)
        arguments.append(bodies.watched[f"into {name}"])
        volumes.append(bodies.states[swept] if swept else -1)
        watched.append(bodies.watched[swept] if swept else -1)
    named = {"dead_time_kind": kinds, "dead_time_argument": arguments, "dead_time_volume": volumes}
    for function, values in {**named, "watched_volume": watched}.items():
        lines = [line for k, value in enumerate(values) for line in (f"if k == {k}:", f"    return {value}")]
        yield bodies.function(f"{function}(k)", [*lines, "return -1"])

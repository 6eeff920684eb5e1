"""One strategy's run of a scenario: events in time, the engine between them, trends at the end."""

from __future__ import annotations

import heapq
import math
import time
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from functools import lru_cache

import numpy as np

from loopsim import store
from loopsim.documents.types import Event, Scenario
from loopsim.errors import Problems
from loopsim.language.units import from_si
from loopsim.model.rest import OperatingPoint
from loopsim.model.scales import ON_OFF
from loopsim.model.types import Model
from loopsim.results import LogEntry, Pieces, Status, Trends
from loopsim.simulation.actions import Action, Actions, Track, check_target, not_applicable, seconds, target_of
from loopsim.simulation.analysis import Wishes
from loopsim.simulation.bodies import Program
from loopsim.simulation.conditions import conditions_of, resolve
from loopsim.simulation.generate import generate
from loopsim.simulation.machine import Machine, Outcome, RunState, advance, boundary, build, start
from loopsim.simulation.machine import trends as trends_of
from loopsim.simulation.noise import draws
from loopsim.simulation.starts import start_values

MARK = "mark"  # among the pending: an event happens, to be noted
ARMED = "armed"  # among the pending: a condition has held long enough once this time comes
LOGGED = 200  # changes of one on/off signal that the log holds
PATIENCE = 600.0  # s: computing that one run may take
CROWD = 1000  # conditions may start each other this often in one instant


@dataclass(frozen=True, slots=True)
class Happened:
    """An event that took place: which one of the scenario, when [s], and its target's values before and after."""

    number: int
    time: float
    target: str
    before: float
    after: float


@dataclass(frozen=True, slots=True)
class RunResult:
    """Trends of one strategy, what happened in it, and which events did not apply to it."""

    trends: Trends
    happened: tuple[Happened, ...]
    not_applicable: frozenset[int]


@dataclass(slots=True)
class Simulation:
    """A run that can be advanced: the model's program, its state, and what is still to come.

    Only `state`, `tracks` and `pending` change.
    """

    model: Model
    program: Program
    machine: Machine
    state: RunState
    scenario: Scenario
    lasts: float
    actions: Actions
    judged: dict[str, str]
    recorded: tuple[str, ...]
    tracks: dict[str, Track] = field(default_factory=dict)
    pending: list[tuple[float, int, int, Action | str]] = field(default_factory=list)
    happened: list[Happened] = field(default_factory=list)
    log: list[LogEntry] = field(default_factory=list)
    waiting: dict[int, int] = field(default_factory=dict)
    held: list[bool] = field(default_factory=list)
    armed: set[int] = field(default_factory=set)
    fired: set[int] = field(default_factory=set)
    crowd: int = 0
    counter: int = 0


def prepare(
    model: Model,
    law: Model,
    point: OperatingPoint | None,
    scenario: Scenario,
    judged: Mapping[str, str],
    recorded: Mapping[str, str],
    run: int = 0,
    native: bool = True,
) -> Simulation:
    """A simulation at its first instant, events at t = 0 still to come.

    `judged` and `recorded` map the names that people read to the model's names. `native`: compiled, else interpreted.
    """
    problems = Problems()
    skipped = {k for k, event in enumerate(scenario.events) if not_applicable(event, model)}
    for number, event in enumerate(scenario.events):
        if number not in skipped:
            check_target(event, model, problems)
    problems.raise_if_any()
    watched, program, owners = program_of(model, scenario, judged, recorded)
    conditions = program.conditions
    machine = build(program.text, native)
    first = start_values(model, program, law, point)
    p = list(first.p)
    machine.prepare(p)
    lasts = seconds(scenario.lasts)
    numbers = draws(model, p, program, machine, scenario.seed, run, lasts)
    state = start(machine, first.x, first.m, p, numbers, first.floors, program.starts)
    actions = Actions(model, scenario.events)
    simulation = Simulation(model, program, machine, state, scenario, lasts, actions, watched, tuple(recorded))
    simulation.waiting = owners
    simulation.held = [False] * len(conditions)
    for number, event in enumerate(scenario.events):
        if event.at is not None and number not in skipped:
            _queue_happening(simulation, number, seconds(event.at))
            _queue(simulation, simulation.actions.of(number, seconds(event.at)))
    return simulation


def program_of(
    model: Model, scenario: Scenario, judged: Mapping[str, str], recorded: Mapping[str, str]
) -> tuple[dict[str, str], Program, dict[int, int]]:
    """What pieces show (name -> model's name), the program of a run, and the events behind its conditions."""
    skipped = {k for k, event in enumerate(scenario.events) if not_applicable(event, model)}
    conditions, owners = conditions_of(model, scenario, skipped)
    moving = frozenset(
        target_of(event)
        for number, event in enumerate(scenario.events)
        if event.kind in ("ramp", "sine", "follow") and number not in skipped
    )
    flags = {name: name for name, signal in model.signals.items() if signal.unit == ON_OFF and resolve(model, name)}
    watched = dict(sorted({**flags, **judged}.items()))
    wishes = Wishes(tuple(dict.fromkeys(watched.values())), tuple(recorded.values()), conditions, moving)
    return watched, _generated(model, wishes), owners


@lru_cache(maxsize=64)
def _generated(model: Model, wishes: Wishes) -> Program:
    """The program of a model; scenarios that want the same share it, and later processes too."""
    if not model.key:
        return generate(model, wishes)
    return store.kept(store.digest([model.key, repr(wishes)]), lambda: generate(model, wishes))


# ---------------------------------------------------------------- events
def _queue(simulation: Simulation, actions: Iterable[Action]) -> None:
    for action in actions:
        simulation.counter += 1
        heapq.heappush(simulation.pending, (action.time, action.order, simulation.counter, action))


def _queue_happening(simulation: Simulation, number: int, time: float) -> None:
    """A mark among the pending actions: event `number` happens at this time."""
    simulation.counter += 1
    heapq.heappush(simulation.pending, (time, number, simulation.counter, MARK))


def apply_due(simulation: Simulation, now: float) -> None:
    """Carry out all actions of this instant, then let scans and switches follow."""
    machine, state = simulation.machine, simulation.state
    machine.settle(now, state.x, state.m, state.p, state.b, state.h, state.n, state.z)
    marks = []
    while simulation.pending and simulation.pending[0][0] <= now + _tie(now):
        _, number, _, entry = heapq.heappop(simulation.pending)
        if entry is ARMED:
            simulation.fired.add(number)
            _queue_happening(simulation, number, now)
            _queue(simulation, simulation.actions.of(number, now))
        elif isinstance(entry, Action):
            _carry_out(simulation, entry, now)
        else:
            marks.append((number, _target_value(simulation, number, now)))
    machine.prepare(state.p)
    boundary(machine, state, event=True)
    for number, old in marks:
        event = simulation.scenario.events[number]
        simulation.log.append(LogEntry(now, _sentence(event), event.target, event.where))
        new = _target_value(simulation, number, now)
        simulation.happened.append(Happened(number, now, target_of(event), old, new))


def _tie(now: float) -> float:
    return 1e-9 * max(1.0, abs(now))


def _target_value(simulation: Simulation, number: int, now: float) -> float:
    name = target_of(simulation.scenario.events[number])
    if name in simulation.tracks:
        numbers = simulation.tracks[name].numbers()
        return numbers[0] + numbers[1] * (now - numbers[2])
    slot = simulation.model.slots.get(name)
    return slot.value if slot is not None else math.nan


def _carry_out(simulation: Simulation, action: Action, now: float) -> None:
    state, program = simulation.state, simulation.program
    if action.change is not None:
        slot = simulation.model.slots[action.target]
        track = simulation.tracks.setdefault(action.target, Track(slot.value))
        action.change(track, now)
        numbers = track.numbers()
        for swing in (numbers[3], -numbers[3]):
            simulation.actions.check(action.order, action.target, numbers[0] + swing)
        if action.target in program.motion:
            place = program.motion[action.target]
            state.p[place : place + 6] = list(numbers)
        else:
            state.p[program.parameters[action.target]] = numbers[0]
    for name, value in action.writes:
        if name in program.states:
            state.x[program.states[name]] = value
        else:
            state.m[program.memory[name]] = value


def _sentence(event: Event) -> str:
    text = {"fault": f"fault {event.fault}", "mode": "mode"}.get(event.kind, event.kind)
    value = getattr(event.to or event.by or event.times or event.size, "text", "")
    return f"{text} {event.target} {value}".strip()


# ---------------------------------------------------------------- the run
def run(simulation: Simulation, every: float, patience: float = PATIENCE) -> RunResult:
    """Advance to the end of the scenario; trends are recorded every `every` seconds.

    `patience` [s] is how long the computing may take before the run is given up.
    """
    deadline = time.monotonic() + patience
    if not simulation.pending or simulation.pending[0][0] > 0:
        _queue(simulation, [Action(0.0, -1, "", None)])
    status = Status("done")
    simulation.state.record_every = every
    while status.code == "done":
        now = simulation.state.t
        if simulation.pending and simulation.pending[0][0] <= now + _tie(now):
            apply_due(simulation, now)
            status = conditions_turned(simulation)
            simulation.crowd += 1
            if simulation.crowd > CROWD:
                status = Status("stopped", "events start each other for ever in one instant", now)
            continue
        simulation.crowd = 0
        if now >= simulation.lasts - _tie(now):
            break
        until = min(simulation.pending[0][0] if simulation.pending else math.inf, simulation.lasts)
        outcome = advance(simulation.machine, simulation.state, until, lambda: time.monotonic() > deadline)
        status = _outcome(simulation, outcome)
    return _result(simulation, status)


def _outcome(simulation: Simulation, outcome: Outcome) -> Status:
    """What an advance ended with: nothing, conditions that turned, or a run that stopped."""
    if outcome.code not in ("reached", "condition"):
        return _stopped(simulation, outcome)
    if outcome.code == "reached" and simulation.state.t >= simulation.lasts - _tie(simulation.lasts):
        simulation.state.record_end(simulation.lasts)
        _finish(simulation)
    return conditions_turned(simulation)


def _finish(simulation: Simulation) -> None:
    """The last instant: scans that fall on it, where no event does."""
    if not (simulation.pending and simulation.pending[0][0] <= simulation.lasts + _tie(simulation.lasts)):
        boundary(simulation.machine, simulation.state, event=False)


def conditions_turned(simulation: Simulation) -> Status:
    """Queue or take back the events whose conditions have turned; stop where a watched level was passed."""
    first = len(simulation.program.switches) - len(simulation.program.conditions)
    for place, before in enumerate(simulation.held):
        true = simulation.state.b[first + place] > 0.5
        if true == before:
            continue
        simulation.held[place] = true
        if place in simulation.waiting:
            _turned(simulation, simulation.waiting[place], true)
        elif true:
            return _bound_passed(simulation, place, simulation.state.t)
    return Status("done")


def _turned(simulation: Simulation, number: int, true: bool) -> None:
    event, now = simulation.scenario.events[number], simulation.state.t
    assert event.when is not None
    if not true:
        late = [one for one in simulation.pending if one[1] == number and one[0] > now and one[2] in simulation.armed]
        simulation.pending = [one for one in simulation.pending if one not in late]
        heapq.heapify(simulation.pending)
        return
    if event.when.once and number in simulation.fired:
        return
    holds = seconds(event.when.holds) if event.when.holds is not None else 0.0
    simulation.counter += 1
    simulation.armed.add(simulation.counter)
    heapq.heappush(simulation.pending, (now + holds, number, simulation.counter, ARMED))


def _bound_passed(simulation: Simulation, place: int, now: float) -> Status:
    bound = simulation.model.bounds[place]
    words = {
        "above": "must stay above",
        "at_least": "must be at least",
        "below": "must stay below",
        "at_most": "must be at most",
    }
    limit = getattr(bound.limit, "value", None)
    unit = simulation.model.signals[bound.signal].unit if bound.signal in simulation.model.signals else None
    shown = "its limit" if limit is None or unit is None else f"{from_si(limit, unit):.6g} {unit.text}"
    sentence = f"'{bound.signal}' {words[bound.relation]} {shown}; it passed it"
    return Status("stopped", sentence, now, bound.where)


def _stopped(simulation: Simulation, outcome: Outcome) -> Status:
    """A computation that cannot go on: which state or comparison, and where it is written."""
    program, model = simulation.program, simulation.model
    where, name = None, ""
    if outcome.code in ("not_finite", "step_too_small") and 0 <= outcome.index < len(program.states):
        name = list(program.states)[outcome.index]
        where = model.states[name].where
    elif outcome.code == "chatter":
        switch = program.switches[outcome.index]
        name, where = switch.tag, switch.where
    elif outcome.code == "unsolved":
        loop = program.loops[outcome.index - 1]
        name, where = loop.unknowns[0], loop.where
    sentence = f"{outcome.sentence}: '{name}'" if name else outcome.sentence
    return Status("stopped", sentence, simulation.state.t, where)


def _result(simulation: Simulation, status: Status) -> RunResult:
    state, program, model = simulation.state, simulation.program, simulation.model
    places = [program.watched.index(flat) for flat in simulation.judged.values()]
    time, rows, starts, lengths, samples = trends_of(simulation.machine, state, places)
    columns = {name: rows[:, place] for place, name in enumerate(simulation.recorded)}
    pieces = Pieces(tuple(simulation.judged), starts, lengths, samples)
    units = {name: model.signals[name].unit for name in model.signals}
    trends = Trends(time, columns, units, pieces, status, _log(simulation, pieces), model.assumed, state.statistics())
    skipped = frozenset(k for k, event in enumerate(simulation.scenario.events) if not_applicable(event, model))
    return RunResult(trends, tuple(simulation.happened), skipped)


def _log(simulation: Simulation, pieces: Pieces) -> tuple[LogEntry, ...]:
    """What happened, in order of time: events, on/off signals that changed, a flow that turned round."""
    model, found = simulation.model, list(simulation.log)
    for place, name in enumerate(pieces.names):
        signal = model.signals.get(name)
        if signal is None or signal.unit != ON_OFF:
            continue
        path = pieces.samples[:, [0, 4], place].ravel() > 0.5
        times = np.stack([pieces.start, pieces.start + pieces.length], axis=1).ravel()
        for change in (np.flatnonzero(path[1:] != path[:-1]) + 1)[:LOGGED].tolist():
            word = "comes on" if path[change] else "goes off"
            found.append(LogEntry(float(times[change]), f"{name} {word}", signal.tag, signal.where))
    if not math.isnan(simulation.state.reversed_at):
        text = "a flow through a full pipe turns round; it is held back, and counts as standing"
        found.append(LogEntry(simulation.state.reversed_at, text))
    return tuple(sorted(found, key=lambda one: one.time))

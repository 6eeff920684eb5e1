"""The operating point: plant and controllers at rest together."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import combinations
from random import Random

import numpy as np
from numpy.typing import NDArray

from loopsim.errors import ComputationError, Problem
from loopsim.language.evaluate import evaluate
from loopsim.language.tree import Name
from loopsim.language.units import from_si
from loopsim.model.numbers import FloatArray, System, system_of
from loopsim.model.types import Controller, Model

STEPS = 600
NEWTON, ALGEBRA = 12, 60  # tries of one step
GROWTH = 3.0  # of one step to the next
LAST_STEP = 1e13  # s: from here on a step is Newton's method on the rates
FARTHEST = 100.0  # times full output: beyond that the output has no hold on the measurement worth a number
NO_REST = "balance what comes in and goes out, or start the scenario with `starts: given`"
NO_LIMIT = 1e9  # controller limits when asking what would be needed
SHARES = (0.0, 0.3, 2.0, 4.0)  # of what a state is at rest: where a search for further rests starts
KELVIN_SHARES = (0.9, 1.1, 1.2, 1.3)  # the same for a scale that starts far below its daily use
REFUSALS = 3  # steps that such a start may fail before it is given up
MIXED = 16  # starts with all states moved at once


@dataclass(frozen=True, slots=True)
class Unreached:
    """A set point that a limit keeps out of reach."""

    controller: Controller
    needed: float
    reached: float
    sentence: str


@dataclass(frozen=True, slots=True, eq=False)
class OperatingPoint:
    """Values at rest of every name [SI], and set points out of reach.

    `wished` are the values that would be if nothing had a limit: there the signs of loops can be told.
    """

    values: dict[str, float]
    wished: dict[str, float]
    unreached: tuple[Unreached, ...]


def rest(model: Model, guess: FloatArray | None = None) -> OperatingPoint:
    """The operating point of a law model, from the starts of its states (or from `guess`).

    Raises `ComputationError` where there is no rest, with the state that keeps moving.
    """
    system = system_of(model)
    begin = system.starts() if guess is None else guess
    wish = _wished(model, begin) if model.controllers else None
    u = settled(system, begin if wish is None else wish.unknowns)
    values = system.values(u)
    wished = wish.values if wish is not None else values
    return OperatingPoint(values, wished, _unreached(model, values, wish))


@dataclass(frozen=True, slots=True)
class _Wish:
    """The rest that would be if neither controllers nor valves had limits."""

    unknowns: FloatArray
    values: dict[str, float]


def _wished(model: Model, begin: FloatArray) -> _Wish | None:
    """Where the plant would rest without limits; None where that cannot be told.

    The search starts here, because saturated controllers give a search no slope to follow.
    """
    slots = {
        name: replace(slot, value=NO_LIMIT if name.endswith(".high") else -NO_LIMIT) if ".limits." in name else slot
        for name, slot in model.slots.items()
    }
    system = System(replace(model, slots=slots), free_of_limits=True)
    # Newton's method at once: an unstable loop would run away from its rest in time
    for first in (LAST_STEP, 1.0):
        try:
            u = settled(system, begin, first)
        except ComputationError:
            continue
        return _Wish(u, system.values(u))
    return None


def settled(system: System, u: FloatArray, first: float = 1.0) -> FloatArray:
    """Follow the plant to its rest by implicit Euler steps that grow until they are Newton's method on the rates.

    `first` [s] is the first step. Raises `ComputationError` where that leads to no rest.
    """
    u, arrived = _followed(system, u, first, STEPS)
    if not arrived:
        raise _no_rest(system, u, system.residuals(system.values(u)))
    creeping = _creeping(system, u)
    if creeping:
        raise _switching(system, creeping)
    values = system.values(u)
    if system.outside(values):
        raise _no_rest(system, u, system.residuals(values))
    return u


def _creeping(system: System, u: FloatArray) -> str:
    """A memory that is not yet what its own execution makes of it, and would end the rest if it were; '' for none.

    An on/off memory that ought to be off comes ever nearer to 0 and stays on all the way.
    """
    mapped = [place for place, name in enumerate(system.unknowns[: system.states]) if system.model.states[name].mapped]
    if not mapped:
        return ""
    executed = u.copy()
    executed[mapped] += system.residuals(system.values(u))[mapped]
    inertia = np.array([1.0] * system.states + [0.0] * (len(u) - system.states)) / LAST_STEP
    settled_again = _implicit_step(system, executed, inertia)
    if settled_again is not None and np.allclose(settled_again, executed, rtol=1e-9, atol=1e-12):
        return ""
    return next(system.unknowns[place] for place in mapped if executed[place] != u[place])


def _followed(system: System, u: FloatArray, first: float, refusals: int) -> tuple[FloatArray, bool]:
    """Where that leads, and whether it is a rest; given up after so many refused steps."""
    mass = np.array([1.0] * system.states + [0.0] * (len(u) - system.states))
    step = first
    for _ in range(STEPS if len(u) else 0):
        trial = _implicit_step(system, u, mass / step)
        if trial is None:
            step, refusals = step / 8.0, refusals - 1
            if step < 1e-9 or refusals < 0:
                break
            continue
        still = bool(np.all(np.abs(trial - u) <= 1e-12 * (np.abs(u) + 1e-6)))
        u = trial
        if still and step >= LAST_STEP:
            return u, True
        step = min(step * GROWTH, LAST_STEP)
    return u, not len(u)


def _implicit_step(system: System, u: FloatArray, inertia: FloatArray) -> FloatArray | None:
    """Solve inertia * (new - u) = rate(new) by Newton's method with a line search; None where that fails.

    The line search matters: a valve at its stroke speed gives no slope, and full steps would jump to and fro.
    """
    new, values = u, system.values(u)
    gap = -system.residuals(values)
    for _ in range(NEWTON if np.all(inertia > 0) else ALGEBRA):  # no shorter step helps an equation without inertia
        move = -_solved(np.diag(inertia) - system.jacobian(values), gap)
        if not np.all(np.isfinite(move)):
            return None
        share, before = 1.0, _size(gap, new, inertia)
        while True:
            trial = new + share * move
            trial_values = system.values(trial)
            trial_gap = inertia * (trial - u) - system.residuals(trial_values)
            after = _size(trial_gap, new, inertia)
            if after < before or before == 0.0 or np.all(np.abs(share * move) <= 1e-13 * (np.abs(new) + 1e-6)):
                break
            share /= 2.0
            if share < 1e-6:
                return None
        new, values, gap = trial, trial_values, trial_gap
        if np.all(np.abs(share * move) <= 1e-11 * (np.abs(new) + 1e-6)):
            return new
    return None


def _solved(matrix: FloatArray, right: FloatArray) -> FloatArray:
    try:
        return np.asarray(np.linalg.solve(matrix, right), dtype=np.float64)
    except np.linalg.LinAlgError:
        return np.asarray(np.linalg.lstsq(matrix, right, rcond=None)[0])


def _size(gap: FloatArray, u: FloatArray, inertia: FloatArray) -> float:
    scale = (np.abs(u) + 1e-3) * np.where(inertia > 0, inertia, 1.0)
    size = float(np.max(np.abs(gap) / scale))
    return size if np.isfinite(size) else np.inf


def _no_rest(system: System, u: FloatArray, residuals: FloatArray) -> ComputationError:
    worst = int(np.argmax(np.abs(residuals) / (np.abs(u) + 1e-3)))
    name = system.outside(system.values(u)) or system.unknowns[worst]
    state = system.model.states.get(name)
    if state is None:
        implicit = system.model.implicits.get(name)
        ends = " between its ends" if implicit is not None and implicit.low is not None else ""
        what = f"no steady state was found: nothing{ends} solves the equation of '{name}'"
        cure = "look at the equation and at `between:`, or ask for `starts: given`"
        return ComputationError([Problem(what, cure, implicit.where if implicit else None)])
    per_hour = residuals[worst] * 3600.0 / state.unit.factor
    what = f"there is no steady state: '{name}' still moves by {per_hour:.4g} {state.unit.text} per hour"
    if state.mapped:
        return _switching(system, name)
    return ComputationError([Problem(what, NO_REST, state.where)])


def _switching(system: System, name: str) -> ComputationError:
    what = f"there is no steady state: '{name}' switches for ever, as on-off and time-proportioned control do"
    return ComputationError([Problem(what, NO_REST, system.model.states[name].where)])


# ---------------------------------------------------------------- limits
def _unreached(model: Model, values: dict[str, float], wish: _Wish | None) -> tuple[Unreached, ...]:
    """Controllers with integral action whose error does not vanish at rest: a limit holds them."""
    found = []
    for controller in model.controllers:
        set_point = values.get(model.in_use.get(controller.sp, controller.sp))
        measured = values.get(controller.pv)
        if not controller.integral or set_point is None or measured is None or _is_manual(model, controller):
            continue
        span = _span(model, controller)
        if abs(set_point - measured) > 1e-6 * span:
            found.append(_explained(model, controller, set_point, measured, wish))
    return tuple(found)


def _is_manual(model: Model, controller: Controller) -> bool:
    slot = model.slots.get(f"{controller.tag}.mode")
    return slot is not None and slot.choices[int(slot.value)] == "manual"


def _span(model: Model, controller: Controller) -> float:
    ends = [model.slots.get(f"{controller.tag}.range.{end}") for end in ("low", "high")]
    return ends[1].value - ends[0].value if ends[0] is not None and ends[1] is not None else 1.0


def _explained(model: Model, controller: Controller, wanted: float, measured: float, wish: _Wish | None) -> Unreached:
    needed = wish.values[controller.out] if wish is not None else float("nan")
    driven = [
        one.tag for one in model.assignments.values() if one.tree == Name(controller.out) and one.tag != controller.tag
    ]
    actuator = sorted(driven)[0] if driven else controller.tag
    shown = _source(model, controller.pv)
    unit = model.signals[shown].unit if shown in model.signals else None
    reached = f"{from_si(measured, unit, model.air_pressure):.4g} {unit.text}" if unit else f"{measured:.6g}"
    sentence = f"the {'most' if wanted > measured else 'least'} that {shown} reaches is {reached}"
    if abs(needed) <= FARTHEST:
        sentence = f"{actuator} would have to be at {100 * needed:.3g} %; " + sentence
    return Unreached(controller, needed, measured, sentence)


def _source(model: Model, name: str) -> str:
    """The signal behind an input that only passes it on."""
    while name not in model.signals and isinstance(tree := model.assignments[name].tree, Name):
        name = tree.name
    return name


def eigenvalues(system: System, values: dict[str, float]) -> FloatArray:
    """Eigenvalues [1/s] of the continuous states at a point, loops of algebra solved; complex, shape (states,)."""
    return eigenvalues_of(system, system.jacobian(values))


def eigenvalues_of(system: System, matrix: FloatArray) -> FloatArray:
    """Eigenvalues [1/s] of the continuous states from the matrix of slopes."""
    count = system.states
    inner = matrix[:count, :count]
    if matrix.shape[0] > count:
        below = np.linalg.solve(matrix[count:, count:], matrix[count:, :count])
        inner = inner - matrix[:count, count:] @ below
    kept = [k for k, name in enumerate(system.unknowns[:count]) if not system.model.states[name].mapped]
    return np.asarray(np.linalg.eigvals(inner[np.ix_(kept, kept)])) if kept else np.zeros(0)


# ---------------------------------------------------------------- further rests
def all_rests(model: Model) -> list[OperatingPoint]:
    """Every operating point that a search from many starts finds, the one of `rest` first.

    The starts move one state at a time and all at once, and lie between rests already found, where those that are not
    stable hide. Each is followed in time and by Newton's method. What nothing determines keeps its start. Raises
    `ComputationError` where there is no rest at all; that there are no more rests is not proven.
    """
    system, first = system_of(model), rest(model)
    found = [np.array([first.values[name] for name in system.unknowns])]
    for begin in _starts(system, found[0]):
        _look(system, begin, found)
    known = 0
    while known < len(found):
        known = len(found)
        for one, other in combinations(found[:known], 2):
            for share in (0.25, 0.5, 0.75):
                _look(system, one + share * (other - one), found)
    points = [OperatingPoint(values, values, _unreached(model, values, None)) for values in map(system.values, found)]
    return [first, *points[1:]]


def _starts(system: System, at_rest: FloatArray) -> Iterator[FloatArray]:
    """Places round a rest, the same ones every time."""
    moving = np.flatnonzero(~_undetermined(system, at_rest))
    choices = {place: _levels(system, int(place), float(at_rest[place])) for place in moving}
    for place, levels in choices.items():
        for level in levels:
            begin = at_rest.copy()
            begin[place] = level
            yield begin
    draw = Random(1)
    for _ in range(MIXED if len(moving) > 1 else 0):
        begin = at_rest.copy()
        for place, levels in choices.items():
            begin[place] = levels[int(draw.random() * len(levels))]
        yield begin


def _levels(system: System, place: int, value: float) -> list[float]:
    state = system.model.states.get(system.unknowns[place])
    unit = state.unit if state is not None else None
    if unit is not None and unit.offset:
        return [share * value for share in KELVIN_SHARES]
    base = value if value else (unit.factor if unit is not None else 1.0)
    return [share * base for share in SHARES]


def _undetermined(system: System, u: FloatArray) -> NDArray[np.bool_]:
    """Which unknowns may move without leaving the rest: parts of directions in which no rate changes."""
    matrix = np.nan_to_num(system.jacobian(system.values(u))) * (np.abs(u) + 1e-9)
    largest = np.max(np.abs(matrix), axis=1, keepdims=True)
    _, sizes, directions = np.linalg.svd(matrix / np.where(largest > 0, largest, 1.0))
    idle = directions[sizes <= 1e-10 * max(float(sizes[0]), 1e-300)]
    return np.asarray(np.any(np.abs(idle) > 1e-6, axis=0), dtype=np.bool_)


def _look(system: System, begin: FloatArray, found: list[FloatArray]) -> None:
    """Add the rests that a start leads to, by Newton's method and in time, where they are new and possible."""
    for first in (LAST_STEP, 1.0):
        try:
            u, arrived = _followed(system, begin, first, REFUSALS)
        except (ArithmeticError, ValueError):  # a start far off may have no value
            continue
        if (
            arrived
            and not _creeping(system, u)
            and not system.outside(system.values(u))
            and _possible(system, u)
            and not any(_same(system, system.inside(u), other) for other in found)
        ):
            found.append(system.inside(u))


def _same(system: System, u: FloatArray, other: FloatArray) -> bool:
    """Whether two rests differ in nothing but what nothing determines."""
    fixed = ~(_undetermined(system, u) | _undetermined(system, other))
    return bool(np.allclose(u[fixed], other[fixed], rtol=1e-6, atol=1e-9))


def _possible(system: System, u: FloatArray) -> bool:
    """Whether every name has a value there and the watched levels hold."""
    bounds, values = system.model.bounds, system.values(u)
    if not all(np.isfinite(value) for value in values.values() if isinstance(value, float)):
        return False
    return all(_kept(bound.relation, values[bound.signal], float(evaluate(bound.limit, values))) for bound in bounds)


def _kept(relation: str, value: float, limit: float) -> bool:
    """Whether a watched level holds, rounding left aside."""
    near = 1e-9 * (abs(limit) + 1e-6)
    return value >= limit - near if relation in ("above", "at_least") else value <= limit + near

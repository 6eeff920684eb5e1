"""Where a run starts: every state and stored value at the operating point, or at its declared start."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache

from loopsim.language.evaluate import evaluate
from loopsim.language.tree import Expression, names_in
from loopsim.model.numbers import system_of
from loopsim.model.order import Loop, ordered
from loopsim.model.primitives import FOR_EVER
from loopsim.model.rest import OperatingPoint
from loopsim.model.types import Assignment, DeadTime, Latch, Memory, Model, Noise
from loopsim.simulation.bodies import Program


@dataclass(frozen=True, slots=True)
class Start:
    """The arrays x, m, p of a run at its first instant, and the size below which changes of a state do not matter."""

    x: tuple[float, ...]
    m: tuple[float, ...]
    p: tuple[float, ...]
    floors: tuple[float, ...]


@lru_cache(maxsize=64)
def start_values(model: Model, program: Program, law: Model, point: OperatingPoint | None) -> Start:
    """The first values of a time model, told once; `point` is the rest of the law model, None for `starts: given`."""
    system = system_of(law)
    known = dict(point.values) if point is not None else system.values(system.starts())
    steady = point is not None
    values: dict[str, float] = {name: slot.value for name, slot in model.slots.items()}
    for name in program.states:
        values[name] = _state(model, name, known, values, steady)
    outside = _Outside(model, {**known, **values})
    for name, memory in model.memory.items():
        values[name] = outside.values[name] = _memory(memory, known, outside, steady)
    _latches(model, outside, values, steady)
    x = tuple(values[name] for name in program.states)
    m = tuple(_stored(name, values, outside) for name in program.memory)
    p = [0.0] * program.size_of_p
    for name, slot in model.slots.items():
        p[program.parameters[name]] = slot.value
    for name, place in program.motion.items():
        p[place : place + 6] = [model.slots[name].value, 0.0, 0.0, 0.0, 1.0, 0.0]
    return Start(x, m, tuple(p), tuple(_floor(model, name, values) for name in program.states))


def _floor(model: Model, name: str, values: Mapping[str, float]) -> float:
    """1 K, 1 % of full scale for shares, 1 % of the start, or a thousandth of the unit, whichever is larger."""
    unit = model.states[name].unit
    if not unit.dimension.powers:
        return 0.01
    if unit.point or unit.text == "K":
        return unit.factor if unit.text in ("degC", "K") else 1000.0
    return max(0.01 * abs(values[name]), 1e-3 * unit.factor)


def _state(model: Model, name: str, known: Mapping[str, float], values: Mapping[str, float], steady: bool) -> float:
    state = model.states[name]
    if "#" in name:
        return 0.0
    if steady and name in known:
        return known[name]
    return float(evaluate(state.start, {**known, **values}))


def _memory(memory: Memory, known: Mapping[str, float], outside: _Outside, steady: bool) -> float:
    """A stored value: at rest what the law gives; else its start, or what the law gives at the starts."""
    name = memory.name.removesuffix(".left")
    declared = bool(names_in(memory.start)) or getattr(memory.start, "value", 0.0) != 0.0
    if name in known and (steady or not declared):
        return known[name]
    return outside.of(memory.start)


def _latches(model: Model, outside: _Outside, values: dict[str, float], steady: bool) -> None:
    """What has been true for ever at rest: `since` counts from long ago."""
    for latch in model.latches.values():
        if latch.kind == "since" and outside.of(latch.condition) and steady:
            values[latch.slots[0]], values[latch.slots[1]] = -FOR_EVER, 1.0


def _stored(name: str, values: Mapping[str, float], outside: _Outside) -> float:
    for stem in ("last of ", "now of "):
        if name.startswith(stem):
            return outside.name(name.removeprefix(stem))
    return values[name]


class _Outside:
    """The time model's own names evaluated at the start, dead times and noise passed through."""

    def __init__(self, model: Model, values: dict[str, float]) -> None:
        self.model, self.values = model, values
        self.values.update(model.tables)  # type: ignore[arg-type]

    def of(self, tree: Expression) -> float:
        """A tree at the start."""
        for name in names_in(tree):
            self.name(name)
        return float(evaluate(tree, self.values))

    def name(self, name: str) -> float:
        """A name at the start."""
        if name in self.values:
            return self.values[name]
        for step in ordered(self.model, [name]):
            self._step(step)
        return self.values.get(name, 0.0)

    def _step(self, step: Assignment | Loop | DeadTime | Noise | Latch) -> None:
        if isinstance(step, Loop):
            for one in (*step.unknowns, *(inner.name for inner in step.inner)):
                self.values.setdefault(one, 0.0)
        elif step.name not in self.values:
            tree = getattr(step, "tree", None) if isinstance(step, Assignment) else getattr(step, "argument", None)
            self.values[step.name] = self.of(tree) if tree is not None else 0.0

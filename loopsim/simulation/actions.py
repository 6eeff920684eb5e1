"""What events do to a run: values of slots over time, faults, modes, stored values written."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field

from loopsim.documents.types import Event, Given, Quantity, Value, Word
from loopsim.errors import Problems, fail, nearest
from loopsim.language.units import PERCENT, Unit, difference_of, from_si, to_si
from loopsim.model.scales import si_value
from loopsim.model.types import RELATIONS, Model
from loopsim.simulation.follow import read_series


@dataclass(slots=True)
class Track:
    """A slot that events change: a base (constant, or on a ramp), a factor, what is laid on it, and a sine."""

    base: float
    slope: float = 0.0
    since: float = 0.0
    factor: float = 1.0
    laid: dict[int, float] = field(default_factory=dict)
    sine: tuple[float, float, float] = (0.0, 1.0, 0.0)

    def at(self, time: float) -> float:
        """The base at a time."""
        return self.base + self.slope * (time - self.since)

    def hold(self, time: float) -> None:
        """End a ramp where it is."""
        self.base, self.slope, self.since = self.at(time), 0.0, time

    def numbers(self) -> tuple[float, float, float, float, float, float]:
        """base, slope, from, size, period, phase as the generated text wants them."""
        base = self.base * self.factor + sum(self.laid.values())
        return (base, self.slope * self.factor, self.since, *self.sine)


@dataclass(frozen=True, slots=True)
class Action:
    """One change at one time; `order` keeps the scenario's order among equal times."""

    time: float
    order: int
    target: str
    change: Callable[[Track, float], None] | None
    writes: tuple[tuple[str, float], ...] = ()


def target_of(event: Event) -> str:
    """The flat name that an event addresses."""
    if event.kind == "mode":
        return f"{event.target}.mode"
    return f"{event.target}.{event.fault}" if event.kind == "fault" else event.target


def free_names(events: tuple[Event, ...], law: Model) -> frozenset[str]:
    """Names that events may change, boundary values left out: those are never taken for constant."""
    names = {target_of(event) for event in events}
    return frozenset(
        name for name in names if name not in law.slots or law.slots[name].kind not in ("boundary", "input")
    )


def check_target(event: Event, model: Model, problems: Problems) -> bool:
    """Whether an event's target can be changed in this model; told where it is computed or unknown."""
    name = target_of(event)
    stored = name in model.memory or name in model.states
    if name in model.slots or (event.kind == "step" and stored):
        return True
    if name in model.assignments:
        driver = model.assignments[name]
        what = getattr(driver.tree, "name", "") or f"a formula of '{driver.tag}'"
        problems.add(
            f"'{name}' cannot be changed by an event: it is given by {what}",
            event.where,
            "change what drives it, or take its wire out in a strategy",
        )
    elif stored:
        problems.add(f"'{name}' is stored; only a `step` can write it", event.where)
    else:
        known = [*model.slots, *model.memory, *model.states]
        problems.add(f"'{name}' names nothing that an event could change", event.where, nearest(name, known))
    return False


class Actions:
    """Turns events into actions on one model, each at its time."""

    def __init__(self, model: Model, events: tuple[Event, ...]) -> None:
        self.model, self.events = model, events

    def of(self, number: int, time: float) -> list[Action]:
        """What event `number` does when it happens at `time` [s]."""
        event = self.events[number]
        name = target_of(event)
        make = getattr(self, f"_{event.kind}")
        actions: list[Action] = make(event, number, name, time)
        return actions

    def _si(self, value: Value, unit: Unit, what: str) -> float:
        problems = Problems()
        if not isinstance(value, Quantity | Word):
            raise fail(f"{what} wants a single value", value.where)
        number = si_value(value, unit, problems, self.model.air_pressure, what)
        problems.raise_if_any()
        return number

    def _value(self, value: Value, name: str, what: str) -> float:
        """A value for a slot: a choice of a setting, on or off, or a number in its unit."""
        slot = self.model.slots.get(name)
        if slot is not None and slot.choices:
            word = getattr(value, "text", "")
            if word not in slot.choices:
                raise fail(f"'{name}' cannot be '{word}'", value.where, nearest(word, slot.choices, "choices"))
            return float(slot.choices.index(word))
        return self._si(value, self._unit(name), what)

    def _unit(self, name: str) -> Unit:
        for items in (self.model.slots, self.model.memory, self.model.states):
            if name in items:
                return items[name].unit
        return PERCENT

    def change_by(self, by: Quantity, name: str, base: float) -> float:
        """The size of `by:`: a difference in the target's unit, or a percentage of the base at that instant."""
        unit = self._unit(name)
        relative = by.unit is not None and by.unit.text == "%"
        if relative and unit.text != "%":
            if unit.point:
                raise fail(
                    f"{by.text} of a value in {unit.text} has no meaning, because its zero is shifted",
                    by.where,
                    f"give the difference in {difference_of(unit).text}",
                )
            return base * by.value * PERCENT.factor
        return self._si(by, difference_of(unit), f"the change of '{name}'")

    def check(self, number: int, name: str, value: float) -> None:
        """Refuse an event that brings a number [SI] beyond its bounds."""
        slot = self.model.slots[name]
        for relation, limit in slot.bounds:
            if not RELATIONS[relation](value, limit):
                shown, wanted = (f"{from_si(one, slot.unit, self.model.air_pressure):.5g}" for one in (value, limit))
                what = f"this event brings '{name}' to {shown} {slot.unit.text}"
                cure = f"it must be {relation.replace('_', ' ')} {wanted} {slot.unit.text}"
                raise fail(what, self.events[number].where, cure)

    def _step(self, event: Event, number: int, name: str, time: float) -> list[Action]:
        if name not in self.model.slots:
            if event.to is None:
                raise fail(f"'{name}' is stored; give its new value with `to:`", event.where)
            return [Action(time, number, "", None, ((name, self._value(event.to, name, f"'{name}'")),))]
        if event.to is not None:
            value = self._value(event.to, name, f"'{name}'")
            self.check(number, name, value)
            return [Action(time, number, name, lambda track, now: _set_base(track, value, now))]
        if event.times is not None:
            factor = event.times.value * (event.times.unit.factor if event.times.unit else 1.0)
            return [Action(time, number, name, lambda track, now: setattr(track, "factor", track.factor * factor))]
        assert event.by is not None
        by = event.by
        return [Action(time, number, name, lambda track, now: self._lay(track, number, by, name, now))]

    def _lay(self, track: Track, number: int, by: Quantity, name: str, now: float) -> None:
        track.laid[number] = track.laid.get(number, 0.0) + self.change_by(by, name, track.at(now) * track.factor)

    def _ramp(self, event: Event, number: int, name: str, time: float) -> list[Action]:
        over = seconds(event.over)

        def begin(track: Track, now: float) -> None:
            start = track.at(now)
            if event.to is not None:
                end = self._value(event.to, name, f"'{name}'")
            else:
                assert event.by is not None
                end = start + self.change_by(event.by, name, start)
            self.check(number, name, end * track.factor + sum(track.laid.values()))
            track.base, track.slope, track.since = start, (end - start) / over, now

        return [Action(time, number, name, begin), Action(time + over, number, name, Track.hold)]

    def _pulse(self, event: Event, number: int, name: str, time: float) -> list[Action]:
        def begin(track: Track, now: float) -> None:
            base = track.at(now) * track.factor
            if event.by is not None:
                track.laid[number] = self.change_by(event.by, name, base)
            else:
                assert event.to is not None
                track.laid[number] = self._value(event.to, name, f"'{name}'") - base

        return [
            Action(time, number, name, begin),
            Action(time + seconds(event.lasts), number, name, lambda track, now: _remove(track, number)),
        ]

    def _sine(self, event: Event, number: int, name: str, time: float) -> list[Action]:
        period = seconds(event.period)

        def begin(track: Track, now: float) -> None:
            assert event.by is not None
            track.sine = (self.change_by(event.by, name, track.at(now) * track.factor), period, now)

        return [Action(time, number, name, begin)]

    def _follow(self, event: Event, number: int, name: str, time: float) -> list[Action]:
        times, values = read_series(event, self._unit(name), self.model.air_pressure)
        actions = []
        for k, (instant, value) in enumerate(zip(times, values, strict=True)):
            last = k + 1 == len(times)
            slope = 0.0 if last else (values[k + 1] - value) / (times[k + 1] - instant)
            actions.append(Action(time + instant, number, name, _follower(value, slope)))
        return actions

    def _mode(self, event: Event, number: int, name: str, time: float) -> list[Action]:
        assert event.to is not None
        code = self._value(event.to, name, f"'{name}'")
        writes = self._writes(event)
        return [Action(time, number, name, lambda track, now: _set_base(track, code, now), writes)]

    def _fault(self, event: Event, number: int, name: str, time: float) -> list[Action]:
        slot = self.model.slots[name]
        size = 1.0
        if slot.kind == "fault":
            if event.size is not None:
                raise fail(f"the fault '{event.fault}' of '{event.target}' has no size", event.size.where)
        elif event.size is None:
            raise fail(
                f"the fault '{event.fault}' of '{event.target}' needs a `size:`",
                event.where,
                f"give it in {difference_of(slot.unit).text}",
            )
        else:
            size = self._si(event.size, difference_of(slot.unit), f"the size of '{event.fault}'")
        begin = Action(time, number, name, lambda track, now: _put(track, number, size), self._writes(event))
        if event.lasts is None:
            return [begin]
        end = time + seconds(event.lasts)
        return [begin, Action(end, number, name, lambda track, now: _remove(track, number))]

    def _writes(self, event: Event) -> tuple[tuple[str, float], ...]:
        found = []
        for key, given in event.sets.items():
            name = f"{event.target}.{key}"
            if (
                name not in self.model.memory
                and name not in self.model.states
                and f"{name}.left" not in self.model.memory
            ):
                known = [one.rpartition(".")[2] for one in self.model.memory if one.startswith(event.target + ".")]
                raise fail(
                    f"'{event.target}' has no stored value '{key}'", given.where, nearest(key, known, "it stores")
                )
            stored = f"{name}.left" if f"{name}.left" in self.model.memory else name
            found.append((stored, self._given(given, name)))
        return tuple(found)

    def _given(self, given: Given, name: str) -> float:
        stored = name if name in self.model.memory or name in self.model.states else f"{name}.left"
        unit = self.model.signals[name].unit if name in self.model.signals else self._unit(stored)
        return self._si(given.value, unit, f"'{name}'")


def _set_base(track: Track, value: float, now: float) -> None:
    track.base, track.slope, track.since = value, 0.0, now


def _remove(track: Track, number: int) -> None:
    track.laid.pop(number, None)


def _put(track: Track, number: int, size: float) -> None:
    track.laid[number] = size


def _follower(value: float, slope: float) -> Callable[[Track, float], None]:
    def change(track: Track, now: float) -> None:
        track.base, track.slope, track.since = value, slope, now

    return change


def seconds(time: Quantity | None) -> float:
    """A time in seconds; infinity where none is given."""
    if time is None:
        return math.inf
    return to_si(time.value, time.unit) if time.unit is not None else time.value


def lacking(event: Event, model: Model) -> str:
    """The tag of a block that an event changes or waits for and that this model does not have; '' for none."""
    wanted = [event.target if event.kind in ("mode", "fault") else event.target.rpartition(".")[0]]
    if event.when is not None:
        wanted.append(event.when.signal.rpartition(".")[0])
    tags = {name.rpartition(".")[0] for name in (*model.slots, *model.signals, *model.states, *model.memory)}
    return next((tag for tag in wanted if tag and tag not in tags), "")


def not_applicable(event: Event, model: Model) -> bool:
    """Whether a strategy lacks what the event changes or waits for."""
    return bool(lacking(event, model))

"""Where every name of a model has its place in the engine's arrays, and the lines that compute it."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from pathlib import Path

from loopsim.errors import Where
from loopsim.language.tree import Expression, Name, names_in, parts
from loopsim.model.order import Loop, Step, sorted_statements
from loopsim.model.types import Assignment, DeadTime, Latch, Model, Noise, ScanLatch, ScanTask, State
from loopsim.simulation.analysis import Analysis, Condition, Wishes
from loopsim.simulation.loops import loop_lines
from loopsim.simulation.switches import Switch
from loopsim.simulation.text import Identifiers, Writer

ARRAYS = "x, m, p, b, h, n, z"
MOTION = ("base", "slope", "from", "size", "period", "phase")


@dataclass(frozen=True, slots=True, eq=False)
class Program:
    """Generated text and the places of everything in its arrays.

    `states`, `memory`, `parameters` map names to places in x, m, p; `watched` lists what pieces show, `recorded` what
    rows show; `motion` maps a moving slot to the place of its six numbers in p (base, slope, from, size, period,
    phase); `loops` are the equations that are solved together, in the order of their numbers.
    """

    text: str
    states: dict[str, int]
    memory: dict[str, int]
    parameters: dict[str, int]
    size_of_p: int
    watched: tuple[str, ...]
    recorded: tuple[str, ...]
    scans: tuple[str, ...]
    dead_times: tuple[str, ...]
    noises: tuple[str, ...]
    switches: tuple[Switch, ...]
    conditions: tuple[Condition, ...]
    motion: dict[str, int]
    starts: tuple[float, ...]
    loops: tuple[Loop, ...]


class Bodies:
    """Writes the lines of function bodies; holds the places of all names."""

    def __init__(self, model: Model, wishes: Wishes) -> None:
        self.model, self.wishes = model, wishes
        self.analysis = Analysis(model, wishes)
        self.identifiers = Identifiers()
        self.states = {name: place for place, name in enumerate(_states_first(model))}
        self.memory = {name: place for place, name in enumerate(model.memory)}
        self.loops = [step for step in self.analysis.order if isinstance(step, Loop)]
        for loop in self.loops:
            for unknown in loop.unknowns:
                for stem in ("last of ", "now of "):
                    self.memory[stem + unknown] = len(self.memory)
        self.dead_times = list(model.dead_times)
        self.noises = list(model.noises)
        self.tables = {name: str(number) for number, name in enumerate(model.tables)}
        self.watched = self._watched_names()
        rates = self._readied({name: one.rate for name, one in model.states.items()})
        self.rates = {name: self.analysis.by_reciprocals(tree) for name, tree in rates.items()}
        self.arguments = self._readied({name: one.argument for name, one in model.dead_times.items()})
        self._place_parameters()

    # ------------------------------------------------------------ places
    def _readied(self, trees: dict[str, Expression]) -> dict[str, Expression]:
        items: dict[str, State | DeadTime] = {**self.model.states, **self.model.dead_times}
        return {name: self.analysis.readied(tree, items[name].tag, items[name].where) for name, tree in trees.items()}

    def _watched_names(self) -> dict[str, int]:
        """Places of watched signals: dead-time arguments under the dead time's name, swept volumes, judged names."""
        names = [f"into {name}" for name in self.dead_times]
        names += sorted({one.swept for one in self.model.dead_times.values() if one.swept})
        names += [name for name in self.wishes.judged if name not in names]
        return {name: place for place, name in enumerate(names)}

    def _place_parameters(self) -> None:
        """Slots, then settled values, then six numbers for each moving slot."""
        self.lags = {name: self._lag(one) for name, one in self.model.dead_times.items()}
        self.latches = {name: self._latch(one) for name, one in self.model.latches.items()}
        self.statements = {task.tag: self._statements(task) for task in self.model.scans}
        hoisted = self.analysis.hoisted
        self.writes = {one.tag: [(stored, hoisted(tree)) for stored, tree in one.writes] for one in self.model.scans}
        self.settles = [(stored, hoisted(tree)) for stored, tree in self.model.settles]
        self.flows = [hoisted(tree) for tree in self._swept_flows()]
        self.periods = {one.tag: [hoisted(tree) for tree in (one.period, one.phase)] for one in self.model.scans}
        self.every = {name: self.analysis.hoisted(one.every) for name, one in self.model.noises.items()}
        self.parameters = {name: place for place, name in enumerate(self.model.slots)}
        for name in self.analysis.settled:
            self.parameters[name] = len(self.parameters)
        self.motion = {
            name: len(self.parameters) + len(MOTION) * number for number, name in enumerate(sorted(self.wishes.moving))
        }
        self.size_of_p = len(self.parameters) + len(MOTION) * len(self.motion)
        switches = self.analysis.switches
        switches.found += [
            switches.made(one.left, one.right, 0.0, one.tag, one.where) for one in self.wishes.conditions
        ]

    def _swept_flows(self) -> list[Expression]:
        """The flows behind the swept volumes, which count only while they are above zero."""
        swept = sorted({one.swept for one in self.model.dead_times.values() if one.swept})
        return [parts(self.model.states[name].rate)[0] for name in swept]

    def _lag(self, dead_time: DeadTime) -> Expression:
        return self.analysis.readied(dead_time.lag, dead_time.tag, dead_time.where)

    def lags_may_change(self) -> bool:
        """Whether a dead time may grow in a run, so that its history must be kept whole."""
        pending = [name for one in self.model.dead_times.values() for name in names_in(one.lag)]
        while pending:
            name = pending.pop()
            if name in self.model.free or not self.analysis.is_settled(name):
                return True
            if name in self.model.assignments:
                pending += names_in(self.model.assignments[name].tree)
        return False

    def _latch(self, latch: Latch) -> tuple[Expression, Expression | None]:
        condition = self.analysis.switches.apply(latch.condition, latch.tag, latch.where)
        if latch.argument is None:
            return condition, None
        return condition, self.analysis.readied(latch.argument, latch.tag, latch.where)

    def _statements(self, task: ScanTask) -> list[Assignment | ScanLatch]:
        return [
            replace(one, tree=self.analysis.hoisted(one.tree)) if isinstance(one, Assignment) else one
            for one in sorted_statements(task)
        ]

    # ------------------------------------------------------------ reading and writing
    def read(self, name: str) -> str:
        """The text that gives a name's value; a name that only passes another on is read as that one."""
        name = self.behind(name)
        if name in self.states:
            return f"x[{self.states[name]}]"
        if name in self.memory:
            return f"m[{self.memory[name]}]"
        if name in self.parameters and name not in self.motion:
            return f"p[{self.parameters[name]}]"
        return self.identifiers.of(name)

    def behind(self, name: str) -> str:
        """The name that a chain of wires leads back to."""
        while name in self.analysis.trees and isinstance(passed := self.analysis.trees[name], Name):
            name = passed.name
        return name

    def writer(self, sticky: bool = False) -> Writer:
        """A writer for one function."""
        return Writer(self.read, self.analysis.switches.found, self.tables, sticky)

    def body(self, wanted: set[str], writer: Writer, sticky: bool = False) -> list[str]:
        """The lines that compute all steps a set of names needs."""
        steps = self.analysis.needed(wanted, sticky)
        lines = self.motion_lines()
        for step in steps:
            lines += self.step_lines(step, writer)
        return lines

    def motion_lines(self) -> list[str]:
        """The values now of the slots that events move in time."""
        return [self._motion_line(name) for name in sorted(self.motion)]

    def _motion_line(self, name: str) -> str:
        base, slope, start, size, period, phase = (f"p[{self.motion[name] + k}]" for k in range(6))
        swing = f"{size}*sine(6.283185307179586*(t - {phase})/{period})"
        return f"{self.identifiers.of(name)} = {base} + {slope}*(t - {start}) + {swing}"

    def step_lines(self, step: Step, writer: Writer) -> list[str]:
        """The lines of one step."""
        if isinstance(step, Assignment):
            if self.behind(step.name) != step.name:
                return []
            text = writer.value(self.analysis.trees[step.name])
            return [*writer.take(), f"{self.read(step.name)} = {text}  # {step.name}: {place_text(step.where)}"]
        if isinstance(step, DeadTime):
            return [*self._dead_time_lines(step, writer)]
        if isinstance(step, Noise):
            number, every = self.noises.index(step.name), writer.value(self.every[step.name])
            return [*writer.take(), f"{self.read(step.name)} = draw({number}, {every}, t, side, n, z)"]
        if isinstance(step, Latch):
            return self._latch_value(step, writer)
        return loop_lines(self, step, self.loops.index(step), writer)

    def _dead_time_lines(self, step: DeadTime, writer: Writer) -> list[str]:
        number, lag = self.dead_times.index(step.name), writer.value(self.lags[step.name])
        place = self.watched[f"into {step.name}"]
        if not step.swept:
            call = f"delayed({number}, {place}, t - {lag}, side, h, n)"
        else:
            volume = self.watched[step.swept]
            call = f"transported({number}, {place}, {volume}, x[{self.states[step.swept]}] - {lag}, side, h, n)"
        return [*writer.take(), f"{self.read(step.name)} = {call}  # {step.tag}"]

    def _latch_value(self, step: Latch, writer: Writer) -> list[str]:
        start, active = (f"m[{self.memory[slot]}]" for slot in step.slots)
        argument = self.latches[step.name][1]
        off = "0.0" if argument is None else writer.value(argument)
        on = f"t - {start}" if argument is None else start
        return [*writer.take(), f"{self.read(step.name)} = ({on} if {active} > 0.5 else {off})"]

    def function(self, head: str, lines: Iterable[str]) -> str:
        """One function of the text."""
        body = [f"    {line}" for line in lines] or ["    pass"]
        return "\n".join([f"def {head}:", *body, ""])


def _states_first(model: Model) -> list[str]:
    """States in the model's order, swept volumes last."""
    swept = {one.swept for one in model.dead_times.values() if one.swept}
    return [name for name in model.states if name not in swept] + [name for name in model.states if name in swept]


def place_text(where: Where) -> str:
    """File and line, without where on this machine the file lies."""
    return f"{'/'.join(Path(where.file).parts[-2:])}:{where.line}"

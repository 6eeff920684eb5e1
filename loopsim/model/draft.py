"""The model while it is being put together: what every step of the assembly shares."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from loopsim.errors import Problems, Where
from loopsim.language.derivative import simplify
from loopsim.language.dimensions import Dimension
from loopsim.language.evaluate import Table, evaluate
from loopsim.language.tree import Expression, names_in
from loopsim.language.units import Unit
from loopsim.model.elements import Elements
from loopsim.model.layout import Instance, Layout
from loopsim.model.scales import Scales
from loopsim.model.types import (
    Assignment,
    Bound,
    Controller,
    DeadTime,
    Implicit,
    Latch,
    Memory,
    Noise,
    ScanTask,
    Signal,
    Slot,
    State,
)
from loopsim.model.wiring import Wiring


class Absent(Exception):
    """A formula needs an optional input or parameter that the plant leaves out."""

    def __init__(self, name: str) -> None:
        super().__init__(name)
        self.name = name


@dataclass(slots=True)
class Draft:
    """Collects the items of a model; `free` names what events may change (settings, parameters, inputs).

    `absent`: names that have no value in this plant; `broken`: those among them that are a mistake already told.
    """

    layout: Layout
    elements: dict[str, Elements]
    wiring: Wiring
    choices: dict[str, dict[str, str]]
    scales: Scales
    problems: Problems
    law: bool
    free: frozenset[str]
    absent: set[str] = field(default_factory=set)
    broken: set[str] = field(default_factory=set)
    slots: dict[str, Slot] = field(default_factory=dict)
    states: dict[str, State] = field(default_factory=dict)
    memory: dict[str, Memory] = field(default_factory=dict)
    assignments: dict[str, Assignment] = field(default_factory=dict)
    implicits: dict[str, Implicit] = field(default_factory=dict)
    dead_times: dict[str, DeadTime] = field(default_factory=dict)
    noises: dict[str, Noise] = field(default_factory=dict)
    latches: dict[str, Latch] = field(default_factory=dict)
    scans: list[ScanTask] = field(default_factory=list)
    settles: list[tuple[str, Expression]] = field(default_factory=list)
    bounds: list[Bound] = field(default_factory=list)
    tables: dict[str, Table] = field(default_factory=dict)
    signals: dict[str, Signal] = field(default_factory=dict)
    in_use: dict[str, str] = field(default_factory=dict)
    controllers: list[Controller] = field(default_factory=list)
    assumed: list[str] = field(default_factory=list)
    counters: dict[str, int] = field(default_factory=dict)
    named: dict[tuple[object, ...], str] = field(default_factory=dict)
    _static: dict[str, float | None] = field(default_factory=dict)

    def static(self, tree: Expression) -> float | None:
        """The number that a tree has in every run of this plant: parameters and settings only, else None."""
        values: dict[str, float] = {}
        for name in names_in(tree):
            value = self._static_name(name)
            if value is None:
                return None
            values[name] = value
        try:
            return float(evaluate(tree, values))
        except (KeyError, TypeError):
            return None

    def _static_name(self, name: str) -> float | None:
        if name not in self._static:
            self._static[name] = None
            slot = self.slots.get(name)
            if slot is not None and slot.kind in ("parameter", "setting", "fault"):
                self._static[name] = slot.value
            elif name in self.assignments:
                self._static[name] = self.static(self.assignments[name].tree)
        return self._static[name]

    def constant(self, tree: Expression) -> bool:
        """Whether nothing in a run can change a tree: parameters only, none of them free."""
        return self.static(tree) is not None and not self._touches_free(tree)

    def _touches_free(self, tree: Expression) -> bool:
        for name in names_in(tree):
            if name in self.free:
                return True
            if name in self.assignments and self._touches_free(self.assignments[name].tree):
                return True
        return False

    def fresh(self, tag: str, stem: str) -> str:
        """A new internal name such as `TT-101.delayed#1`."""
        key = f"{tag}.{stem}"
        self.counters[key] = self.counters.get(key, 0) + 1
        return f"{key}#{self.counters[key]}"

    def assign(self, name: str, tag: str, tree: Expression, where: Where) -> None:
        """Note that `name` is always `tree`."""
        self.assignments[name] = Assignment(name, tag, simplify(tree), where)

    def remember(self, name: str, tag: str, start: Expression, where: Where, unit: Unit | None = None) -> None:
        """Note a stored value; the first note of a name stands."""
        self.memory.setdefault(name, Memory(name, tag, unit or INNER, start, where))

    def remember_start(self, name: str, start: Expression) -> None:
        """Say where a stored value starts, once its start can be told (it may name the value itself)."""
        self.memory[name] = replace(self.memory[name], start=start)

    def unit(self, flat: str, where: Where) -> Unit:
        """The unit of a name; a problem where nothing tells it."""
        unit = self.scales.of(flat)
        if unit is None:
            self.problems.add(
                f"the unit of '{flat}' cannot be told", where, "wire it to something, or give it a value with a unit"
            )
            return INNER
        return unit


INNER = Unit("SI", 1.0, 0.0, Dimension())


@dataclass(frozen=True, slots=True)
class Member:
    """One element of an instance's namespace: what it is, its entry, and the index it stands for."""

    kind: str
    element: str
    entry: object
    index: str


def namespace(instance: Instance, elements: Elements) -> dict[str, Member]:
    """All element names of an instance; single elements win over `[i]`, outputs do not hide what they show."""
    block, found = instance.block, dict[str, Member]()
    groups: list[tuple[str, tuple[object, ...]]] = [
        ("output", block.outputs),
        ("let", block.let),
        ("scan", block.scan),
        ("memory", block.memory),
        ("unknown", block.solve),
        ("state", block.states),
        ("input", block.inputs),
        ("parameter", block.parameters),
    ]
    for kind, entries in groups:
        for entry in sorted(entries, key=lambda one: not elements.generic(one.key)):  # type: ignore[attr-defined]
            key = entry.key  # type: ignore[attr-defined]
            for element in elements.of(key):
                index = element.rpartition(".")[2] if elements.generic(key) else ""
                found[element] = Member(kind, element, entry, index)
    for name, fault in block.faults.items():
        found.setdefault(name, Member("fault", name, fault, ""))
    return found

"""The model: everything flattened, named `TAG.name`, each item with the place it came from.

A tree of the model holds pure functions only. What needs the engine (dead time, noise, earlier values) has been given
a name of its own and stands in one of the lists below.
"""

from __future__ import annotations

import operator
from dataclasses import dataclass, field

from loopsim.errors import Where
from loopsim.language.evaluate import Table
from loopsim.language.tree import Expression
from loopsim.language.units import Unit

RELATIONS = {"above": operator.gt, "at_least": operator.ge, "below": operator.lt, "at_most": operator.le}
PRIME = "'"  # `TIC.output'` is the value that the execution now going on gives


@dataclass(frozen=True, slots=True)
class Slot:
    """A number that the plant gives: parameter, boundary value, unwired input, setting (as a code) or fault (0, 1).

    `bounds`: (relation, limit [SI]) that its value must keep.
    """

    name: str
    kind: str
    value: float
    unit: Unit
    where: Where
    choices: tuple[str, ...] = ()
    about: str = ""
    bounds: tuple[tuple[str, float], ...] = ()


@dataclass(frozen=True, slots=True)
class State:
    """A continuous state: start and rate [SI per s] as trees; `bounds` are watched levels (relation, tree).

    `mapped` marks a memory that is a fixed point of its scan text, in the law model only.
    """

    name: str
    tag: str
    unit: Unit
    start: Expression
    rate: Expression
    where: Where
    mapped: bool = False


@dataclass(frozen=True, slots=True)
class Memory:
    """A stored value that changes only when its block is executed (or an event writes it)."""

    name: str
    tag: str
    unit: Unit
    start: Expression
    where: Where


@dataclass(frozen=True, slots=True)
class Assignment:
    """`name` is always `tree`."""

    name: str
    tag: str
    tree: Expression
    where: Where


@dataclass(frozen=True, slots=True)
class Implicit:
    """An unknown with `residual` = 0, between `low` and `high`; `stops`: at an end where nothing solves it."""

    name: str
    tag: str
    residual: Expression
    start: Expression
    where: Where
    low: Expression | None = None
    high: Expression | None = None
    stops: bool = False


@dataclass(frozen=True, slots=True)
class DeadTime:
    """`name` is `argument` as it was `lag` [s] ago; or, with `swept`, one `lag` [m^3] of swept volume ago.

    `swept` is the name of a state that integrates the flow.
    """

    name: str
    tag: str
    argument: Expression
    lag: Expression
    where: Where
    swept: str = ""


@dataclass(frozen=True, slots=True)
class Noise:
    """`name` is a standard normal draw, new every `every` [s]; `key` seeds it."""

    name: str
    tag: str
    key: str
    every: Expression
    where: Where


@dataclass(frozen=True, slots=True)
class Latch:
    """`since` (time since condition became true) or `held` (argument as it stood then), followed continuously.

    `slots` are the memories it works with: the time or value, and whether it is active.
    """

    name: str
    tag: str
    kind: str
    condition: Expression
    argument: Expression | None
    slots: tuple[str, str]
    where: Where


@dataclass(frozen=True, slots=True)
class ScanLatch:
    """`since`/`held` inside a scan: `name` (primed) from `condition` and `argument` as they stand in the execution."""

    name: str
    kind: str
    condition: Expression
    argument: Expression | None
    slots: tuple[str, str]
    where: Where


@dataclass(frozen=True, slots=True)
class ScanTask:
    """One block's execution.

    `statements` give primed names; `writes`: (stored name, primed name or tree) at the end.
    `continuous`: a `scan: 0 s` block, executed once at the start and at every event.
    """

    tag: str
    period: Expression
    phase: Expression
    continuous: bool
    statements: tuple[Assignment | ScanLatch, ...]
    writes: tuple[tuple[str, Expression], ...]
    previous: str
    where: Where


@dataclass(frozen=True, slots=True)
class Bound:
    """A watched level: the run ends with a sentence when `signal relation limit` stops being true."""

    signal: str
    relation: str
    limit: Expression
    where: Where


@dataclass(frozen=True, slots=True)
class Signal:
    """What people can name: its unit, the block it belongs to, and the place where it is declared."""

    name: str
    tag: str
    unit: Unit
    where: Where
    about: str = ""


@dataclass(frozen=True, slots=True)
class Controller:
    """A block with `pv`, `sp` and `out`: names of its signals (flat), and of what drives `pv` and `ff`."""

    tag: str
    pv: str
    sp: str
    out: str
    ff: str
    integral: bool
    where: Where


@dataclass(frozen=True, slots=True, eq=False)
class Model:
    """A plant with its strategies, ready to be ordered, solved, linearised and run.

    `law` models have the continuous law in place of every scan and dead times passed through. `key` names what
    it was made from ('' where that is not told), so that what follows from it can be kept on disk.
    """

    name: str
    law: bool
    slots: dict[str, Slot] = field(default_factory=dict)
    states: dict[str, State] = field(default_factory=dict)
    memory: dict[str, Memory] = field(default_factory=dict)
    assignments: dict[str, Assignment] = field(default_factory=dict)
    implicits: dict[str, Implicit] = field(default_factory=dict)
    dead_times: dict[str, DeadTime] = field(default_factory=dict)
    noises: dict[str, Noise] = field(default_factory=dict)
    latches: dict[str, Latch] = field(default_factory=dict)
    scans: tuple[ScanTask, ...] = ()
    settles: tuple[tuple[str, Expression], ...] = ()
    bounds: tuple[Bound, ...] = ()
    tables: dict[str, Table] = field(default_factory=dict)
    signals: dict[str, Signal] = field(default_factory=dict)
    in_use: dict[str, str] = field(default_factory=dict)
    controllers: tuple[Controller, ...] = ()
    free: frozenset[str] = frozenset()
    air_pressure: float = 101325.0
    assumed: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    key: str = ""

"""What the four kinds of file are once they have been read: frozen, located, not yet joined to each other.

Numbers keep the unit they were written in; formulas are trees; nothing here knows of wires between blocks
beyond their text. Every item carries the place it came from.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from loopsim.documents.written import (
    ByChoice as ByChoice,
)
from loopsim.documents.written import (
    Definition as Definition,
)
from loopsim.documents.written import (
    Formula as Formula,
)
from loopsim.documents.written import (
    Given as Given,
)
from loopsim.documents.written import (
    NameList as NameList,
)
from loopsim.documents.written import (
    PairValue as PairValue,
)
from loopsim.documents.written import (
    Quantity as Quantity,
)
from loopsim.documents.written import (
    TableValue as TableValue,
)
from loopsim.documents.written import (
    UnitSpec as UnitSpec,
)
from loopsim.documents.written import (
    UnitText as UnitText,
)
from loopsim.documents.written import (
    Value as Value,
)
from loopsim.documents.written import (
    Word as Word,
)
from loopsim.errors import Where
from loopsim.language.tree import Expression, Index
from loopsim.language.units import Unit


# ---------------------------------------------------------------- entries of a block
@dataclass(frozen=True, slots=True)
class Key:
    """The name of an entry, with its index where it repeats: `T`, `T[i]`, `T[0]`, `T[n+1]`."""

    name: str
    index: Index | None = None


@dataclass(frozen=True, slots=True)
class Bounds:
    """Limits of a value, each a Quantity, a Formula, or absent."""

    above: Quantity | Formula | None = None
    at_least: Quantity | Formula | None = None
    below: Quantity | Formula | None = None
    at_most: Quantity | Formula | None = None


@dataclass(frozen=True, slots=True)
class Setting:
    """Named choices; without a default the plant must choose."""

    name: str
    choices: tuple[str, ...]
    default: Word | Formula | None
    about: str
    where: Where


@dataclass(frozen=True, slots=True)
class Parameter:
    """A number that the plant gives. `optional`: `default: none`. `table`: units of x, y. `names`: a default list."""

    key: Key
    unit: UnitSpec
    where: Where
    about: str = ""
    default: Definition | PairValue | TableValue | None = None
    optional: bool = False
    bounds: Bounds = Bounds()
    pair: bool = False
    table: tuple[Unit, Unit] | None = None
    names: tuple[str, ...] | None = None


@dataclass(frozen=True, slots=True)
class Answers:
    """What an input tells the block that drives it."""

    takes: Formula | ByChoice | None
    up: Formula | ByChoice | None
    down: Formula | ByChoice | None
    where: Where


@dataclass(frozen=True, slots=True)
class Input:
    """A port that is wired, given a value, or has a default. `optional`: `default: none`."""

    key: Key
    unit: UnitSpec
    where: Where
    about: str = ""
    default: Definition | None = None
    optional: bool = False
    percent_of: str = ""
    answers: Answers | None = None


@dataclass(frozen=True, slots=True)
class Held:
    """A state or a memory: unit, meaning, start (None: unit's zero is not assumed; a start is then needed)."""

    key: Key
    unit: UnitSpec
    where: Where
    about: str = ""
    start: Definition | None = None
    bounds: Bounds = Bounds()


@dataclass(frozen=True, slots=True)
class Balance:
    """`left = right`, derivatives on either side."""

    key: Key
    left: Expression
    right: Expression
    text: str
    where: Where


@dataclass(frozen=True, slots=True)
class Let:
    """A named quantity: an entry of `let`, `scan` or `continuous` that is a formula."""

    key: Key
    value: Definition
    where: Where


@dataclass(frozen=True, slots=True)
class Unknown:
    """An entry of `solve`: the unknown, its equation, where to start and between what to look."""

    key: Key
    unit: UnitSpec
    equation: Balance
    where: Where
    about: str = ""
    start: Definition | None = None
    between: PairValue | None = None
    stops: bool = False


@dataclass(frozen=True, slots=True)
class Fault:
    """What may go wrong; off until an event turns it on."""

    name: str
    about: str
    where: Where


@dataclass(frozen=True, slots=True)
class Output:
    """What can be wired out: the quantity of its name, or a formula of its own."""

    key: Key
    unit: UnitSpec
    where: Where
    about: str = ""
    value: Definition | None = None
    bounds: Bounds = Bounds()


@dataclass(frozen=True, slots=True)
class Stream:
    """Ports that go together in one pipe: carried name -> port, both perhaps indexed."""

    name: str
    carries: tuple[tuple[Key, Key], ...]
    where: Where


@dataclass(frozen=True, slots=True)
class Check:
    """A small case with its expected value.

    Exactly one of `at`, `gain`, `time_constant`, `after` is set:
    at: signal at rest; gain: (from, to) at rest; time_constant: (from, to); after: (time, signal), from `start`s with
    the given values.
    """

    given: dict[str, Given]
    expected: Quantity
    within: Quantity
    source: str
    where: Where
    at: str = ""
    gain: tuple[str, str] | None = None
    time_constant: tuple[str, str] | None = None
    after: tuple[Quantity, str] | None = None


@dataclass(frozen=True, slots=True)
class Repeat:
    """`repeat: {i: n}`: the index letter and the count or list of names that it runs over."""

    letter: str
    over: str
    where: Where


# ---------------------------------------------------------------- wires and uses
@dataclass(frozen=True, slots=True)
class Wire:
    """`source -> target`, each `TAG.port`, `TAG.stream`, or a bare name (boundary; a port of a block of blocks)."""

    source: str
    target: str
    where: Where


@dataclass(frozen=True, slots=True)
class Use:
    """A tagged block in a plant: the library block's name and the values given to it (keys as written, `weight.1`)."""

    tag: str
    block: str
    values: dict[str, Given]
    where: Where


# ---------------------------------------------------------------- the four kinds of file
@dataclass(frozen=True, slots=True)
class Block:
    """A physical balance or an instrument, as text. `like`/`rename` are already carried out."""

    name: str
    about: str
    where: Where
    assumes: tuple[str, ...] = ()
    sources: tuple[str, ...] = ()
    settings: dict[str, Setting] = field(default_factory=dict)
    parameters: tuple[Parameter, ...] = ()
    one_of: tuple[tuple[str, ...], ...] = ()
    repeat: Repeat | None = None
    inputs: tuple[Input, ...] = ()
    states: tuple[Held, ...] = ()
    balances: tuple[Balance, ...] = ()
    memory: tuple[Held, ...] = ()
    scan: tuple[Let, ...] = ()
    continuous: tuple[Let | Balance, ...] = ()
    let: tuple[Let, ...] = ()
    solve: tuple[Unknown, ...] = ()
    faults: dict[str, Fault] = field(default_factory=dict)
    outputs: tuple[Output, ...] = ()
    streams: dict[str, Stream] = field(default_factory=dict)
    blocks: dict[str, Use] = field(default_factory=dict)
    wires: tuple[Wire, ...] = ()
    ports: dict[str, str] = field(default_factory=dict)
    checks: tuple[Check, ...] = ()


@dataclass(frozen=True, slots=True)
class Liquid:
    """`liquid: {is: water, at: 60 degC}`."""

    name: str
    at: Quantity
    where: Where


@dataclass(frozen=True, slots=True)
class Diagram:
    """A plant, or a strategy laid over one (`kind`). `blocks` hold files found beside it: see `documents.catalogue`."""

    kind: str
    name: str
    where: Where
    about: str = ""
    liquid: Liquid | None = None
    air_pressure: Quantity | None = None
    show: dict[str, Unit] = field(default_factory=dict)
    boundary: dict[str, Given] = field(default_factory=dict)
    blocks: dict[str, Use] = field(default_factory=dict)
    wires: tuple[Wire, ...] = ()
    points: dict[str, dict[str, Given]] = field(default_factory=dict)
    cut: tuple[Wire, ...] = ()
    set: dict[str, Given] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Condition:
    """`SIGNAL below|above QUANTITY`, or `SIGNAL is WORD`; `holds` for how long before it counts; `once` only."""

    signal: str
    relation: str
    value: Quantity | Word
    holds: Quantity | None
    once: bool
    where: Where


@dataclass(frozen=True, slots=True)
class Event:
    """Something that happens at a time or on a condition.

    `kind` is step, ramp, pulse, sine, follow, mode or fault; `target` is the address behind it (for `mode` and `fault`
    the tag). Fields by kind:
    step: `to` | `by` | `times`; ramp: `to` | `by`, `over`; pulse: `by` | `to`, `lasts`; sine: `by`, `period`;
    follow: `file`, `column`, `unit`; mode: `to`; fault: `fault` (its name), `size`, `lasts`.
    `sets`: memories set at the same instant (mode and fault events).
    """

    kind: str
    target: str
    where: Where
    at: Quantity | None = None
    when: Condition | None = None
    to: Value | None = None
    by: Quantity | None = None
    times: Quantity | None = None
    over: Quantity | None = None
    lasts: Quantity | None = None
    period: Quantity | None = None
    file: str = ""
    column: str = ""
    unit: Unit | None = None
    fault: str = ""
    size: Quantity | None = None
    sets: dict[str, Given] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Rule:
    """What must hold.

    `kind` is max, min, within, overshoot, undershoot, iae, travel, deviation, reversals, rate, outside, alarms
    (of a signal) or margins (with `loop` and `margins`: name -> least or most value).
    `limit` is the number behind the kind's own key; `of` a signal or a quantity; `by`, `after`, `until` the window.
    `outside` is time outside `band` of `of`; `band` of travel and reversals is what does not count as a movement;
    `dwell` how long a signal must stay inside to count as settled.
    """

    kind: str
    where: Where
    text: str
    signal: str = ""
    limit: Quantity | None = None
    of: str | Quantity | None = None
    by: Quantity | None = None
    after: Quantity | None = None
    until: Quantity | None = None
    band: Quantity | None = None
    dwell: Quantity | None = None
    loop: str = ""
    margins: dict[str, Quantity] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Scenario:
    """What happens, and what must hold. `strategies` maps a name to strategy files, as written."""

    name: str
    where: Where
    plant: str
    strategies: dict[str, tuple[str, ...]]
    lasts: Quantity
    about: str = ""
    must_pass: tuple[str, ...] | None = None
    starts: str = "steady"
    seed: int = 0
    record_every: Quantity | None = None
    record_signals: tuple[str, ...] | None = None
    points: tuple[str, ...] = ()
    events: tuple[Event, ...] = ()
    accept: tuple[Rule, ...] = ()


Document = Block | Diagram | Scenario

"""What is judged, and what the judging gives: runs and happenings in, verdicts and comparisons out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from loopsim.errors import Where
from loopsim.language.units import ATMOSPHERE, Unit
from loopsim.results import Pieces, Status, Trends

if TYPE_CHECKING:
    import networkx as nx

PASSED, FAILED, INCONCLUSIVE = "passed", "failed", "inconclusive"
NOT_APPLICABLE, NOT_JUDGED = "not_applicable", "not_judged"


# ---------------------------------------------------------------- what is judged
@dataclass(frozen=True, slots=True)
class Happening:
    """One thing that an event did in one run; an event with `when:` has one for each time it fired.

    `reaches` holds the names of all signals that depend on the target, by the names they have in the run's pieces.
    `set_point_from` and `set_point_to` [SI] tell a step of a set point. A run that starts from given values is
    disturbed by that: it has a happening of kind `start` at its first instant, which reaches everything.
    """

    time: float
    kind: str
    target: str
    text: str
    reaches: frozenset[str]
    where: Where | None = None
    set_point_from: float | None = None
    set_point_to: float | None = None


@dataclass(frozen=True, slots=True)
class Loop:
    """A controller: its tag and the names of measured value, set point in use, output and feedforward input (or '')."""

    tag: str
    pv: str
    sp: str
    out: str
    ff: str = ""


@dataclass(frozen=True, slots=True)
class LoopMargins:
    """What the linear side computed for one loop: whether the closed loop is stable, and its margins.

    `values`: name as rules write it -> SI value (phase in rad, delay in s); infinite where nothing crosses.
    """

    stable: bool
    values: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Run:
    """One strategy's run of one scenario.

    `lasts` is when the run was to end [s]; `scheduled` the times [s] of all timed events of the scenario, those that do
    not apply here among them, so that windows are the same for every strategy. `not_applicable` holds the signals and
    loops that rules speak of and this strategy lacks; `skipped` the events that do not apply, as text.
    `spans`: signal -> width of its measuring range [SI]. `graph`: an edge from each signal to those that depend on it;
    nodes have the tag of their `block` ('' for a boundary value). `computing`: tags of blocks that only compute
    (feedforward, summing, …). `margins` is None where the linear side was not asked. `remarks` are sentences on how the
    run starts, such as a set point out of reach.
    """

    strategy: str
    trends: Trends
    lasts: float
    happenings: tuple[Happening, ...] = ()
    scheduled: tuple[float, ...] = ()
    not_applicable: frozenset[str] = frozenset()
    skipped: tuple[str, ...] = ()
    spans: Mapping[str, float | None] = field(default_factory=dict)
    loops: tuple[Loop, ...] = ()
    graph: nx.DiGraph[str] | None = None
    computing: frozenset[str] = frozenset()
    margins: Mapping[str, LoopMargins] | None = None
    air_pressure: float = ATMOSPHERE
    remarks: tuple[str, ...] = ()


def not_run(strategy: str, sentence: str, lasts: float) -> Run:
    """A strategy that could not be computed, for the reason in `sentence`; its rules stay inconclusive."""
    nothing = Pieces((), np.zeros(0), np.zeros(0), np.zeros((0, 5, 0)))
    return Run(strategy, Trends(np.zeros(0), {}, {}, nothing, Status("stopped", sentence)), lasts)


# ---------------------------------------------------------------- what the judging gives
@dataclass(frozen=True, slots=True)
class Verdict:
    """One rule for one strategy: passed, failed, inconclusive or not_applicable.

    `value` and `limit` are in SI, `unit` is how people read them; `at` is an instant [s]. `reason` is a sentence, empty
    where passed. `margin` is the share of what the rule allows that was not used: 1 where nothing moved, 0 on the
    limit, negative beyond it; None where it cannot be told.
    """

    rule: str
    kind: str
    verdict: str
    value: float | None = None
    limit: float | None = None
    unit: Unit | None = None
    at: float | None = None
    reason: str = ""
    margin: float | None = None
    where: Where | None = None


@dataclass(frozen=True, slots=True)
class Measure:
    """One figure: its name, value [SI] and unit for people, when [s]; without a value the reason why there is none."""

    name: str
    value: float | None
    unit: Unit | None = None
    at: float | None = None
    reason: str = ""


@dataclass(frozen=True, slots=True)
class EventMetrics:
    """What one controlled signal did from an event until the next one; times in s."""

    text: str
    begin: float
    end: float
    measures: tuple[Measure, ...]


@dataclass(frozen=True, slots=True)
class LoopMetrics:
    """One controlled signal against its set point: over the whole run, and after each event that reaches it."""

    tag: str
    signal: str
    measures: tuple[Measure, ...]
    events: tuple[EventMetrics, ...] = ()


@dataclass(frozen=True, slots=True)
class Judged:
    """One strategy in one scenario: its run, a verdict for each rule, the verdict on all of them, its metrics."""

    scenario: str
    run: Run
    verdict: str
    verdicts: tuple[Verdict, ...]
    metrics: tuple[LoopMetrics, ...] = ()


@dataclass(frozen=True, slots=True)
class Standing:
    """How one strategy stands over all scenarios: how many rules passed, failed and stayed open.

    `margin` is the smallest margin of all, `tightest` the rule that has it, as text, in the scenario `scenario`;
    `lacking` counts the rules that speak of what the strategy does not have.
    """

    strategy: str
    passed: int
    failed: int
    inconclusive: int
    margin: float | None
    tightest: str = ""
    scenario: str = ""
    lacking: int = 0

    @property
    def passes(self) -> bool:
        """Every rule that applies passed, and there was one."""
        return self.passed > 0 and not self.failed and not self.inconclusive


@dataclass(frozen=True, slots=True)
class Comparison:
    """Which strategy is best: `winner` is None where none passes or some are equal (`tied`).

    `nearest` is set where none passes. `reasons` are sentences; `standings` has an entry for each strategy, in order.
    """

    winner: str | None
    tied: tuple[str, ...]
    nearest: str | None
    reasons: tuple[str, ...]
    standings: tuple[Standing, ...]

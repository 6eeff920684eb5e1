"""What is judged, and what the judging says."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from loopsim.documents.types import Rule, Scenario
from loopsim.errors import Where
from loopsim.language.units import Unit
from loopsim.results import Trends


@dataclass(frozen=True, slots=True)
class Happening:
    """Something that an event did in one run: when [s], to what (values before and after, SI), what depends on it."""

    time: float
    kind: str
    target: str
    text: str
    before: float
    after: float
    reaches: frozenset[str]
    where: Where


@dataclass(frozen=True, slots=True)
class Loop:
    """A controller's signals as people name them; `band` [SI] is what its metrics count as settled."""

    tag: str
    pv: str
    sp: str
    out: str
    span: float
    unit: Unit


@dataclass(frozen=True, slots=True)
class Run:
    """One strategy's run, ready to be judged.

    `lacking`: names of tags that this strategy does not have. `failure` is set when there is no run to judge.
    """

    strategy: str
    scenario: Scenario
    trends: Trends | None
    happenings: tuple[Happening, ...] = ()
    loops: tuple[Loop, ...] = ()
    lacking: frozenset[str] = frozenset()
    failure: str = ""
    air_pressure: float = 101325.0


@dataclass(frozen=True, slots=True)
class Finding:
    """What measuring a rule gave: the value and limit [SI, or plain], in which unit, when, and whether it passed.

    `passed` None: it could not be judged, for the `reason`.
    """

    passed: bool | None
    value: float | None = None
    limit: float | None = None
    unit: Unit | None = None
    at: float | None = None
    reason: str = ""


@dataclass(frozen=True, slots=True)
class RuleVerdict:
    """One rule for one strategy: `verdict` is passed, failed, inconclusive or not_applicable."""

    rule: Rule
    verdict: str
    finding: Finding

    @property
    def headroom(self) -> float | None:
        """The share of the limit that is left (negative: exceeded); None where no number tells it."""
        value, limit = self.finding.value, self.finding.limit
        if value is None or limit is None or self.rule.kind in ("min", "max") or limit == 0:
            return None
        return 1.0 - abs(value) / abs(limit)


@dataclass(frozen=True, slots=True)
class StrategyVerdict:
    """All rules of one strategy, and its metrics: loop tag -> name -> value (None where it has no meaning)."""

    run: Run
    verdict: str
    rules: tuple[RuleVerdict, ...]
    metrics: Mapping[str, Mapping[str, float | None]] = field(default_factory=dict)

"""Which strategy is best, and why.

The measure: a strategy must pass every rule that applies to it, in every scenario. Among those that do, the one is
best whose smallest margin is largest, a margin being the share of what a rule allows that was not used
(`Verdict.margin`). Margins nearer than 0.01 are equal, and the strategies tied. Where none passes, the one comes
nearest that leaves the fewest rules failed or open; among equals the one with the largest smallest margin.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from loopsim.study.structure import Sight, sights, structure_of
from loopsim.study.types import FAILED, INCONCLUSIVE, NOT_APPLICABLE, PASSED, Comparison, Judged, Standing, Verdict
from loopsim.study.words import listed, rounded

TIE = 0.01
ALIKE = 0.05  # relative: peak sensitivities nearer than this are one robustness
NO_DISTURBANCES = frozenset({"start", "mode"})


def compare(judged: Sequence[Judged]) -> Comparison:
    """All strategies over all scenarios; those that are not in every scenario are left out, and named."""
    scenarios = list(dict.fromkeys(one.scenario for one in judged))
    by_strategy: dict[str, list[Judged]] = {}
    for one in judged:
        by_strategy.setdefault(one.run.strategy, []).append(one)
    partial = [name for name, ones in by_strategy.items() if {one.scenario for one in ones} != set(scenarios)]
    everywhere = {name: ones for name, ones in by_strategy.items() if name not in partial}
    standings = tuple(_standing(name, ones) for name, ones in everywhere.items())
    winner, tied, nearest = _ranked(standings)
    reasons = [f"{_names(partial)}: not in every scenario, and left out of the comparison."] if partial else []
    reasons += _results(standings, everywhere, winner, tied, nearest, len(scenarios))
    best = winner or nearest or (tied[0] if tied else None)
    if best is not None and len(everywhere) > 1:
        reasons += _structural(best, everywhere, scenarios)
    reasons += _robustness(everywhere)
    return Comparison(winner, tied, nearest, tuple(reasons), standings)


# ---------------------------------------------------------------- standings
def _standing(name: str, ones: Sequence[Judged]) -> Standing:
    verdicts = [(verdict, one.scenario) for one in ones for verdict in one.verdicts]
    passed, failed, left = (sum(one.verdict == kind for one, _ in verdicts) for kind in (PASSED, FAILED, INCONCLUSIVE))
    lacking = sum(one.verdict == NOT_APPLICABLE for one, _ in verdicts)
    settled = [(verdict, where) for verdict, where in verdicts if verdict.verdict in (PASSED, FAILED)]
    rated = [(verdict.margin, verdict.rule, where) for verdict, where in settled if verdict.margin is not None]
    if not rated:
        return Standing(name, passed, failed, left, None, lacking=lacking)
    margin, rule, scenario = min(rated, key=lambda one: one[0])
    return Standing(name, passed, failed, left, margin, rule, scenario, lacking)


def _ranked(standings: Sequence[Standing]) -> tuple[str | None, tuple[str, ...], str | None]:
    """The winner, or those that are tied, or the one that comes nearest."""
    fewest = min((one.lacking for one in standings if one.passes), default=0)
    passing = [one for one in standings if one.passes and one.lacking == fewest]
    if passing:
        top = max(_margin(one) for one in passing)
        best = tuple(one.strategy for one in passing if _margin(one) >= top - TIE)
        return (best[0], (), None) if len(best) == 1 else (None, best, None)
    ranked = [one for one in standings if one.passed + one.failed + one.inconclusive]
    if not ranked:
        return None, (), None
    return None, (), min(ranked, key=lambda one: (one.failed + one.inconclusive, -_margin(one))).strategy


def _names(strategies: Iterable[str]) -> str:
    return listed([f"'{one}'" for one in strategies])


def _margin(standing: Standing) -> float:
    return standing.margin if standing.margin is not None else float("-inf")


# ---------------------------------------------------------------- sentences on the results
def _results(
    standings: Sequence[Standing],
    judged: dict[str, list[Judged]],
    winner: str | None,
    tied: tuple[str, ...],
    nearest: str | None,
    scenarios: int,
) -> list[str]:
    many = scenarios > 1
    first = {one.strategy: one for one in standings}
    if nearest is None and winner is None and not tied:
        return ["No rule was judged, so no strategy is better than another."]
    sentences = []
    if tied:
        spare = _spare(first[tied[0]], many)
        sentences.append(f"{_names(tied)} pass every rule and are tied: each has the same to spare ({spare}).")
    if winner is not None:
        sentences.append(f"'{winner}' passes {_every(first[winner])}; {_spare(first[winner], many)}.")
    if nearest is not None:
        sentences.append(
            f"No strategy passes every rule; {_shortfall(first[nearest], judged[nearest], many, 'comes nearest')}."
        )
    for one in standings:
        if one.strategy in (winner, nearest, *tied):
            continue
        if one.passes:
            sentences.append(f"'{one.strategy}' passes {_every(one)} too; {_spare(one, many)}.")
        elif one.passed + one.failed + one.inconclusive:
            sentences.append(f"{_shortfall(one, judged[one.strategy], many)}.")
    return sentences


def _every(standing: Standing) -> str:
    """`every rule`, or those that a strategy can be held to: one that lacks a signal is judged by fewer."""
    if not standing.lacking:
        return "every rule"
    does = "1 rule speaks" if standing.lacking == 1 else f"{standing.lacking} rules speak"
    return f"every rule that applies to it ({does} of what it does not have, so it was judged by fewer)"


def _spare(standing: Standing, many: bool) -> str:
    if standing.margin is None:
        return "no rule tells how much it has to spare"
    where = f" in {standing.scenario}" if many else ""
    return f"the tightest is '{standing.tightest}'{where}, with {rounded(100 * standing.margin, 3)} % of it to spare"


def _shortfall(standing: Standing, judged: Sequence[Judged], many: bool, first: str = "") -> str:
    """`feedback fails 2 of 6 rules: …` with the worst failure, or what is open."""
    total = standing.passed + standing.failed + standing.inconclusive
    wanted = FAILED if standing.failed else INCONCLUSIVE
    found = [(one, each.scenario) for each in judged for one in each.verdicts if one.verdict == wanted]
    worst, scenario = min(found, key=lambda one: _verdict_margin(one[0]))
    count = standing.failed or standing.inconclusive
    verb = "fails" if standing.failed else "leaves open"
    where = f" in {scenario}" if many else ""
    lead = f"'{standing.strategy}' {first}: it {verb}" if first else f"'{standing.strategy}' {verb}"
    return f"{lead} {count} of {total} rules, '{worst.rule}'{where} among them: {worst.reason}"


def _verdict_margin(verdict: Verdict) -> float:
    return verdict.margin if verdict.margin is not None else 0.0


# ---------------------------------------------------------------- sentences on the structure
def _structural(best: str, judged: dict[str, list[Judged]], scenarios: Sequence[str]) -> list[str]:
    """Where each disturbance enters in the best strategy, and where others that did worse see it later or sooner."""
    sentences: list[str] = []
    alike: list[bool] = []
    for scenario in scenarios:
        ones = {name: next(one for one in all_ if one.scenario == scenario) for name, all_ in judged.items()}
        structures = {name: found for name, one in ones.items() if (found := structure_of(one.run)) is not None}
        if best not in structures:
            continue
        lead = f"In {scenario}, " if len(scenarios) > 1 else ""
        worse = {name for name in structures if name != best and _worse(ones[name], ones[best])}
        for target in _disturbances(ones.values()):
            views = {name: sights(structure, target) for name, structure in structures.items()}
            alike += [_alike(views[best], other) for name, other in views.items() if name != best]
            sentences += _for_disturbance(
                best, {name: views[name] for name in structures if name in worse or name == best}, lead
            )
    if alike and all(alike):
        return ["The strategies see every disturbance at the same place; what differs between them is their settings."]
    return list(dict.fromkeys(sentences))


def _worse(one: Judged, best: Judged) -> bool:
    """Whether a strategy did worse in a scenario than the best one of all."""
    mine, other = _standing("", [one]), _standing("", [best])
    if mine.passes != other.passes:
        return other.passes
    return _margin(mine) < _margin(other) - TIE


def _alike(own: Sequence[Sight], others: Sequence[Sight]) -> bool:
    pairs = [(sight, _same_aim(sight, others)) for sight in own]
    return len(own) == len(others) and all(other is not None and other.rank == one.rank for one, other in pairs)


def _disturbances(ones: Iterable[Judged]) -> list[str]:
    """The targets of what happened in a scenario, each once, in order of time."""
    happenings = [one for each in ones for one in each.run.happenings if one.kind not in NO_DISTURBANCES]
    return list(dict.fromkeys(one.target for one in sorted(happenings, key=lambda one: one.time)))


def _for_disturbance(best: str, views: dict[str, tuple[Sight, ...]], lead: str) -> list[str]:
    """Why those that did worse did so; or that by their structure they should not have."""
    sentences = []
    for own in views[best]:
        later: dict[str, list[str]] = {}
        sooner: dict[str, list[str]] = {}
        for name, others in views.items():
            other = None if name == best else _same_aim(own, others)
            if other is not None and other.rank != own.rank:
                (later if other.rank < own.rank else sooner).setdefault(other.sentence, []).append(name)
        if later:
            told = "; ".join(f"with {_names(names)}, {sentence}" for sentence, names in later.items())
            sentences.append(f"{lead}{'with' if lead else 'With'} '{best}', {own.sentence}; {told}.")
        for sentence, names in sooner.items():
            sentences.append(f"{lead}{_names(names)} should do better, since {sentence}; look at the settings there.")
    return sentences


def _same_aim(own: Sight, others: Sequence[Sight]) -> Sight | None:
    """The other strategy's sight for the same controlled signal; it may have no such loop, or not see it at all."""
    for other in others:
        if other.measured == own.measured or not other.measured:
            return other
    return None


# ---------------------------------------------------------------- robustness
def _robustness(judged: dict[str, list[Judged]]) -> list[str]:
    """A comparison of strategies that are not tuned to one robustness says so."""
    peaks: dict[str, dict[str, float]] = {}
    for name, ones in judged.items():
        for tag, margins in (ones[0].run.margins or {}).items():
            if "max_sensitivity" in margins.values:
                peaks.setdefault(tag, {})[name] = margins.values["max_sensitivity"]
    sentences = []
    for tag, by_strategy in peaks.items():
        if max(by_strategy.values()) > (1 + ALIKE) * min(by_strategy.values()):
            each = listed([f"{rounded(peak, 3)} with '{name}'" for name, peak in by_strategy.items()])
            sentences.append(f"Not tuned to the same robustness: the peak sensitivity of {tag} is {each}.")
    return sentences

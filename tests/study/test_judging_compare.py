"""Who wins: passes first, then the smallest margin; ties, nobody, several scenarios; reasons from the structure."""

from __future__ import annotations

from dataclasses import replace

import pytest
from judging_builders import happened, held, run
from test_judging_structure import ALONE, BOTH, CASCADED, FORWARDED

from loopsim.study.compare import compare
from loopsim.study.types import Comparison, Judged, LoopMargins, Run, Verdict


def verdict(outcome: str, margin: float | None = None, rule: str = "tank.T max 62 degC", reason: str = "") -> Verdict:
    return Verdict(rule, "max", outcome, margin=margin, reason=reason)


def judged(strategy: str, *verdicts: Verdict, scenario: str = "draw", of: Run | None = None) -> Judged:
    made = replace(of if of is not None else run(held("x", [0.0])), strategy=strategy)
    kinds = [one.verdict for one in verdicts]
    overall = next((one for one in ("failed", "inconclusive", "passed") if one in kinds), "not_judged")
    return Judged(scenario, made, overall, verdicts)


def test_passing_every_rule_comes_before_any_margin() -> None:
    found = compare(
        [
            judged("bold", verdict("passed", 0.9), verdict("failed", -0.01, "rule b", "x comes to 63; 62 is allowed")),
            judged("calm", verdict("passed", 0.02), verdict("passed", 0.03)),
        ]
    )
    assert (found.winner, found.tied, found.nearest) == ("calm", (), None)
    assert found.reasons[0] == (
        "'calm' passes every rule; the tightest is 'tank.T max 62 degC', with 2 % of it to spare."
    )
    assert found.reasons[1] == "'bold' fails 1 of 2 rules, 'rule b' among them: x comes to 63; 62 is allowed."


def test_among_those_that_pass_the_smallest_margin_decides() -> None:
    found = compare(
        [
            judged("one", verdict("passed", 0.9), verdict("passed", 0.1)),
            judged("two", verdict("passed", 0.3), verdict("passed", 0.2)),
        ]
    )
    assert found.winner == "two" and [one.margin for one in found.standings] == [0.1, 0.2]
    assert found.reasons[1].startswith("'one' passes every rule too; the tightest")


@pytest.mark.parametrize(("second", "winner", "tied"), [(0.209, None, ("one", "two")), (0.211, "two", ())])
def test_ties_are_told_as_ties(second: float, winner: str | None, tied: tuple[str, ...]) -> None:
    found = compare([judged("one", verdict("passed", 0.2)), judged("two", verdict("passed", second))])
    assert (found.winner, found.tied) == (winner, tied)
    if tied:
        assert found.reasons[0].startswith("'one' and 'two' pass every rule and are tied")


def test_nobody_passes_and_who_comes_nearest() -> None:
    broken, small = verdict("failed", -2.0, reason="far off"), verdict("failed", -0.1, reason="a little off")
    found = compare(
        [
            judged("two_far", broken, broken),
            judged("one_far", verdict("passed", 0.5), broken),
            judged("one_near", verdict("passed", 0.5), small),
            judged("one_open", verdict("passed", 0.5), verdict("inconclusive", reason="the run ends at 5 min")),
        ]
    )
    assert (found.winner, found.nearest) == (None, "one_open")
    assert found.reasons[0] == (
        "No strategy passes every rule; 'one_open' comes nearest: it leaves open 1 of 2 rules, "
        "'tank.T max 62 degC' among them: the run ends at 5 min."
    )
    without = compare(
        [judged("one_far", verdict("passed", 0.5), broken), judged("one_near", verdict("passed", 0.5), small)]
    )
    assert without.nearest == "one_near"


def test_an_open_rule_is_no_pass() -> None:
    found = compare([judged("a", verdict("passed", 0.1)), judged("b", verdict("passed", 0.9), verdict("inconclusive"))])
    assert found.winner == "a"


def test_rules_that_do_not_apply_neither_help_nor_hurt() -> None:
    found = compare(
        [judged("a", verdict("not_applicable"), verdict("passed", 0.5)), judged("b", verdict("not_applicable"))]
    )
    assert found.winner == "a"
    nothing = compare([judged("a"), judged("b", verdict("not_applicable"))])
    assert (nothing.winner, nothing.tied, nothing.nearest) == (None, (), None)
    assert nothing.reasons == ("No rule was judged, so no strategy is better than another.",)


def test_several_scenarios_count_together() -> None:
    found = compare(
        [
            judged("feedback", verdict("passed", 0.9), scenario="draw"),
            judged("both", verdict("passed", 0.3), scenario="draw"),
            judged("feedback", verdict("failed", -0.7, reason="too cold"), scenario="header"),
            judged("both", verdict("passed", 0.2), scenario="header"),
            judged("late", verdict("passed", 0.99), scenario="header"),
        ]
    )
    assert found.winner == "both" and [one.strategy for one in found.standings] == ["feedback", "both"]
    assert found.standings[1].scenario == "header"
    assert found.reasons[0] == "'late': not in every scenario, and left out of the comparison."
    assert "in header, with 20 % of it to spare" in found.reasons[1]
    assert found.reasons[2] == "'feedback' fails 1 of 2 rules, 'tank.T max 62 degC' in header among them: too cold."


# ---------------------------------------------------------------- reasons
CASES = {"feedback": ALONE, "forward": FORWARDED, "cascade": CASCADED, "both": BOTH}


def compared(disturbance: str, names: dict[str, str], best: str = "both", backwards: bool = False) -> Comparison:
    """Four strategies under one disturbance; `names`: as they are called; the best alone passes."""
    ones = []
    for key, name in names.items():
        made = replace(CASES[key], happenings=(happened(60.0, target=disturbance),))
        outcome = verdict("passed", 0.4) if key == best else verdict("failed", -0.4, reason="too cold")
        ones.append(judged(name, outcome, of=made))
    return compare(ones[::-1] if backwards else ones)


SAME = {name: name for name in CASES}
HEADER = (
    "With 'both', header enters upstream of FT-210 inside the inner loop of FIC-210, which sees it before tank does; "
)


def test_the_reason_for_a_header_upset_is_the_inner_loop() -> None:
    found = compared("header", SAME)
    assert found.winner == "both"
    assert found.reasons[-1] == (
        HEADER
        + "with 'feedback', header is seen by TIC-101 alone, once it shows at TT-101; with 'forward', header enters "
        "downstream of everything measured but TT-101: only the loop of TIC-101 sees it."
    )


def test_the_reason_for_a_draw_is_the_feedforward() -> None:
    sentence = compared("feed_q", SAME).reasons[-1]
    assert sentence.startswith(
        "With 'both', feed_q is measured by FT-101 and fed forward to TIC-101; with 'feedback', "
    )
    assert "with 'cascade', feed_q enters downstream of everything measured but TT-101" in sentence


def test_reasons_follow_new_names_and_another_order() -> None:
    called = {"feedback": "d", "forward": "c", "cascade": "b", "both": "a"}
    found = compared("header", called, backwards=True)
    assert found.winner == "a"
    assert found.reasons[-1].startswith("With 'a', header enters upstream of FT-210 inside the inner loop of FIC-210")
    assert "with 'c', header enters downstream" in found.reasons[-1] and "with 'd', header is seen" in found.reasons[-1]


def test_only_what_did_worse_is_explained() -> None:
    margins = {"draw": {"cascade": 0.9, "both": 0.6}, "header": {"cascade": -0.5, "both": 0.6}}
    ones = []
    for scenario, by_strategy in margins.items():
        for key, margin in by_strategy.items():
            made = replace(CASES[key], happenings=(happened(60.0, target="feed_q"),))
            outcome = verdict("passed" if margin > 0 else "failed", margin, reason="too cold")
            ones.append(judged(key, outcome, scenario=scenario, of=made))
    found = compare(ones)
    assert found.winner == "both"
    told = [one for one in found.reasons if "fed forward" in one]
    assert len(told) == 1 and told[0].startswith("In header, with 'both', feed_q is measured by FT-101")


def test_where_all_see_it_alike_the_settings_are_what_differs() -> None:
    found = compared("feed_T", SAME)
    assert found.reasons[-1] == (
        "The strategies see every disturbance at the same place; what differs between them is their settings."
    )


def test_a_winner_that_sees_it_later_is_a_matter_of_settings() -> None:
    found = compared("header", {"feedback": "feedback", "cascade": "cascade"}, best="feedback")
    assert found.winner == "feedback"
    assert found.reasons[-1].startswith("'cascade' should do better, since header enters upstream of FT-210")


def test_unequal_robustness_is_told() -> None:
    peaks = {"soft": 1.6, "hard": 2.1}
    ones = [
        judged(
            name,
            verdict("passed", peak),
            of=replace(ALONE, margins={"TIC-101": LoopMargins(True, {"max_sensitivity": peak})}),
        )
        for name, peak in peaks.items()
    ]
    assert compare(ones).reasons[-1] == (
        "Not tuned to the same robustness: the peak sensitivity of TIC-101 is 1.6 with 'soft' and 2.1 with 'hard'."
    )
    assert not any(
        "robustness" in one
        for one in compare([ones[0], replace(ones[0], run=replace(ones[0].run, strategy="x"))]).reasons
    )

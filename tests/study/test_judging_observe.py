"""From files to a comparison: the heater's header upset, judged on real runs."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import pytest

from loopsim.model.choice import scenario_sources
from loopsim.simulation.case import case_of, run_case
from loopsim.study.compare import compare
from loopsim.study.judge import judge
from loopsim.study.observe import names_to_judge, run_of
from loopsim.study.types import Judged

SCENARIOS = (
    next(one for one in Path(__file__).parents if (one / "scenarios").is_dir()) / "scenarios" / "wash_water_heater"
)


@cache
def judged(scenario: str) -> tuple[Judged, ...]:
    found, sources = scenario_sources(SCENARIOS / f"{scenario}.yaml", "")
    ones = []
    for name in ("feedback", "both"):
        case = case_of(name, found, sources[name], "")
        ones.append(judge(found.name, run_of(case, run_case(case, names_to_judge(case))), found.accept))
    return tuple(ones)


def test_what_happened_and_what_it_reaches() -> None:
    feedback, both = (one.run for one in judged("header_sag"))
    (event,) = feedback.happenings
    assert (event.time, event.kind, event.target) == (600.0, "step", "header_p")
    assert event.text == "step header_p to 2.9 bar(g)"
    assert {"tank.T", "TIC-101.pv", "TV-101.position"} <= event.reaches and "TIC-101.sp" not in event.reaches
    assert feedback.spans == {"TIC-101.pv": pytest.approx(100.0)} and feedback.lasts == 3000.0
    assert {one.tag for one in both.loops} == {"TIC-101", "FIC-201"}
    (step,) = judged("setpoint")[0].run.happenings
    assert step.set_point_from == pytest.approx(328.15) and step.set_point_to == pytest.approx(331.15)


def test_the_inner_loop_wins_the_header_upset_and_the_reason_says_so() -> None:
    found = compare(judged("header_sag"))
    assert [one.verdict for one in judged("header_sag")] == ["failed", "passed"]
    assert found.winner == "both"
    assert found.reasons[-1] == (
        "With 'both', header_p enters upstream of FT-201 inside the inner loop of FIC-201, "
        "which sees it before tank does; "
        "with 'feedback', header_p is seen by TIC-101 alone, once it shows at TT-101."
    )

"""Reasons follow the structure: they change when a disturbance moves, and not when things are renamed or reordered."""

from __future__ import annotations

import networkx as nx
import pytest
from judging_builders import held, run

from loopsim.study.structure import Sight, sights, structure_of
from loopsim.study.types import Loop, Run

# The heater: header -> coil.steam -> coil.Q -> tank.T -> line.T -> TT-101, valve in the coil, flow meter on the steam.
PLANT = """
feed_q tank.T
feed_T tank.T
header coil.steam
TV-1.signal TV-1.position
TV-1.position coil.steam
coil.steam coil.Q
coil.Q tank.T
tank.T tank.T
tank.T coil.Q
tank.UA tank.T
tank.T line.T
line.T TT-101.T
TT-101.T TT-101.pv
TT-101.lag TT-101.pv
room hall.T
"""
FEEDBACK = """
TT-101.pv TIC-101.pv
TIC-101.sp TIC-101.setpoint
TIC-101.setpoint TIC-101.out
TIC-101.pv TIC-101.out
TIC-101.gain TIC-101.out
"""
TO_VALVE = "TIC-101.out TV-1.signal"
FORWARD = """
feed_q FT-101.q
FT-101.q FT-101.pv
FT-101.pv QY-101.u
QY-101.u QY-101.out
QY-101.out TIC-101.ff
TIC-101.ff TIC-101.out
"""
CASCADE = """
coil.steam FT-210.w
FT-210.w FT-210.pv
FT-210.pv FIC-210.pv
FIC-210.pv FIC-210.out
TIC-101.out FIC-210.sp
FIC-210.sp FIC-210.out
FIC-210.out TV-1.signal
"""
OUTER = Loop("TIC-101", "TIC-101.pv", "TIC-101.sp", "TIC-101.out")
FED = Loop("TIC-101", "TIC-101.pv", "TIC-101.sp", "TIC-101.out", "TIC-101.ff")
INNER = Loop("FIC-210", "FIC-210.pv", "FIC-210.sp", "FIC-210.out")


def graph(text: str, backwards: bool = False) -> nx.DiGraph[str]:
    """A graph from lines `source target`; a signal's block is what stands before the point."""
    edges = [tuple(line.split()) for line in text.split("\n") if line.strip()]
    made: nx.DiGraph[str] = nx.DiGraph()
    made.add_edges_from(reversed(edges) if backwards else edges)
    for name in made:
        made.nodes[name]["block"] = name.rpartition(".")[0]
    return made


def strategy(text: str, *loops: Loop, computing: tuple[str, ...] = ("QY-101",), backwards: bool = False) -> Run:
    return run(held("x", [0.0]), graph=graph(text, backwards), loops=loops, computing=frozenset(computing))


def seen(made: Run, disturbance: str) -> Sight:
    structure = structure_of(made)
    assert structure is not None
    (found,) = sights(structure, disturbance)
    return found


ALONE = strategy(PLANT + FEEDBACK + TO_VALVE, OUTER)
FORWARDED = strategy(PLANT + FEEDBACK + FORWARD + TO_VALVE, FED)
CASCADED = strategy(PLANT + FEEDBACK + CASCADE, OUTER, INNER)
BOTH = strategy(PLANT + FEEDBACK + FORWARD + CASCADE, FED, INNER)


def test_feedback_alone_sees_everything_at_its_own_measurement() -> None:
    for disturbance in ("feed_q", "feed_T", "header", "tank.UA"):
        found = seen(ALONE, disturbance)
        assert found.kind == "outer"
        assert found.sentence == f"{disturbance} is seen by TIC-101 alone, once it shows at TT-101"


def test_what_is_measured_is_fed_forward_and_nothing_else() -> None:
    assert seen(FORWARDED, "feed_q").sentence == "feed_q is measured by FT-101 and fed forward to TIC-101"
    assert seen(FORWARDED, "feed_T").kind == "outer"
    assert seen(FORWARDED, "header").sentence == (
        "header enters downstream of everything measured but TT-101: only the loop of TIC-101 sees it"
    )


def test_the_inner_loop_sees_what_enters_before_its_meter() -> None:
    assert seen(CASCADED, "header").sentence == (
        "header enters upstream of FT-210 inside the inner loop of FIC-210, which sees it before tank does"
    )
    assert seen(CASCADED, "feed_q").sentence == (
        "feed_q enters downstream of everything measured but TT-101: only the outer loop of TIC-101 sees it"
    )


def test_both_cover_both() -> None:
    assert "fed forward to TIC-101" in seen(BOTH, "feed_q").sentence
    assert "inside the inner loop of FIC-210" in seen(BOTH, "header").sentence
    assert seen(BOTH, "feed_T").kind == seen(BOTH, "tank.UA").kind == "outer"


def test_a_disturbance_moved_past_the_flow_meter_is_seen_by_the_outer_loop_only() -> None:
    moved = PLANT.replace("header coil.steam", "header coil.Q")
    assert seen(strategy(moved + FEEDBACK + CASCADE, OUTER, INNER), "header").kind == "outer"
    assert seen(strategy(PLANT + FEEDBACK + CASCADE, OUTER, INNER), "header").kind == "ahead"


def test_a_meter_that_the_tank_acts_on_is_not_ahead_of_the_tank() -> None:
    # the steam flow falls as the tank gets warm: every disturbance gets to the flow meter, by way of the tank
    coupled = PLANT + "tank.T coil.steam\n"
    made = strategy(coupled + FEEDBACK + CASCADE, OUTER, INNER)
    assert seen(made, "feed_T").kind == "outer" and seen(made, "header").kind == "ahead"


def test_a_tap_that_the_loop_itself_moves_is_no_feedforward() -> None:
    # a flow meter on a return line that carries the tank's own temperature
    looped = FORWARD.replace("feed_q FT-101.q", "tank.T FT-101.q")
    assert seen(strategy(PLANT + FEEDBACK + looped + TO_VALVE, FED), "feed_T").kind == "outer"


def test_a_pump_between_is_no_instrument() -> None:
    pumped = PLANT.replace("feed_q tank.T", "feed_q P-1.q\nP-1.q tank.T")
    measured = FORWARD.replace("feed_q FT-101.q", "P-1.q FT-101.q")
    found = seen(strategy(pumped + FEEDBACK + measured + TO_VALVE, FED), "feed_q")
    assert found.sentence == "feed_q is measured by FT-101 and fed forward to TIC-101"


def test_computing_blocks_need_not_be_known_where_they_end_in_a_controller() -> None:
    made = strategy(PLANT + FEEDBACK + FORWARD + TO_VALVE, FED, computing=())
    assert seen(made, "feed_q").sentence == "feed_q is measured by FT-101 and fed forward to TIC-101"


MULTIPLIED = """
feed_q FT-101.q
FT-101.q FT-101.pv
TIC-101.out QY-101.u
FT-101.pv QY-101.v
QY-101.u QY-101.out
QY-101.v QY-101.out
"""


def test_what_is_multiplied_into_the_way_to_the_valve_is_fed_forward() -> None:
    straight = strategy(PLANT + FEEDBACK + MULTIPLIED + "QY-101.out TV-1.signal", OUTER)
    assert seen(straight, "feed_q").sentence == "feed_q is measured by FT-101 and fed forward to TIC-101"
    assert seen(straight, "header").kind == seen(straight, "feed_T").kind == "outer"


def test_what_is_multiplied_into_a_set_point_is_fed_forward() -> None:
    inner = CASCADE.replace("TIC-101.out FIC-210.sp", "QY-101.out FIC-210.sp")
    made = strategy(PLANT + FEEDBACK + MULTIPLIED + inner, OUTER, INNER)
    assert "feed_q is measured by FT-101 and fed forward to TIC-101" in seen(made, "feed_q").sentence
    assert "inside the inner loop of FIC-210" in seen(made, "header").sentence
    assert seen(made, "feed_T").kind == "outer"


def test_a_measurement_through_a_selector() -> None:
    chosen = FEEDBACK.replace(
        "TT-101.pv TIC-101.pv", "TT-101.pv TY-1.u\nTT-102.pv TY-1.u\nTY-1.u TY-1.out\nTY-1.out TIC-101.pv"
    )
    made = strategy(PLANT + chosen + TO_VALVE + "\ntank.T TT-102.pv", OUTER, computing=("TY-1",))
    assert seen(made, "feed_q").sentence == "feed_q is seen by TIC-101 alone, once it shows at TT-101 and TT-102"


def test_a_set_point_is_its_own_loops_unless_it_is_fed_forward() -> None:
    assert seen(BOTH, "TIC-101.sp").kind == "outer"
    fed = FORWARD + "TIC-101.sp QY-101.u\n"
    found = seen(strategy(PLANT + FEEDBACK + fed + TO_VALVE, FED), "TIC-101.sp")
    assert found.sentence == "TIC-101.sp is the set point of TIC-101, and is fed forward to it"


def test_what_no_controller_sees() -> None:
    assert seen(ALONE, "room").sentence == "room reaches nothing that a controller measures"
    structure = structure_of(ALONE)
    assert structure is not None
    assert sights(structure, "TIC-101.gain") == sights(structure, "nowhere") == ()
    assert seen(strategy(PLANT, computing=()), "header").kind == "unseen"
    assert structure_of(run(held("x", [0.0]))) is None


@pytest.mark.parametrize("disturbance", ["feed_q", "feed_T", "header", "tank.UA"])
def test_names_and_order_do_not_matter(disturbance: str) -> None:
    text = PLANT + FEEDBACK + FORWARD + CASCADE
    names = {"TIC-101": "A", "FIC-210": "Z", "TT-101": "m", "FT-210": "a", "FT-101": "zz", "QY-101": "b", "tank": "k"}
    renamed = text
    for old, new in names.items():
        renamed = renamed.replace(f"{old}.", f"{new}.")
    loops = [Loop(*(part.replace(old, new) for part in (one.tag, one.pv, one.sp, one.out, one.ff)))
             for one, old, new in ((INNER, "FIC-210", "Z"), (FED, "TIC-101", "A"))]  # fmt: skip
    other = strategy(renamed, *loops, computing=("b",), backwards=True)
    target = disturbance.replace("tank.", "k.")
    wanted = seen(BOTH, disturbance).sentence
    for old, new in names.items():
        wanted = wanted.replace(old, new)
    assert seen(other, target).sentence == wanted


def test_three_loops_deep_the_innermost_that_sees_it_counts() -> None:
    deep = """
    header coil.p
    coil.p coil.steam
    coil.p PT-1.p
    PT-1.p PT-1.pv
    PT-1.pv PIC-1.pv
    PIC-1.pv PIC-1.out
    FIC-210.out PIC-1.sp
    PIC-1.sp PIC-1.out
    PIC-1.out TV-1.signal
    TV-1.position coil.p
    """
    plant = PLANT.replace("header coil.steam\n", "").replace("TV-1.position coil.steam\n", "side coil.steam\n")
    cascade = CASCADE.replace("FIC-210.out TV-1.signal\n", "")
    pressure = Loop("PIC-1", "PIC-1.pv", "PIC-1.sp", "PIC-1.out")
    made = strategy(plant + FEEDBACK + cascade + deep, OUTER, INNER, pressure)
    assert "inside the inner loop of PIC-1" in seen(made, "header").sentence
    assert "inside the inner loop of FIC-210" in seen(made, "side").sentence
    assert seen(made, "feed_T").kind == "outer"

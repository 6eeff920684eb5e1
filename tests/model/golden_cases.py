"""Mistakes of plants, strategies, scenarios and runs by class: the files, written as changes to ones that are right."""

from __future__ import annotations

from tests.model.test_messages import GOOD, LOOP

RUN = """scenario: run
plant: plant.yaml
strategies: {loop: [loop.yaml]}
lasts: 10 min
events:
  - {at: 1 min, step: feed_q, by: 10 %}
accept:
  - {signal: tank.T, max: 80 degC}
"""
BLOCK = """block: own
about: A block of our own.
parameters: {tau: {unit: s, about: time constant, default: 10 s, at_least: 0}}
inputs: {u: {unit: dimensionless, default: 1}}
states: {y: {unit: dimensionless, start: 0}}
balances: {law: tau*dy/dt = u - y}
outputs: {y: {unit: dimensionless}}
"""
OWN = "plant: own\nblocks: {a: {use: own}}\n"
PUMP = "plant: line\nblocks:\n  P-1: {use: pumped_line, curve: CURVE, K: 0 s^2/m^5, Kv: 20 m^3/h, opening: 100 %}\n"
END = "block: NAME\nabout: One end of a pipe.\nPORT\nstreams: {end: {p: p}}\n"
SCAN = "scan: {unit: s, about: time between executions, default: 1 s}, "
TWO = "plant: two\nblocks: {a: {use: own}, b: {use: own}}\nwires: [a.y -> b.u, b.y -> a.u]\n"

Case = dict[str, str]


def plant(old: str = "", new: str = "", more: str = "") -> Case:
    """A plant with a text replaced or added, under a loop that is right."""
    assert old in GOOD
    return {"plant.yaml": (GOOD.replace(old, new) if old else GOOD) + more, "loop.yaml": LOOP}


def loop(old: str = "", new: str = "", more: str = "") -> Case:
    """The same of the loop."""
    assert old in LOOP
    return {"plant.yaml": GOOD, "loop.yaml": (LOOP.replace(old, new) if old else LOOP) + more}


def run(old: str, new: str, files: Case | None = None) -> Case:
    """The same of a scenario."""
    assert old in RUN
    return {"plant.yaml": GOOD, "loop.yaml": LOOP, **(files or {}), "run.yaml": RUN.replace(old, new)}


def own(old: str, new: str, text: str = OWN, parameter: str = "") -> Case:
    """The same of a block beside the plant."""
    assert old in BLOCK
    block = BLOCK.replace(old, new).replace("parameters: {", f"parameters: {{{parameter}")
    return {"blocks/own.yaml": block, "plant.yaml": text, "loop.yaml": "strategy: loop\n"}


def event(text: str, files: Case | None = None) -> Case:
    """A scenario with another event."""
    made = run("{at: 1 min, step: feed_q, by: 10 %}", text, files)
    return {**made, "run.yaml": made["run.yaml"].replace("tank.T, max: 80 degC", "t.y, max: 80")} if files else made


def rule(text: str) -> Case:
    """A scenario with another rule."""
    return run("{signal: tank.T, max: 80 degC}", text)


CLASSES: dict[str, dict[str, Case]] = {
    "wiring": {
        "nothing_drives": plant("  - feed_q -> tank.q\n"),
        "two_drivers": plant(more="  - feed_T -> TT-1.T\n"),
        "unknown_port": plant("tank.T_in", "tank.T_inn"),
        "unknown_tag": loop("TT-1.pv", "TT-7.pv"),
        "into_an_output": loop("TT-1.pv -> TIC-1.pv", "TIC-1.pv -> TT-1.pv"),
        "into_a_boundary_value": plant(more="  - tank.T -> feed_T\n"),
        "stream_to_port": plant(more="  - tank.outlet -> TT-1.T\n"),
        "streams_without_common": {
            "blocks/a.yaml": END.replace("NAME", "a").replace("PORT", "outputs: {p: {unit: bar, is: 0}}"),
            "blocks/b.yaml": END.replace("NAME", "b").replace("PORT", "inputs: {q: {unit: m^3/h}}").replace("p: p", "q: q"),
            "plant.yaml": "plant: p\nblocks: {a: {use: a}, b: {use: b, q: 1 m^3/h}}\nwires: [a.end -> b.end]\n",
            "loop.yaml": "strategy: loop\n",
        },
        "cut_of_nothing": loop(more="cut: [TT-1.pv -> element.duty]\n"),
    },
    "units": {
        "unit_clash": plant("feed_T -> tank.T_in", "feed_q -> tank.T_in"),
        "difference_for_point": plant("is: 12 degC", "is: 285 K"),
        "wrong_unit": plant("200 kW", "200 kJ"),
        "bare_number": plant("200 kW", "200"),
        "bare_per_cent": loop("sp: 55 degC", "sp: 55 degC, bias: 40"),
        "word_for_number": plant("200 kW", "much"),
        "unit_cannot_be_told": {
            "plant.yaml": "plant: p\nblocks: {a: {use: dead_time, dead_time: 1 s}, b: {use: dead_time, dead_time: 1 s}}\nwires: [a.y -> b.u, b.y -> a.u]\n",
            "loop.yaml": "strategy: loop\n",
        },
    },
    "blocks and values": {
        "unknown_block": plant("heater_element", "heater_elment"),
        "missing_number": plant(", V: 1.8 m^3"),
        "unknown_key": plant("V: 1.8", "Vol: 1.8"),
        "no_choice": loop("action: reverse, "),
        "wrong_choice": loop("reverse", "revers"),
        "falling_range": loop("[0 degC, 100 degC]", "[100 degC, 0 degC]"),
        "beyond_a_bound": plant("V: 1.8 m^3", "V: -1 m^3"),
        "given_by_itself": loop("sp: 55 degC", "sp: 55 degC, scan: scan"),
        "given_by_a_ring": plant("range: [0 degC, 100 degC]", "range: [0 degC, 100 degC], lag: damping, damping: lag"),
        "curve_does_not_rise": {"plant.yaml": PUMP.replace("CURVE", "{x: [0, 20, 10], y: [30, 20, 10]}"), "loop.yaml": "strategy: loop\n"},
        "no_whole_number": {"plant.yaml": "plant: p\nblocks: {s: {use: summing, n: 1.5, u.1: 1 m}}\n", "loop.yaml": "strategy: loop\n"},
        "liquid_unknown": plant("boundary:", "liquid: {is: watr, at: 20 degC}\nboundary:"),
        "liquid_outside_its_table": plant("boundary:", "liquid: {is: water, at: 120 degC}\nboundary:"),
        "no_law_for_scan_zero": own(
            "states: {y: {unit: dimensionless, start: 0}}\nbalances: {law: tau*dy/dt = u - y}",
            "memory: {y: {unit: dimensionless, start: 0}}\nscan: {y: was(y) + u*scan/tau}",
            OWN.replace("use: own", "use: own, scan: 0 s"), SCAN,
        ),
    },
    "plant and strategies": {
        "same_tag_twice": loop("  TIC-1:", "  tank: {use: heated_tank, V: 1 m^3}\n  TIC-1:"),
        "boundary_value_twice": loop("blocks:\n", "boundary: {feed_T: {is: 1 degC}}\nblocks:\n"),
        "set_of_nothing": loop(more="set: {TIC-9.gain: 2}\n"),
        "two_plants": {"plant.yaml": GOOD, "loop.yaml": GOOD.replace("plant: tank", "plant: other")},
        "ring_through_on_and_off": own(
            "inputs: {u: {unit: dimensionless, default: 1}}\nstates: {y: {unit: dimensionless, start: 0}}\nbalances: {law: tau*dy/dt = u - y}\noutputs: {y: {unit: dimensionless}}",
            "inputs: {u: {unit: on/off}}\noutputs: {y: {unit: on/off, is: not u}}",
            TWO,
        ),
        "ring_of_scans": own(
            "inputs: {u: {unit: dimensionless, default: 1}}\nstates: {y: {unit: dimensionless, start: 0}}\nbalances: {law: tau*dy/dt = u - y}",
            "inputs: {u: {unit: dimensionless, default: 1}}\nmemory: {y: {unit: dimensionless, start: 0}, z: {unit: dimensionless, start: 0}}\nscan: {y: z + u, z: y - u}",
            OWN.replace("use: own", "use: own, scan: 1 s"), SCAN,
        ),
    },
    "signs": {
        "positive_feedback": loop("reverse", "direct"),
        "no_effect": loop(
            "wires:\n  - TT-1.pv -> TIC-1.pv\n",
            "  TT-2: {use: temperature_transmitter, range: [0 degC, 100 degC]}\nwires:\n  - TT-2.pv -> TIC-1.pv\n  - feed_T -> TT-2.T\n",
        ),
        "wrong_feedforward": loop("wires:", "  FY-1: {use: feedforward, gain: 5 %/K, at: 12 degC}\nwires:\n  - feed_T -> FY-1.u\n  - FY-1.out -> TIC-1.ff"),
    },
    "no operating point": {
        "still_moves": {"plant.yaml": "plant: f\nblocks:\n  t: {use: filling_tank, A: 1 m^2, q_in: 3 m^3/h, q_out: 2 m^3/h, T_in: 20 degC}\n", "loop.yaml": "strategy: loop\n"},
        "never_rests": loop(
            "  TIC-1: {use: pid, action: reverse, range: [0 degC, 100 degC], gain: 5, integral: 300 s, sp: 55 degC}",
            "  TIC-1: {use: on_off, action: reverse, sp: 55 degC, dead_band: 1 K}",
        ),
        "no_root_between_the_ends": {
            "blocks/root.yaml": "block: root\nabout: An equation.\nsolve:\n  y: {unit: dimensionless, equation: y^2 = 9, start: 1, between: [0, 2]}\noutputs: {y: {unit: dimensionless}}\n",
            "plant.yaml": "plant: r\nblocks: {a: {use: root}}\n",
            "loop.yaml": "strategy: loop\n",
        },
    },
    "events": {
        "target_is_computed": event("{at: 1 min, step: tank.T_in, to: 20 degC}"),
        "target_unknown": event("{at: 1 min, step: tank.VV, to: 2 m^3}"),
        "target_is_stored": event("{at: 1 min, ramp: tank.T, to: 60 degC, over: 1 min}"),
        "tag_of_no_strategy": event("{at: 1 min, step: TIC-3.sp, to: 60 degC}"),
        "wait_for_a_tag_of_no_strategy": event("{when: LT-1.pv above 1 m, step: feed_q, by: 10 %}"),
        "wait_for_an_unknown_signal": event("{when: tank.TT above 60 degC, step: feed_q, by: 10 %}"),
        "wait_for_a_setting": event("{when: TT-1.lost is maybe, step: feed_q, by: 10 %}"),
        "per_cent_of_a_point": event("{at: 1 min, step: feed_T, by: 10 %}"),
        "wrong_unit_of_an_event": event("{at: 1 min, step: feed_q, to: 10 degC}"),
        "fault_without_size": event("{at: 1 min, fault: TT-1, kind: bias}"),
        "fault_with_size": event("{at: 1 min, fault: TT-1, kind: frozen, size: 1 K}"),
        "no_such_mode": event("{at: 1 min, mode: TIC-1, to: handish}"),
        "no_such_stored_value": event("{at: 1 min, mode: TIC-1, to: manual, outputt: 40 %}"),
        "event_beyond_a_bound": event("{at: 1 min, step: tank.V, by: -200 %}"),
        "zero_dead_time_changed": event("{at: 1 min, step: TT-1.dead_time, to: 10 s}"),
    },
    "rules": {
        "signal_unknown": rule("{signal: tank.TT, max: 80 degC}"),
        "unit_of_a_limit": rule("{signal: tank.T, max: 80 kW}"),
        "unit_of_an_integral": rule("{signal: tank.T, of: TIC-1.sp, iae: 80 K}"),
        "of_another_kind": rule("{signal: tank.T, within: 1 K, of: TIC-1.out}"),
        "controller_unknown": rule("{loop: TIC-9, gain_margin: 2}"),
    },
    "scenarios": {
        "points_unknown": run("lasts:", "points: [winter]\nlasts:"),
    },
    "runs": {
        "bound_passed": event(
            "{at: 1 min, step: t.u, to: 9}",
            own("y: {unit: dimensionless, start: 0}", "y: {unit: dimensionless, start: 1, below: 5}", OWN.replace("a:", "t:")),
        ),
        "not_finite": event(
            "{at: 1 min, step: t.u, to: -1}",
            own("u - y}", "sqrt(u) - y}", OWN.replace("a:", "t:")),
        ),
        "no_solution": event(
            "{at: 1 min, step: t.u, to: 9}",
            own(
                "states: {y: {unit: dimensionless, start: 0}}\nbalances: {law: tau*dy/dt = u - y}",
                "solve: {y: {unit: dimensionless, equation: y^2 = u, start: 1, between: [0, 2]}}",
                OWN.replace("a:", "t:"),
            ),
        ),
    },
}  # fmt: skip

"""Names and ports that plants written by others rely on; they may be added to, never changed."""

from __future__ import annotations

from pathlib import Path

import pytest

from loopsim.documents.catalogue import Catalogue

LIBRARY = Catalogue(Path(__file__).parent / "beside nothing")
TRANSMITTER = "range lag damping dead_time noise noise_every resolution bias drift failure"
# block: inputs -> outputs | parameters and settings | streams, memories, faults
FIXED = {
    "mixing_tank": "q c_in -> c | V | inlet outlet",
    "reacting_tank": "q c_in -> c rate | V k order | inlet outlet",
    "heated_tank": "q T_in Q T_amb -> T loss | V rho cp UA | inlet outlet",
    "heater_element": "duty T -> Q T_element | power C UA |",
    "steam_coil": "opening flow p_header T -> Q steam | power rated_pressure lag |",
    "level_tank": "q_in q_out -> h V overflow empty | A h_max |",
    "drained_tank": "q_in -> h q_out | A outlet_area Cd |",
    "pipe_run": "q T_in c_in -> T c | V | inlet outlet",
    "dead_time": "u -> y | dead_time |",
    "first_order_lag": "u -> y | time_constant |",
    "lead_lag": "u -> y | gain lead lag |",
    "temperature_transmitter": f"T -> pv | {TRANSMITTER} | frozen bias drift lost",
    "flow_transmitter": f"q -> pv | {TRANSMITTER} | frozen bias drift lost",
    "level_transmitter": f"h -> pv | {TRANSMITTER} | frozen bias drift lost",
    "pressure_transmitter": f"p -> pv | {TRANSMITTER} | frozen bias drift lost",
    "analyser": f"c -> pv | {TRANSMITTER} scan phase | frozen bias drift lost",
    "control_valve": (
        "signal dp -> q position | Kv q_max trim rangeability stroke_time positioner dead_time dead_band stiction"
        " increase fails | stuck leaking"
    ),
    "pid": (
        "pv sp ff -> out | range gain integral derivative form action scan phase limits bias windup tracking beta N mode"
        " | setpoint output I"
    ),
    "feedforward": "u -> out | gain lead lag dead_time at |",
    "ratio": "u -> out | ratio |",
    "summing": "u -> out | n weight |",
    "multiplying": "u -> out | n |",
    "low_select": "u -> out selected | n |",
    "high_select": "u -> out selected | n |",
    "split_range": "u -> low high | seam overlap |",
    "on_off": "pv sp -> out | dead_band minimum_on minimum_off action |",
    "velocity_limit": "u -> out | rise fall |",
}
CHOICES = {
    ("reacting_tank", "order"): "1 2",
    ("control_valve", "trim"): "linear equal_percentage quick_opening",
    ("control_valve", "increase"): "opens closes",
    ("control_valve", "fails"): "open closed last",
    ("pid", "form"): "ideal series parallel",
    ("pid", "action"): "reverse direct",
    ("pid", "windup"): "hold track",
    ("pid", "mode"): "manual auto cascade",
    ("on_off", "action"): "reverse direct",
}


@pytest.mark.parametrize("name", FIXED)
def test_fixed_names_exist(name: str) -> None:
    block = LIBRARY.block(name)
    ports, numbers, others = FIXED[name].split("|")
    inputs, _, outputs = ports.partition("->")
    assert set(inputs.split()) <= {one.key.name for one in block.inputs}
    assert set(outputs.split()) <= {one.key.name for one in block.outputs}
    assert set(numbers.split()) <= {one.key.name for one in block.parameters} | set(block.settings)
    assert set(others.split()) <= set(block.streams) | {one.key.name for one in block.memory} | set(block.faults)


@pytest.mark.parametrize(("name", "setting"), CHOICES)
def test_fixed_choices_exist(name: str, setting: str) -> None:
    assert LIBRARY.block(name).settings[setting].choices == tuple(CHOICES[name, setting].split())


@pytest.mark.parametrize(
    ("name", "parameter", "value"),
    [
        ("pid", "N", 8.0),
        ("pid", "beta", 1.0),
        ("control_valve", "positioner", 0.5),
        ("control_valve", "rangeability", 50.0),
    ],
)
def test_fixed_defaults(name: str, parameter: str, value: float) -> None:
    """Defaults that the law and the names of the trade fix."""
    found = next(one.default for one in LIBRARY.block(name).parameters if one.key.name == parameter)
    number = getattr(found, "value", None)
    assert number == value or getattr(getattr(found, "tree", None), "value", None) == value

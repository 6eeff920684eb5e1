"""Blocks of less common build: shown inputs, long repeats, units of single elements, balances without a derivative."""

from __future__ import annotations

import numpy as np
import pytest

from tests.conftest import Write, source, trends_of

RUN = """scenario: run
plant: plant.yaml
strategies: {none: []}
EVENTS
lasts: 20 s
record: {every: 1 s}
"""


def test_an_output_may_show_an_input_and_be_wired_on(write: Write) -> None:
    block = """block: passing
about: Shows what comes in.
inputs: {q: {unit: m^3/h}}
outputs:
  q: {unit: m^3/h}
  half: {unit: m^3/h, is: q/2}
"""
    plant = """plant: two
boundary: {feed: {is: 3 m^3/h}}
blocks: {a: {use: passing}, b: {use: passing}}
wires: [feed -> a.q, a.q -> b.q]
"""
    values = source(write({"blocks/passing.yaml": block, "plant.yaml": plant})).rested().values
    assert 3600 * values["b.q"] == pytest.approx(3.0) and 3600 * values["b.half"] == pytest.approx(1.5)


MANY = """block: many
about: A row of cells, each with its own supply temperature.
parameters: {n: {unit: count, about: cells}, tau: {unit: s, about: time constant, default: 10 s}}
repeat: {i: n}
inputs: {T_in: {unit: degC}}
states:
  T[i]: {unit: degC, start: T_in}
balances:
  energy[i]: tau*dT[i]/dt = T_in - T[i]
outputs:
  total: {unit: K, is: "sum(T[i] - T_in)"}
  low: {unit: K, is: "min(T[i] - T_in)"}
  high: {unit: K, is: "max(T[i] - T_in)"}
"""


def test_sums_and_extremes_of_a_long_repeat(write: Write) -> None:
    """As many cells as a repeat may have; source: cells that all stand 1 K under their supply."""
    plant = "plant: row\nblocks: {a: {use: many, n: 1000, T_in: 30 degC}}\n"
    system_values = source(write({"blocks/many.yaml": MANY, "plant.yaml": plant})).rested().values
    assert [system_values[f"a.{name}"] for name in ("total", "low", "high")] == [0.0, 0.0, 0.0]


@pytest.mark.parametrize("size", [1, 2, 3, 7, 100])
def test_sums_and_extremes_in_time(write: Write, size: int) -> None:
    """Source: each cell k starts k K low and comes nearer by exp(-t/tau)."""
    starts = ", ".join(f"T.{k}: {30 - k} degC" for k in range(1, size + 1))
    plant = f"plant: row\nblocks: {{a: {{use: many, n: {size}, T_in: 30 degC, {starts}}}}}\n"
    run = RUN.replace("EVENTS", "starts: given")
    trends = trends_of(write({"blocks/many.yaml": MANY, "plant.yaml": plant, "scenario.yaml": run}))
    left = np.exp(-trends.time / 10.0)
    assert trends.columns["a.total"] == pytest.approx(-left * size * (size + 1) / 2, rel=1e-6)
    assert trends.columns["a.low"] == pytest.approx(-left * size, rel=1e-6)
    assert trends.columns["a.high"] == pytest.approx(-left, rel=1e-6)


def test_the_unit_of_a_single_element_wins_wherever_it_stands(write: Write) -> None:
    block = """block: mixed
about: A first input of another kind than the rest.
parameters: {n: {unit: count, about: inputs}}
repeat: {i: n}
inputs:
  u[1]: {unit: degC}
  u[i]: {unit: "%"}
outputs:
  T: {unit: degC, is: "u[1]"}
  share: {unit: "%", is: "u[2]"}
"""
    plant = "plant: mix\nblocks: {a: {use: mixed, n: 2, u.1: 30 degC, u.2: 40 %}}\n"
    values = source(write({"blocks/mixed.yaml": block, "plant.yaml": plant})).rested().values
    assert values["a.T"] == pytest.approx(303.15) and values["a.share"] == pytest.approx(0.4)


LAYERS = """block: layers
about: Layers that exchange more heat when they are upside down; their holdup may be left out.
parameters: {n: {unit: count, about: layers}, C: {unit: J/K, about: heat capacity of a layer, default: 0 J/K}}
repeat: {i: n}
inputs:
  T_in: {unit: degC}
  Q[i]: {unit: kW, default: 0 kW}
states:
  T[i]: {unit: degC, start: T_in}
let:
  flow: 1000 W/K
  calm: 50 W/K
  turning: 3000 W/K
  T[0]: T_in
  up[0]: 0
  up[n]: 0
  up[i]: calm*(T[i] - T[i+1]) + turning*max(T[i] - T[i+1], 0)
balances:
  energy[i]: C*dT[i]/dt = flow*(T[i-1] - T[i]) + up[i-1] - up[i] + Q[i]
outputs:
  T[i]: {unit: degC}
"""


def layers_by_hand(Q: tuple[float, float, float], turned: tuple[bool, bool]) -> np.ndarray:
    """Temperatures above the supply [K] of three layers, from their three balances; which pairs turn over is given."""
    k = [50.0 + 3000.0 * one for one in turned]
    matrix = [
        [-1000.0 - k[0], k[0], 0.0],
        [1000.0 + k[0], -1000.0 - k[0] - k[1], k[1]],
        [0.0, 1000.0 + k[1], -1000.0 - k[1]],
    ]
    return np.linalg.solve(np.array(matrix), -1000.0 * np.array(Q))


@pytest.mark.parametrize("capacity", ["0 J/K", "1 J/K"])
def test_balances_without_a_derivative_are_solved_together(write: Write, capacity: str) -> None:
    """A ring of algebra with a kink that turns over in the run; the second case has a derivative 1000 times too fast to matter."""
    plant = f"plant: store\nboundary: {{h: {{is: 5 kW}}}}\nblocks: {{a: {{use: layers, n: 3, C: {capacity}, T_in: 30 degC, Q.1: 2 kW}}}}\nwires: [h -> a.Q.2]\n"
    run = RUN.replace("EVENTS", "events:\n  - {at: 5 s, step: h, to: -5 kW}")
    columns = trends_of(write({"blocks/layers.yaml": LAYERS, "plant.yaml": plant, "scenario.yaml": run})).columns
    found = np.array([columns[f"a.T.{k}"] - 303.15 for k in (1, 2, 3)])
    before, after = layers_by_hand((2, 5, 0), (False, True)), layers_by_hand((2, -5, 0), (True, False))
    assert before[0] < before[1] and after[0] > after[1]
    assert found[:, 4] == pytest.approx(before, abs=1e-6)
    assert found[:, 10] == pytest.approx(after, abs=1e-6)

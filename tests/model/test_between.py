"""Unknowns of implicit equations keep between their ends at rest, as they do in time."""

from __future__ import annotations

import pytest

from loopsim.errors import ComputationError
from tests.conftest import Write, source

PUMP = """plant: line
blocks:
  P-1: {use: pumped_line, curve: {x: [0, 20], y: [30, 20]}, rise: RISE, K: 648000 s^2/m^5, Kv: 20 m^3/h, opening: 100 %}
"""
SQUARE = """block: square
about: An equation with ends.
inputs: {a: {unit: dimensionless}}
solve:
  y: {unit: dimensionless, equation: y^2 = a, start: 1, between: [0, 2]}
outputs: {y: {unit: dimensionless}}
"""


@pytest.mark.parametrize(
    ("rise", "flow"),
    [
        ("5 m", 15.1850096),  # quadratic equation by hand, as in the block's own check
        ("29.9 m", 0.19429991507799288),  # 0.5*q + (0.05 + 0.0254929)*q^2 = 0.1 m, by hand
        ("31 m", 0.0),  # the pump lifts 30 m and no more: the non-return valve shuts
        ("300 m", 0.0),
    ],
)
def test_a_pump_that_cannot_lift_stands_at_no_flow(write: Write, rise: str, flow: float) -> None:
    values = source(write({"plant.yaml": PUMP.replace("RISE", rise)})).rested().values
    assert 3600 * values["P-1.q"] == pytest.approx(flow, rel=1e-6, abs=1e-9)


@pytest.mark.parametrize(("a", "root"), [("3", 3**0.5), ("1e-6", 1e-3), ("0", 0.0), ("4", 2.0)])
def test_a_root_between_the_ends_and_on_them(write: Write, a: str, root: float) -> None:
    plant = f"plant: one\nblocks: {{n: {{use: square, a: {a}}}}}\n"
    values = source(write({"blocks/square.yaml": SQUARE, "plant.yaml": plant})).rested().values
    assert values["n.y"] == pytest.approx(root, abs=1e-5)


@pytest.mark.parametrize("a", ["-1", "9"])
def test_no_root_between_the_ends_is_told(write: Write, a: str) -> None:
    """3 solves the equation with 9, but lies beyond the end."""
    plant = f"plant: one\nblocks: {{n: {{use: square, a: {a}}}}}\n"
    with pytest.raises(ComputationError, match=r"nothing between its ends solves the equation of 'n\.y'"):
        source(write({"blocks/square.yaml": SQUARE, "plant.yaml": plant})).rested()


def test_ends_that_move_with_the_plant_do_no_harm(write: Write) -> None:
    block = SQUARE.replace(
        "solve:",
        "states: {x: {unit: dimensionless, start: 1}}\nlet: {tau: 10 s}\nbalances: {b: tau*dx/dt = a - x}\nsolve:",
    )
    files = {
        "blocks/square.yaml": block.replace("[0, 2]", "[0, 2*x]"),
        "plant.yaml": "plant: one\nblocks: {n: {use: square, a: 3}}\n",
    }
    assert source(write(files)).rested().values["n.y"] == pytest.approx(3**0.5)

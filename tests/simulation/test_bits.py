"""Compiled and interpreted runs, snapshots and recording intervals: the same bits."""

from __future__ import annotations

import math

import numpy as np
import pytest

from loopsim.model.choice import scenario_sources
from loopsim.simulation.case import case_of, recorded_names, run_case
from loopsim.simulation.machine import advance, boundary
from loopsim.simulation.run import prepare
from tests.conftest import Write
from tests.model.test_metamorphic import texts

NOISY = "lag: 35 s"


@pytest.fixture
def case(write: Write):  # type: ignore[no-untyped-def]
    files = texts()
    files["plant.yaml"] = files["plant.yaml"].replace(
        NOISY, "lag: 35 s, dead_time: 20 s, noise: 0.05 K, noise_every: 2 s"
    )
    scenario, sources = scenario_sources(write(files) / "scenario.yaml")
    return case_of("feedback", scenario, sources["feedback"])


def test_compiled_is_interpreted(case) -> None:  # type: ignore[no-untyped-def]
    runs = [run_case(case, ["tank.T", "TV-1.position"], native=native).trends for native in (True, False)]
    assert np.array_equal(runs[0].pieces.samples, runs[1].pieces.samples)
    for name, column in runs[0].columns.items():
        assert np.array_equal(column, runs[1].columns[name]), name


@pytest.mark.parametrize("native", [True, False])
def test_a_snapshot_has_the_same_future(case, native: bool) -> None:  # type: ignore[no-untyped-def]
    names = recorded_names(case)
    simulation = prepare(case.model, case.law, case.point, case.scenario, {}, names, native=native)
    boundary(simulation.machine, simulation.state, event=True)
    advance(simulation.machine, simulation.state, 100.0)
    snapshot = simulation.state.copy()
    ends = []
    for state in (simulation.state, snapshot):
        advance(simulation.machine, state, 250.0)
        ends.append((list(state.x), list(state.m), state.t))
    assert ends[0] == ends[1]


def test_noise_belongs_to_its_tag(write: Write) -> None:
    """One more instrument changes nobody else's noise; another seed does."""
    files = texts()
    files["plant.yaml"] = files["plant.yaml"].replace(NOISY, "lag: 35 s, noise: 0.05 K")
    more = files["plant.yaml"].replace(
        "wires:",
        "  AA-1: {use: temperature_transmitter, range: [0 degC, 100 degC], noise: 1 K}\nwires:\n  - tank.T -> AA-1.T",
        1,
    )
    found = []
    for plant, seed in ((files["plant.yaml"], 0), (more, 0), (files["plant.yaml"], 5)):
        folder = write({**files, "plant.yaml": plant, "scenario.yaml": files["scenario.yaml"] + f"seed: {seed}\n"})
        scenario, sources = scenario_sources(folder / "scenario.yaml")
        found.append(run_case(case_of("feedback", scenario, sources["feedback"]), []).trends.columns["TT-1.pv"])
    assert np.abs(found[0] - found[1]).max() < 1e-6
    assert np.abs(found[0] - found[2]).max() > 0.01
    quiet = found[0][:60]
    assert 0.02 < quiet.std() < 0.1 and not math.isclose(quiet[0], quiet[1])

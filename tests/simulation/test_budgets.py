"""No run goes on for ever: steps, memory and time of computing have their limits, and the others are still reported."""

from __future__ import annotations

from pathlib import Path

import pytest

from loopsim import api
from loopsim.simulation import machine
from tests.conftest import Write

PLANT = """plant: tank
boundary: {feed: {is: 3 m^3/h}}
blocks:
  tank: {use: heated_tank, V: 1 m^3, T_in: 12 degC}
  TT: {use: temperature_transmitter, range: [0 degC, 100 degC], noise: 0.1 K}
wires: [feed -> tank.q, tank.T -> TT.T]
"""
NOISY = "strategy: noisy\nset: {TT.noise_every: 100 ms}\n"
CALM = "strategy: calm\nset: {TT.noise: 0 K}\n"
RUN = """scenario: run
plant: plant.yaml
strategies: {noisy: [noisy.yaml], calm: [calm.yaml]}
lasts: 2 h
record: {every: 1 min}
events: [{at: 1 min, step: feed, by: 10 %}]
accept: [{signal: tank.T, max: 60 degC}]
"""


@pytest.fixture
def folder(write: Write) -> Path:
    return write({"plant.yaml": PLANT, "noisy.yaml": NOISY, "calm.yaml": CALM, "run.yaml": RUN})


def given_up(report: api.RunReport) -> str:
    noisy, calm = report.judgements[0].strategies
    assert report.status == 3 and calm.verdict == "passed"
    assert noisy.run.trends.status.code == "stopped" and 0 < noisy.run.trends.status.time < 7200
    return noisy.run.trends.status.sentence


@pytest.mark.parametrize(("limit", "most"), [("MOST_STEPS", 5000), ("MOST_KEPT", 100_000)])
def test_steps_and_memory(folder: Path, monkeypatch: pytest.MonkeyPatch, limit: str, most: int) -> None:
    monkeypatch.setattr(machine, limit, most)
    assert "given up" in given_up(api.run([folder / "run.yaml"]))


def test_time_of_computing(folder: Path) -> None:
    assert given_up(api.run([folder / "run.yaml"], patience=0.0)) == "the run takes too long; it was given up"

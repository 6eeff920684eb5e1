"""What the published checks share: writing plants and scenarios, reading signals, how well a value must agree."""

from __future__ import annotations

import math
import shutil
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from loopsim.api import simulate, steady_values
from loopsim.results import Trends

HERE = Path(__file__).parent
RUN_ACCURACY = 1e-7
REST_ACCURACY = 1e-9


@dataclass(frozen=True)
class Measured:
    """A value and the error that the product promises for it.

    A value got from a run may be off by 1e-7 of `scale` (the span of the signal, times how strongly the value hangs on
    it), one at rest by 1e-9 of `scale`. Where a source gives more digits than that, this is what counts.
    """

    value: float
    error: float


def from_run(value: float, scale: float = 1.0) -> Measured:
    """A value got from a run; `scale` as above."""
    return Measured(value, RUN_ACCURACY * scale)


def at_rest(value: float, scale: float | None = None) -> Measured:
    """A value got from an operating point."""
    return Measured(value, REST_ACCURACY * (abs(value) if scale is None else scale))


def by_law(value: float) -> Measured:
    """A value got from a scanned law alone, where nothing is integrated: rounding only."""
    return Measured(value, 1e-10 * max(abs(value), 1.0))


Results = dict[str, Measured]


class Bench:
    """A folder with a plant, its own block files beside it, and the runs made with it."""

    def __init__(self, folder: Path, plant: str, strategies: Mapping[str, str] | None = None) -> None:
        self.folder = folder
        folder.mkdir(parents=True, exist_ok=True)
        shutil.copytree(HERE / "blocks", folder / "blocks", dirs_exist_ok=True)
        (folder / "plant.yaml").write_text("plant: published\n" + plant, encoding="utf-8")
        self.strategies = dict(strategies or {})
        for name, text in self.strategies.items():
            (folder / f"{name}.yaml").write_text(f"strategy: {name}\n{text}", encoding="utf-8")

    def rest(self) -> Mapping[str, float]:
        """All signals at the operating point [SI]."""
        files = [self.folder / f"{name}.yaml" for name in self.strategies]
        signals: Mapping[str, float] = steady_values(self.folder / "plant.yaml", files)
        return signals

    def run(self, lasts: str, every: str, events: Sequence[str] = (), starts: str = "steady") -> Trends:
        """A run with all strategies laid over the plant."""
        files = ", ".join(f"{name}.yaml" for name in self.strategies)
        lines = [
            "scenario: published",
            "plant: plant.yaml",
            f"strategies: {{all: [{files}]}}",
            f"starts: {starts}",
            f"lasts: {lasts}",
            f"record: {{every: {every}}}",
            "events:" if events else "",
            *(f"  - {{{event}}}" for event in events),
        ]
        (self.folder / "scenario.yaml").write_text("\n".join(lines) + "\n", encoding="utf-8")
        trends = simulate(self.folder / "scenario.yaml", "all")
        assert trends.status.code == "done", trends.status.sentence
        return trends


def at(trends: Trends, signal: str, time: float) -> float:
    """A recorded value [SI] at a recorded instant [s]."""
    row = int(np.argmin(np.abs(trends.time - time)))
    assert abs(trends.time[row] - time) < 1e-9, f"nothing was recorded at {time} s"
    return float(trends.columns[signal][row])


def reaches(trends: Trends, signal: str, level: float) -> float:
    """When [s] a rising signal first reaches a level [SI], by a straight line between two rows."""
    values: NDArray[np.float64] = trends.columns[signal]
    row = int(np.argmax(values >= level))
    assert values[row] >= level and row > 0, f"{signal} does not reach {level}"
    before, after = float(values[row - 1]), float(values[row])
    share = (level - before) / (after - before)
    return float(trends.time[row - 1] + share * (trends.time[row] - trends.time[row - 1]))


def first_harmonic(trends: Trends, signal: str, begin: float, period: float) -> tuple[float, float]:
    """Coefficients of sin and cos of a signal [SI] over one period from `begin`, rows evenly spread over the period."""
    inside = (trends.time >= begin - 1e-9) & (trends.time < begin + period - 1e-9)
    angle = 2.0 * math.pi * (trends.time[inside] - begin) / period
    values = trends.columns[signal][inside]
    return float(2.0 * np.mean(values * np.sin(angle))), float(2.0 * np.mean(values * np.cos(angle)))


def time_constant(share: float, time: float) -> Measured:
    """Time constant [s] of a first-order response that has come to `share` of its way after `time` [s]."""
    tau = -time / math.log(1.0 - share)
    return from_run(tau, tau * tau / time / (1.0 - share))

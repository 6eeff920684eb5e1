"""Plants in text for tests: files written to a folder, models made from them, runs."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path

import hypothesis
import pytest

from loopsim.model.choice import Source, scenario_sources, source_of
from loopsim.results import Trends
from loopsim.simulation.case import case_of, run_case
from loopsim.simulation.run import RunResult

hypothesis.settings.register_profile("untimed", deadline=None)  # no test measures time
hypothesis.settings.load_profile("untimed")

Write = Callable[[Mapping[str, str]], Path]


@pytest.fixture(autouse=True, scope="session")
def _cache(tmp_path_factory: pytest.TempPathFactory) -> None:
    """Compiled plants of a test session go into a folder of its own."""
    import os

    os.environ["LOOPSIM_CACHE"] = str(tmp_path_factory.mktemp("cache"))


@pytest.fixture
def write(tmp_path: Path) -> Write:
    """Writes files by name into a fresh folder."""

    def files(texts: Mapping[str, str]) -> Path:
        for name, text in texts.items():
            path = tmp_path / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_text(text)
        return tmp_path

    return files


def source(folder: Path, *strategies: str) -> Source:
    """The plant in `plant.yaml` with strategies laid over it."""
    return source_of(folder / "plant.yaml", [folder / f"{name}.yaml" for name in strategies])


def run_of(folder: Path, scenario: str = "scenario", strategy: str = "") -> RunResult:
    """The run of a scenario's strategy, its first one by default, every signal judged."""
    read, sources = scenario_sources(folder / f"{scenario}.yaml", strategy)
    name = strategy or next(iter(sources))
    case = case_of(name, read, sources[name])
    return run_case(case, list(case.model.signals))


def trends_of(folder: Path, scenario: str = "scenario", strategy: str = "") -> Trends:
    """The trends of `run_of`."""
    return run_of(folder, scenario, strategy).trends

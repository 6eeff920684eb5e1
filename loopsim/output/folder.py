"""Everything of a run put into a folder: trends, pictures, JSON, a JUnit file."""

from __future__ import annotations

from pathlib import Path

from loopsim.api.running import Judgement, RunReport
from loopsim.output.figures import run_figure
from loopsim.output.json_text import json_text
from loopsim.output.junit import junit_text
from loopsim.output.pictures import drawing_beside
from loopsim.output.trends import write_csv
from loopsim.study.export import suites


def write_run(report: RunReport, folder: Path) -> dict[str, dict[str, str]]:
    """Write all files of a run; gives the trends' file names by title of the judgement and by strategy."""
    folder.mkdir(parents=True, exist_ok=True)
    figures = {folder / _stem(one): run_figure(one.scenario, one.strategies) for one in report.judgements}
    with drawing_beside({stem: figure for stem, figure in figures.items() if figure is not None}):
        names = {one.title: _write_trends(one, folder, len(report.judgements) == 1) for one in report.judgements}
        every = [one for judgement in report.judgements for one in judgement.strategies]
        (folder / "results.json").write_text(json_text(report.json(names)) + "\n", encoding="utf-8")
        (folder / "results.xml").write_text(junit_text(suites(every)), encoding="utf-8")
    return names


def _stem(judgement: Judgement) -> str:
    return judgement.title.replace(" at ", ".")


def _write_trends(judgement: Judgement, folder: Path, single: bool) -> dict[str, str]:
    """One file a strategy that has run; gives their names by strategy."""
    names = {}
    for one in judgement.strategies:
        if len(one.run.trends.time):
            strategy = one.run.strategy
            names[strategy] = f"{strategy}.csv" if single else f"{_stem(judgement)}.{strategy}.csv"
            write_csv(one.run.trends, folder / names[strategy], one.run.air_pressure)
    return names

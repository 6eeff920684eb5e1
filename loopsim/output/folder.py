"""Everything of a run put into a folder: trends, pictures, JSON, a JUnit file."""

from __future__ import annotations

from pathlib import Path

from loopsim.api.running import RunReport
from loopsim.output.figures import run_figure
from loopsim.output.json_text import json_text
from loopsim.output.junit import junit_text
from loopsim.output.pictures import write_pictures
from loopsim.output.trends import write_csv
from loopsim.study.export import suites


def write_run(report: RunReport, folder: Path) -> dict[str, dict[str, str]]:
    """Write all files of a run; gives the trends' file names by title of the judgement and by strategy."""
    folder.mkdir(parents=True, exist_ok=True)
    names: dict[str, dict[str, str]] = {}
    single = len(report.judgements) == 1
    for judgement in report.judgements:
        stem = judgement.title.replace(" at ", ".")
        names[judgement.title] = {}
        for one in judgement.strategies:
            if len(one.run.trends.time):
                name = f"{one.run.strategy}.csv" if single else f"{stem}.{one.run.strategy}.csv"
                write_csv(one.run.trends, folder / name, one.run.air_pressure)
                names[judgement.title][one.run.strategy] = name
        figure = run_figure(judgement.scenario, judgement.strategies)
        if figure is not None:
            write_pictures(figure, folder / stem)
    every = [one for judgement in report.judgements for one in judgement.strategies]
    (folder / "results.json").write_text(json_text(report.json(names)) + "\n", encoding="utf-8")
    (folder / "results.xml").write_text(junit_text(suites(every)), encoding="utf-8")
    return names

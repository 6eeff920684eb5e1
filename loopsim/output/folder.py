"""Everything of a run put into a folder: trends, pictures, JSON, a JUnit file."""

from __future__ import annotations

from pathlib import Path

from loopsim.api.running import Judgement, RunReport
from loopsim.output.figures import run_figure
from loopsim.output.json_text import json_text
from loopsim.output.junit import junit_text
from loopsim.output.pictures import Drawing
from loopsim.output.trends import write_csv
from loopsim.study.export import suites


class RunFolder:
    """The folder of a run that is written while the run goes on: `with RunFolder(path) as folder`."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self._drawing = Drawing()

    def __enter__(self) -> RunFolder:
        self.path.mkdir(parents=True, exist_ok=True)
        self._drawing.__enter__()
        return self

    def __exit__(self, *kind: object) -> None:
        self._drawing.__exit__(*kind)

    def draw(self, judgement: Judgement) -> None:
        """Begin the picture of a scenario that has been judged."""
        figure = run_figure(judgement.scenario, judgement.strategies)
        if figure is not None:
            self._drawing.draw(figure, self.path / _stem(judgement))

    def finish(self, report: RunReport) -> dict[str, dict[str, str]]:
        """Write all that is not a picture; gives the trends' file names by title of the judgement and by strategy."""
        names = {one.title: _write_trends(one, self.path, len(report.judgements) == 1) for one in report.judgements}
        every = [one for judgement in report.judgements for one in judgement.strategies]
        (self.path / "results.json").write_text(json_text(report.json(names)) + "\n", encoding="utf-8")
        (self.path / "results.xml").write_text(junit_text(suites(every)), encoding="utf-8")
        return names


def write_run(report: RunReport, path: Path) -> dict[str, dict[str, str]]:
    """Write all files of a run that is over; gives what `RunFolder.finish` gives."""
    with RunFolder(path) as folder:
        for one in report.judgements:
            folder.draw(one)
        return folder.finish(report)


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

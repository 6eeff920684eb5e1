"""Everything of a run put into a folder: trends, pictures, JSON, a JUnit file."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from loopsim.api import RunReport
from loopsim.output.figures import run_figure
from loopsim.output.json_text import json_text
from loopsim.output.junit import junit_text
from loopsim.output.pictures import write_pictures
from loopsim.output.trends import write_csv


def write_run(report: RunReport, folder: Path) -> list[Path]:
    """Write all files of a run and name them; the JSON speaks of the trends by file name."""
    folder.mkdir(parents=True, exist_ok=True)
    written = []
    single = len(report.verdicts) == 1
    for scenario, verdicts in report.verdicts.items():
        for strategy, verdict in verdicts.items():
            if verdict.run.trends is not None:
                name = f"{strategy}.csv" if single else f"{scenario}.{strategy}.csv"
                write_csv(verdict.run.trends, folder / name, verdict.run.air_pressure)
                _named(report, scenario)["strategies"][strategy]["trend"] = name
                written.append(folder / name)
        figure = run_figure(scenario, verdicts)
        if figure is not None:
            written += write_pictures(figure, folder / scenario)
    for name, text in (("results.json", json_text(report.json)), ("results.xml", junit_text(report.verdicts))):
        (folder / name).write_text(text + "\n" if name.endswith("json") else text, encoding="utf-8")
        written.append(folder / name)
    return written


def _named(report: RunReport, scenario: str) -> dict[str, Any]:
    """The part of the JSON that speaks of a scenario."""
    parts = report.json.get("scenarios", [report.json])
    found: dict[str, Any] = next(one for one in parts if one["scenario"] == scenario)
    return found

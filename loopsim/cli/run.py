"""`loopsim run`."""

from __future__ import annotations

import os
import time
from pathlib import Path

import click

from loopsim import api
from loopsim.cli.words import CAUTION
from loopsim.output.folder import RunFolder
from loopsim.output.json_text import json_text
from loopsim.output.text import render


@click.command("run")
@click.argument("scenarios", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--strategy", default="", help="Run this strategy only.")
@click.option("--points", default="", help="Run at these operating points (NAME,…), or `all`.")
@click.option(
    "--out", type=click.Path(path_type=Path), help="Write trends (CSV), pictures, JSON and a JUnit file here."
)
@click.option("--json", "as_json", is_flag=True, help="One JSON document on standard output.")
@click.option("--interpreted", is_flag=True, help="Run without compilation; the same results, slower.")
@click.option("--cache", type=click.Path(path_type=Path), help="Where compiled plants are kept; safe to delete.")
@click.option("--patience", default=600.0, show_default=True, help="Give a run up after so many seconds of computing.")
@click.option("--timing", is_flag=True, help="Print how long it took to standard error.")
def command(
    scenarios: tuple[Path, ...],
    strategy: str,
    points: str,
    out: Path | None,
    as_json: bool,
    interpreted: bool,
    cache: Path | None,
    patience: float,
    timing: bool,
) -> int:
    """Run every strategy of the SCENARIOS (files, or folders that hold them), judge the rules, and compare.

    Leaves with 0 when every strategy under `must_pass` passed every rule, 1 when one failed or was inconclusive.
    """
    if cache is not None:
        os.environ["LOOPSIM_CACHE"] = str(cache)
    begun = time.perf_counter()
    chosen = tuple(points.split(",")) if points else ()
    written = None
    if out is not None:
        with RunFolder(out) as folder:
            report = api.run(scenarios, strategy, chosen, not interpreted, folder.draw, patience)
            written = folder.finish(report)
    else:
        report = api.run(scenarios, strategy, chosen, not interpreted, patience=patience)
    if as_json:
        click.echo(json_text(report.json(written)))
    else:
        click.echo(render(report.tables()))
        if out is not None:
            click.echo(f"Trends, pictures, results.json and results.xml are in {out}")
        click.echo(CAUTION)
    if timing:
        click.echo(f"{time.perf_counter() - begun:.2f} s", err=True)
    return report.status

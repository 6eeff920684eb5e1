"""`loopsim steady`."""

from __future__ import annotations

from pathlib import Path

import click

from loopsim import api
from loopsim.cli.words import CAUTION
from loopsim.output.json_text import json_text
from loopsim.output.text import render


@click.command("steady")
@click.argument("model", type=click.Path(path_type=Path))
@click.option(
    "--with", "strategies", multiple=True, type=click.Path(path_type=Path), help="A strategy laid over the plant."
)
@click.option("--strategy", default="", help="A scenario's strategy.")
@click.option("--points", default="", help="Operating points, separated by commas, or `all`.")
@click.option("--all", "every", is_flag=True, help="Look for other steady states too.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document on standard output.")
def command(model: Path, strategies: tuple[Path, ...], strategy: str, points: str, every: bool, as_json: bool) -> int:
    """The operating point of MODEL: every signal, limits, what keeps a set point out of reach, stability.

    MODEL is a plant file, with strategies laid over it, or a scenario.
    """
    source = api.model_source(model, strategies, strategy)
    names = source.points if points == "all" else tuple(points.split(",")) if points else ("",)
    report = api.steady(source, names, every)
    if as_json:
        click.echo(json_text(report.json))
    else:
        click.echo(render(report.tables))
        click.echo(CAUTION)
    return 0

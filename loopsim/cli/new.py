"""`loopsim new`."""

from __future__ import annotations

from importlib.resources import files
from pathlib import Path

import click

from loopsim.errors import fail
from loopsim.output.json_text import json_text


@click.command("new")
@click.argument("folder", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="One JSON document on standard output.")
def command(folder: Path, as_json: bool) -> int:
    """Make FOLDER with a small plant, a strategy and two scenarios to start from."""
    if folder.exists() and (not folder.is_dir() or any(folder.iterdir())):
        raise fail(f"'{folder}' is there already and not empty", None, "name a folder that is not there yet")
    folder.mkdir(parents=True, exist_ok=True)
    names = sorted(one.name for one in files("loopsim.cli.starter").iterdir() if one.name.endswith((".yaml", ".md")))
    for name in names:
        (folder / name).write_text((files("loopsim.cli.starter") / name).read_text("utf-8"), encoding="utf-8")
    if as_json:
        click.echo(json_text({"folder": str(folder), "files": names}))
        return 0
    click.echo(f"{folder}: " + ", ".join(names))
    click.echo(f"Now try: loopsim run {folder}")
    return 0

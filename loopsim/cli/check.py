"""`loopsim check`."""

from __future__ import annotations

from pathlib import Path

import click

from loopsim import api
from loopsim.output.json_text import json_text


@click.command("check")
@click.argument("files", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--with", "strategies", multiple=True, type=click.Path(path_type=Path), help="A strategy over a plant.")
@click.option("--code", is_flag=True, help="Print the text that is run.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document on standard output.")
def command(files: tuple[Path, ...], strategies: tuple[Path, ...], code: bool, as_json: bool) -> int:
    """Read and check FILES of any kind together; print what is wrong, all of it, or `ok`."""
    notes = api.check(files, strategies)
    texts = {str(path): api.generated_text(path, strategies) for path in files} if code else {}
    if as_json:
        click.echo(json_text({"errors": [], "notes": notes, **({"code": texts} if code else {})}))
    elif code:
        click.echo("\n".join(texts.values()))
    else:
        for note in notes:
            click.echo(note)
        click.echo("ok")
    return 0

"""`loopsim schema`."""

from __future__ import annotations

import click

from loopsim.documents.schema import json_schema
from loopsim.output.json_text import json_text


@click.command("schema")
@click.argument("kind", type=click.Choice(["block", "plant", "strategy", "scenario"]))
@click.option("--json", "as_json", is_flag=True, help="The schema is JSON with or without it.")
def command(kind: str, as_json: bool) -> int:
    """JSON Schema of the files of a KIND, for editors."""
    del as_json
    click.echo(json_text(json_schema(kind)))
    return 0

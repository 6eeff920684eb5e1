"""`loopsim blocks`."""

from __future__ import annotations

import click

from loopsim import api
from loopsim.output.json_text import json_text
from loopsim.output.text import render


@click.command("blocks")
@click.argument("name", default="")
@click.option("--json", "as_json", is_flag=True, help="One JSON document on standard output.")
def command(name: str, as_json: bool) -> int:
    """List the library, or show the block NAME: balance, checks, ports, assumptions, sources."""
    if name:
        click.echo(json_text(api.block_json(name)) if as_json else "\n".join(api.block_page(name)))
        return 0
    table = api.block_table()
    if as_json:
        rows = [[cell.text for cell in row] for row in table.rows]
        click.echo(json_text({"blocks": [dict(zip(("family", "block", "about"), row, strict=True)) for row in rows]}))
    else:
        click.echo(render([table]))
    return 0

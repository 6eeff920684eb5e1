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
    if as_json:
        click.echo(json_text(api.block_json(name) if name else {"blocks": api.blocks_json()}))
    else:
        click.echo(render(api.block_page(name) if name else [api.block_table()]))
    return 0

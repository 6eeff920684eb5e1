"""The command line: one short function a command, loaded when it is called."""

from __future__ import annotations

import importlib
import sys
import traceback
from typing import Any

import click

COMMANDS = {
    "blocks": "List the library, or show one block.",
    "check": "Read and check files; print what is wrong, all of it.",
    "steady": "The operating point of plant and controllers together.",
    "run": "Run every strategy of a scenario, judge it, compare.",
    "new": "Make a folder with a small plant to start from.",
    "schema": "JSON Schema of a kind of file, for editors.",
}


class Lazy(click.Group):
    """A group whose commands are imported when they are asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """The names, in the order of the work."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """The command of that name."""
        if cmd_name not in COMMANDS:
            return None
        command = importlib.import_module(f"loopsim.cli.{cmd_name}").command
        assert isinstance(command, click.Command)
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """The list of commands from their short texts, without importing any."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.group(cls=Lazy, context_settings={"help_option_names": ["--help"]})
@click.version_option(package_name="loopsim", message="loopsim %(version)s")
def group() -> None:
    """Decide, prove and record how heated and stirred tanks are controlled, before anything is commissioned.

    Design and training aid; not a safety system and no part of one.
    """


def main(arguments: list[str] | None = None) -> None:
    """Run a command and leave with its status: 0 done, 1 rules failed, 2 wrong input, 3 not computable."""
    sys.exit(status_of(arguments))


def status_of(arguments: list[str] | None = None) -> int:
    """The exit status of a command line."""
    words = sys.argv[1:] if arguments is None else arguments
    try:
        result: Any = group.main(words, standalone_mode=False)
        return result if isinstance(result, int) else 0
    except click.ClickException as error:
        error.show()
        return 2
    except click.exceptions.Abort:
        return 130
    except KeyboardInterrupt:
        return 130
    except SystemExit:  # click leaves so when the reader of a pipe has gone, which is no fault
        return 0
    except Exception as error:
        return _told(error, "--json" in words)


def _told(error: Exception, as_json: bool) -> int:
    """The status of an error after it has been told: located problems, or a fault of ours."""
    from loopsim.errors import ComputationError, LoopsimError, fail

    if isinstance(error, OSError) and error.filename is not None:  # the system refuses a file or a folder
        cure = "look at the name, the rights and the room on the disk"
        error = fail(f"'{error.filename}': {error.strerror}", None, cure)
    if not isinstance(error, LoopsimError):
        traceback.print_exc()
        click.echo("This is a fault of loopsim, not of your files. Please report it with the lines above.", err=True)
        return 70
    if as_json:
        from loopsim.output.json_text import json_text

        click.echo(json_text({"errors": [_problem(one) for one in error.problems]}))
    else:
        click.echo(str(error), err=True)
    return 3 if isinstance(error, ComputationError) else 2


def _problem(problem: Any) -> dict[str, Any]:
    where = problem.where
    place = (
        {"file": where.file, "line": where.line, "column": where.column}
        if where
        else dict.fromkeys(("file", "line", "column"))
    )
    return {**place, "what": problem.what, "hint": problem.hint}

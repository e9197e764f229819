"""The ``climbpath`` command: finds the module of a subcommand only when it is called."""

from __future__ import annotations

import importlib
import sys
from typing import NoReturn

import click

from climbpath import __version__
from climbpath.errors import ClimbpathError

COMMANDS = {
    "plan": ("climbpath.cli.plan", "Best sequences for one athlete on one wall."),
    "wall": ("climbpath.cli.wall", "Check, draw and convert wall files."),
    "athlete": ("climbpath.cli.athlete", "Write and show athlete files."),
}
"""Command name: (module, one-line help). The module's command object is called ``command``."""


class _LazyGroup(click.Group):
    """A group whose commands are imported when they are needed, so that help stays fast."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in COMMANDS:
            return None
        command = importlib.import_module(COMMANDS[cmd_name][0]).command
        return command if isinstance(command, click.Command) else None

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl([(name, text) for name, (_, text) in COMMANDS.items()])


@click.group(cls=_LazyGroup, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="climbpath")
def climbpath() -> None:
    """How a given body can best climb a given wall."""


def run() -> NoReturn:
    """Entry point: turns the package's errors into messages on stderr and exit codes."""
    try:
        result = climbpath.main(standalone_mode=False)
    except ClimbpathError as error:
        click.echo(f"climbpath: {error}", err=True)
        sys.exit(error.exit_code)
    except click.exceptions.Abort:
        click.echo("climbpath: interrupted", err=True)
        sys.exit(130)
    except click.ClickException as error:
        error.show()
        sys.exit(error.exit_code)
    except BrokenPipeError:
        sys.stderr.close()
        sys.exit(1)
    sys.exit(result if isinstance(result, int) else 0)

"""The ``climbpath`` command: finds the module of a subcommand only when it is called."""

from __future__ import annotations

import contextlib
import importlib
import io
import os
import sys
from typing import NoReturn

import click

from climbpath import __version__
from climbpath.errors import ClimbpathError

COMMANDS = {
    "plan": ("climbpath.cli.plan", "Best sequences for one athlete on one wall."),
    "calibrate": ("climbpath.cli.calibrate", "Fit an athlete's capacities to measured runs."),
    "evidence": ("climbpath.cli.evidence", "The model against observed finals runs."),
    "wall": ("climbpath.cli.wall", "Check, draw and convert wall files."),
    "athlete": ("climbpath.cli.athlete", "Write and show athlete files."),
}
"""Command name: (module, one-line help). The module's command object is called ``command``."""

INTERRUPTED = 130
"""Exit code after Ctrl-C: 128 and the number of the signal."""


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
    _make_output_safe()
    try:
        sys.exit(_run())
    except KeyboardInterrupt:
        # Between the blocks that catch it: while a message is being written.
        sys.exit(INTERRUPTED)


def _run() -> int:
    try:
        result = climbpath.main(standalone_mode=False)
    except ClimbpathError as error:
        _complain(str(error))
        return error.exit_code
    except (click.exceptions.Abort, KeyboardInterrupt):
        _complain("interrupted")
        return INTERRUPTED
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except MemoryError:
        _complain("this needs more memory than there is")
        return 1
    except OSError as error:
        # Input and output files raise errors of the package: what is left is standard output.
        _drop_output()
        if not isinstance(error, BrokenPipeError):
            _complain(f"standard output: {error.strerror or error}")
        return 1
    return result if isinstance(result, int) else 0


def _complain(message: str) -> None:
    """A message on stderr, a line for each problem."""
    from climbpath.cli.options import say

    for line in f"climbpath: {message}".split("\n"):
        say(line)


def _make_output_safe() -> None:
    """Let a terminal that lacks a letter be shown its code, where Python would stop."""
    if isinstance(sys.stdout, io.TextIOWrapper):
        sys.stdout.reconfigure(errors="backslashreplace")


def _drop_output() -> None:
    """Send what standard output still holds nowhere, or Python would try again when it ends."""
    if sys.stdout is not None:
        with contextlib.suppress(OSError, ValueError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())

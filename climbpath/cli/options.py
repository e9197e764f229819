"""Options that several commands share: a body from a file or from a few measurements."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any, TypeVar

import click

from climbpath.errors import DataError, Problem, UsageError

if TYPE_CHECKING:
    from climbpath.body import Athlete

Command = TypeVar("Command", bound=Callable[..., Any])

MESSAGE_WIDTH = 600
"""Longest line of a message, columns."""

BODY_OPTIONS = (
    ("--sex", click.Choice(["female", "male"]), "Sex, for the body tables."),
    ("--stature-mm", float, "Stature, mm."),
    ("--mass-kg", float, "Body mass, kg."),
    ("--span-mm", float, "Span, fingertip to fingertip, mm."),
    ("--sitting-height-mm", float, "Sitting height, mm."),
)


def body_options(function: Command) -> Command:
    """Adds --sex --stature-mm --mass-kg --span-mm --sitting-height-mm."""
    for name, kind, text in reversed(BODY_OPTIONS):
        function = click.option(name, type=kind, help=text)(function)
    return function


def athlete_options(function: Command) -> Command:
    """Adds --athlete FILE (as ``athlete_file``) and the options of ``body_options``."""
    option = click.option("--athlete", "athlete_file", metavar="FILE", help="Athlete file.")
    return option(body_options(function))


def json_option(function: Command) -> Command:
    """Adds --json (as ``json_target``)."""
    text = "Write JSON to FILE, or with - to standard output and nothing else there."
    return click.option("--json", "json_target", metavar="-|FILE", help=text)(function)


def resolve_athlete(
    athlete_file: str | None,
    sex: str | None,
    stature_mm: float | None,
    mass_kg: float | None,
    span_mm: float | None = None,
    sitting_height_mm: float | None = None,
) -> Athlete:
    """The athlete of a file, or of --sex, --stature-mm and --mass-kg with what else was measured.

    UsageError where both or neither are given, or one of the three is missing; DataError where the
    values are wrong.
    """
    from climbpath.body import make_athlete, read_athlete

    required = {"--sex": sex, "--stature-mm": stature_mm, "--mass-kg": mass_kg}
    measured = {"span": span_mm, "sitting_height": sitting_height_mm}
    by_values = any(value is not None for value in (*required.values(), *measured.values()))
    if athlete_file is not None:
        if by_values:
            raise UsageError("give an athlete file or a body by its values, not both")
        return read_athlete(athlete_file)
    if not by_values:
        raise UsageError("give an athlete file, or --sex, --stature-mm and --mass-kg")
    if sex is None or stature_mm is None or mass_kg is None:
        missing = ", ".join(name for name, value in required.items() if value is None)
        raise UsageError(f"a body by its values also needs {missing}")
    return make_athlete(
        sex=sex,
        stature=stature_mm / 1e3,
        mass=mass_kg,
        measured={name: value / 1e3 for name, value in measured.items() if value is not None},
        name=f"{sex} {stature_mm:g} mm",
    )


def write_json(document: Mapping[str, object], target: str) -> None:
    """One JSON document to a file, or to standard output for "-"."""
    from climbpath.study.document import dump_json

    write_text(dump_json(document), target)


def write_text(text: str, target: str) -> None:
    """Text to a file, or to standard output for "-"."""
    from climbpath.files import write_atomically

    if target == "-":
        click.echo(text, nl=False)
    else:
        write_atomically(target, text)


def say(message: str) -> None:
    """One line on standard error, with nothing in it that moves a cursor."""
    from climbpath.figure.names import printable

    click.echo(printable(message, MESSAGE_WIDTH), err=True)


def quiet_drawing() -> None:
    """Load matplotlib so that nothing on this machine changes a picture or adds a message.

    Settings files and MPLBACKEND do not count, and it says nothing about folders that it cannot
    write to. DataError for a settings file that cannot be read at all.
    """
    import logging
    import os

    logging.getLogger("matplotlib").setLevel(logging.CRITICAL + 1)
    os.environ.pop("MPLBACKEND", None)  # a name that it does not know would stop the import
    try:
        import matplotlib as mpl
    except (ValueError, OSError) as error:
        expected = "settings of matplotlib that can be read, or no such file"
        raise DataError([Problem("matplotlibrc", "", str(error), expected)]) from error
    mpl.rcdefaults()

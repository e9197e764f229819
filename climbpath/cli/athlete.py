"""``climbpath athlete``: write an athlete file, and show the body that follows from one."""

from __future__ import annotations

import sys
from typing import TYPE_CHECKING, Any

import click

from climbpath.cli.options import BODY_OPTIONS, body_options, json_option, say, write_json
from climbpath.cli.options import resolve_athlete as resolve
from climbpath.errors import UsageError

if TYPE_CHECKING:
    from climbpath.body import Athlete, Length

# Beyond the options of every body; names of ``climbpath.body.MEASURED_NAMES``.
MORE_MEASURES = (
    "standing_reach",
    "shoulder_height",
    "shoulder_breadth",
    "upper_arm",
    "forearm",
    "hand",
    "hand_breadth",
    "hip_height",
    "hip_breadth",
    "thigh",
    "shank",
    "ankle_height",
    "foot",
    "chest_depth",
    "pelvis_depth",
)
# What a person is asked for, in this order; the rest only by option.
REQUIRED = ("name", "sex", "stature_mm", "mass_kg")
ASKED = ("span_mm", "sitting_height_mm", "standing_reach_mm")


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
def command() -> None:
    """Write and show athlete files."""


def _measure_options(function: Any) -> Any:
    for name in reversed(MORE_MEASURES):
        label = name.replace("_", " ")
        option = f"--{name.replace('_', '-')}-mm"
        function = click.option(option, type=float, help=f"{label.capitalize()}, mm.")(function)
    return function


def _flag(key: str) -> str:
    return f"--{key.replace('_', '-')}"


def _ask(values: dict[str, Any]) -> None:
    """Fill in what the options did not give; where nobody can be asked, say what is missing."""
    missing = [key for key in REQUIRED if values.get(key) is None]
    if sys.stdin is None or not sys.stdin.isatty():
        if missing:
            raise UsageError(f"missing {', '.join(_flag(key) for key in missing)}")
        return
    kinds = {_flag_key(name): kind for name, kind, _ in BODY_OPTIONS}
    for key in missing:
        kind = kinds.get(key, str)
        values[key] = click.prompt(key.replace("_", " "), type=kind, err=True)
    for key in ASKED:
        if values.get(key) is None:
            label = f"{key.replace('_', ' ')} (Enter if not measured)"
            answer = click.prompt(label, default="", show_default=False, err=True)
            values[key] = _number(key, answer)


def _flag_key(option: str) -> str:
    return option.removeprefix("--").replace("-", "_")


def _number(key: str, answer: str) -> float | None:
    if not answer.strip():
        return None
    try:
        return float(answer)
    except ValueError:
        raise UsageError(f"{_flag(key)}: expected a number, found {answer!r}") from None


@command.command("new")
@click.argument("file")
@click.option("--name", help="Name in the file.")
@body_options
@_measure_options
@click.option("--birth-year", type=int, help="Year of birth.")
@click.option("--force", is_flag=True, help="Replace FILE if it exists.")
def new(file: str, force: bool, birth_year: int | None, **values: Any) -> None:
    """Write an athlete FILE, asking for what the options do not give."""
    import os

    from climbpath.body import MEASURED_NAMES, make_athlete, parse_athlete, write_athlete
    from climbpath.body import format_athlete as text_of

    if os.path.lexists(file) and not force:
        raise UsageError(f"{file} exists; --force replaces it")
    _ask(values)
    measured = {
        name: values[f"{name}_mm"] / 1e3
        for name in MEASURED_NAMES
        if values.get(f"{name}_mm") is not None
    }
    athlete = make_athlete(
        name=values["name"],
        sex=values["sex"],
        stature=values["stature_mm"] / 1e3,
        mass=values["mass_kg"],
        birth_year=birth_year,
        measured=measured,
    )
    parse_athlete(text_of(athlete), file)  # what is written must be readable, the name too
    write_athlete(athlete, file)
    say(f"wrote {file}")
    for caution in _cautions(athlete):
        say(f"caution: {caution}")


@command.command("show")
@click.argument("file", required=False)
@body_options
@json_option
def show(file: str | None, json_target: str | None, **values: Any) -> None:
    """Show the body of an athlete FILE, or of the values given."""
    athlete = resolve(file, **values)
    cautions = _cautions(athlete)
    if json_target is not None:
        write_json(_document(athlete, cautions), json_target)
    if json_target != "-":
        click.echo("\n".join(_lines(athlete)))
        for caution in cautions:
            click.echo(f"caution: {caution}")


def _cautions(athlete: Athlete) -> list[str]:
    import datetime

    from climbpath.body import growth_caution

    growing = growth_caution(athlete, datetime.date.today().year)
    return [*([growing] if growing else []), *athlete.cautions]


def _length_line(name: str, length: Length) -> str:
    numbers = f"{length.value * 1e3:6.0f} {length.sd * 1e3:6.0f}"
    return f"{name.replace('_', ' '):<20} {numbers}  {length.source}"


def _lines(athlete: Athlete) -> list[str]:
    from climbpath.body import LENGTH_NAMES, segment_table

    heading = f"{'mm':>6} {'± mm':>6}  source"
    lines = [
        f"{athlete.name}: {athlete.sex}, {athlete.stature * 1e3:.0f} mm, {athlete.mass:.1f} kg",
        "",
        f"{'length':<20} {heading}",
        *(_length_line(name, athlete.lengths[name]) for name in LENGTH_NAMES),
        "",
        f"{'follows':<20} {heading}",
        *(_length_line(name, length) for name, length in athlete.reaches.items()),
    ]
    lines += ["", f"{'segment':<20} {'mass %':>6} {'CoM %':>6}"]
    table = segment_table(athlete)
    for name, mass, centre in zip(table.names, table.mass_fraction, table.cm_fraction, strict=True):
        # Left and right are alike: one line for both.
        if not name.endswith("_R"):
            label = name.removesuffix("_L").replace("_", " ")
            label += ", each" if name.endswith("_L") else ""
            lines.append(f"{label:<20} {mass * 100:6.2f} {centre * 100:6.1f}")
    return lines


def _length_entry(name: str, length: Length) -> dict[str, Any]:
    return {
        "length": name,
        "value_mm": round(length.value * 1e3, 1),
        "sd_mm": round(length.sd * 1e3, 1),
        "source": length.source,
    }


def _document(athlete: Athlete, cautions: list[str]) -> dict[str, Any]:
    from math import degrees

    from climbpath.body import LENGTH_NAMES, segment_table

    table = segment_table(athlete)
    return {
        "schema": "climbpath/body/1",
        "name": athlete.name,
        "sex": athlete.sex,
        "stature_mm": round(athlete.stature * 1e3, 3),
        "mass_kg": round(athlete.mass, 3),
        "birth_year": athlete.birth_year,
        "mass_table": athlete.mass_table,
        "lengths": [_length_entry(name, athlete.lengths[name]) for name in LENGTH_NAMES],
        "reaches": [_length_entry(name, length) for name, length in athlete.reaches.items()],
        "segments": [
            {
                "segment": name,
                "mass_share": round(float(mass), 5),
                "com_share": round(float(centre), 4),
            }
            for name, mass, centre in zip(
                table.names, table.mass_fraction, table.cm_fraction, strict=True
            )
        ],
        "ranges": {f"{key}_deg": round(degrees(v), 3) for key, v in athlete.ranges.items()},
        "capacity": dict(athlete.capacity),
        "cautions": cautions,
    }

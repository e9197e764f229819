"""``climbpath wall``: check, draw and convert wall files."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from climbpath.errors import Problem
    from climbpath.wall.model import Wall
    from climbpath.wall.table import TableFrame

TABLE_OPTIONS = ("width_mm", "height_mm", "start")
"""What a table of holds cannot say itself and has no default."""


@click.group(help="Check, draw and convert wall files.")
def command() -> None:
    """The group of the wall commands."""


@command.command("check", short_help="Check wall files.")
@click.argument("files", nargs=-1, required=True, metavar="FILE...")
def check(files: tuple[str, ...]) -> None:
    """Check wall files and print every problem of each; one line for each good one."""
    from climbpath.errors import DataError
    from climbpath.figure.names import printable
    from climbpath.wall import read_wall

    problems: list[Problem] = []
    for name in files:
        try:
            wall = read_wall(name)
        except DataError as error:
            problems += error.problems
        else:
            click.echo(f"{printable(name, 200)}: {summary(wall)}")
    if problems:
        raise DataError(problems)


@command.command("show", short_help="Draw a wall.")
@click.argument("file")
@click.option("--out", required=True, metavar="FILE", help="Picture to write: .png, .svg or .pdf.")
@click.option("--lane", metavar="ID", help="Draw this lane's holds and line alone.")
def show(file: str, out: str, lane: str | None) -> None:
    """Draw a wall: holds, line, sections, floor and hole grid."""
    from climbpath.cli.options import quiet_drawing, say
    from climbpath.errors import UsageError
    from climbpath.figure.save import figure_format, save_figure
    from climbpath.figure.wall import wall_figure
    from climbpath.wall import read_wall

    figure_format(out)
    wall = read_wall(file)
    if lane is not None:
        names = [one.id for one in wall.lanes]
        if lane not in names:
            known = ", ".join(names) or "none"
            raise UsageError(f"{file}: expected a lane of the wall ({known}), found {lane!r}")
        wall = wall.lane_view(lane)
    quiet_drawing()
    save_figure(wall_figure(wall), out)
    say(f"wrote {out}")


@command.command("convert", short_help="Convert wall files and tables of holds.")
@click.argument("source", metavar="IN")
@click.argument("target", metavar="OUT")
@click.option("--mirror", "mirrored", is_flag=True, help="Swap left and right.")
@click.option(
    "--unit",
    type=click.Choice(["mm", "cm", "m"]),
    help="Length unit of a table (default mm), or of the file to write.",
)
@click.option("--width-mm", type=float, help="For a table: width of the wall.")
@click.option("--height-mm", type=float, help="For a table: height along the surface.")
@click.option("--overhang-deg", type=float, help="For a table: overhang, default 0.")
@click.option("--floor-y-mm", type=float, help="For a table: the ground, default 0.")
@click.option("--line-x-mm", metavar="X|fit", help="For a table: the line, default the middle.")
@click.option("--grid-mm", metavar="X0,Y0,PITCH", help="For a table: the hole grid.")
@click.option("--name", help="For a table: name of the wall, default the file's.")
@click.option(
    "--start",
    multiple=True,
    metavar="LH=1,RH=1|2",
    help="For a table: an allowed start; a hand left out is free, a foot left out on the floor. "
    "May be repeated.",
)
@click.option(
    "--finish",
    multiple=True,
    metavar="ID",
    help="For a table: a hold that ends the climb, default all of use strike. May be repeated.",
)
@click.option(
    "--separator",
    type=click.Choice([",", ";", "tab"]),
    default=",",
    help="Between the cells of a table that is written.",
)
def convert(
    source: str,
    target: str,
    mirrored: bool,
    unit: str | None,
    separator: str,
    **table_options: object,
) -> None:
    """Convert between wall files (.toml) and tables of holds (.csv), by the names' endings.

    Sections, starts and finish are no part of a table: they come from the options when one is
    read, and are left out when one is written.
    """
    from dataclasses import replace

    from climbpath.cli.options import say
    from climbpath.errors import UsageError
    from climbpath.wall import mirror, read_wall, write_wall
    from climbpath.wall.table import read_table, write_table

    kinds = [_kind(name) for name in (source, target)]
    given = {key for key, value in table_options.items() if value not in (None, ())}
    if kinds[0] == "csv":
        missing = [key for key in TABLE_OPTIONS if key not in given]
        if missing:
            names = ", ".join(_option(key) for key in missing)
            raise UsageError(f"{source}: a table of holds needs {names} as well")
        wall = read_table(source, _frame(source, unit or "mm", table_options))
    else:
        if given:
            names = ", ".join(sorted(_option(key) for key in given))
            raise UsageError(f"{source}: {names} only serve to read a table (.csv)")
        wall = read_wall(source)
        wall = replace(wall, unit=unit or wall.unit)
    if mirrored:
        wall = mirror(wall)
    if kinds[1] == "csv":
        write_table(wall, target, "\t" if separator == "tab" else separator)
    else:
        write_wall(wall, target)
    say(f"wrote {target}: {summary(wall)}")


def summary(wall: Wall) -> str:
    """One line on a wall."""
    import math

    overhangs = ", ".join(f"{math.degrees(part.overhang):.3g}°" for part in wall.sections)
    counts = {
        "hand": sum(hold.use in ("hand", "both") for hold in wall.holds),
        "foot": sum(hold.use == "foot" for hold in wall.holds),
        "finish pad": sum(hold.use == "strike" for hold in wall.holds),
    }
    holds = ", ".join(f"{count} {use}" for use, count in counts.items() if count)
    lanes = f", {len(wall.lanes)} lanes" if wall.lanes else ""
    size = f"{wall.width:.6g} x {wall.height:.6g} m"
    return f"{wall.name}: {size}, overhang {overhangs}, holds: {holds}{lanes}"


def _option(key: str) -> str:
    return "--" + key.replace("_", "-")


def _kind(name: str) -> str:
    from pathlib import Path

    from climbpath.errors import UsageError

    ending = Path(name).suffix.lower()
    if ending not in (".toml", ".csv"):
        raise UsageError(f"{name}: expected a name ending in .toml or .csv")
    return ending[1:]


def _frame(source: str, unit: str, options: dict[str, object]) -> TableFrame:
    """The options of a table in the table's unit."""
    from pathlib import Path
    from typing import Any

    from climbpath.errors import UsageError
    from climbpath.wall.reading import UNITS
    from climbpath.wall.table import TableFrame, parse_start

    given: dict[str, Any] = {key: value for key, value in options.items() if value is not None}

    def length(mm: float) -> float:
        return mm / 1000.0 * UNITS[unit]

    grid = None
    line_x: float | str | None = given.get("line_x_mm")
    try:
        if line_x is not None and line_x != "fit":
            line_x = length(float(line_x))
        if "grid_mm" in given:
            x0, y0, pitch = (length(float(part)) for part in given["grid_mm"].split(","))
            grid = (x0, y0, pitch)
    except ValueError:
        raise UsageError(
            "expected a number or fit for --line-x-mm, three numbers for --grid-mm"
        ) from None
    return TableFrame(
        name=given.get("name", Path(source).stem),
        width=length(given["width_mm"]),
        height=length(given["height_mm"]),
        overhang_deg=given.get("overhang_deg", 0.0),
        unit=unit,
        floor_y=length(given.get("floor_y_mm", 0.0)),
        line_x=line_x,
        starts=tuple(parse_start(text) for text in given["start"]),
        finish=tuple(given["finish"]),
        grid=grid,
    )

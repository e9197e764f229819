"""``climbpath calibrate``: an athlete's capacities, fitted to measured runs."""

from __future__ import annotations

import os
from typing import TYPE_CHECKING

import click

from climbpath.cli.options import json_option, say, write_text
from climbpath.errors import UsageError

if TYPE_CHECKING:
    from climbpath.study.calibrate import Calibration


@click.command("calibrate", short_help="Fit an athlete's capacities to measured runs.")
@click.argument("wall_file", metavar="WALL")
@click.argument("runs_file", metavar="RUNS")
@click.option("--athlete", "athlete_file", metavar="FILE", required=True, help="Athlete file.")
@click.option("--lane", metavar="ID", help="The lane that was climbed, on a wall that has lanes.")
@click.option(
    "--out",
    metavar="FILE",
    help="Write the athlete with the fitted [capacity] table to FILE, which is replaced. "
    "Default: the name of the athlete file with _fitted, in this folder, if nothing is there.",
)
@json_option
@click.option(
    "--bootstrap",
    type=click.IntRange(50, 10_000),
    default=500,
    show_default=True,
    metavar="N",
    help="Refits for the intervals, 50 to 10000. They cost little.",
)
@click.option(
    "--seed", type=click.IntRange(min=0), default=0, show_default=True, metavar="N",
    help="Of what is drawn at random for the intervals.",
)
def command(
    wall_file: str, runs_file: str, athlete_file: str, lane: str | None, out: str | None,
    json_target: str | None, bootstrap: int, seed: int,
) -> None:
    """Fit an athlete's capacities to the measured runs of a file.

    RUNS is a sequence file: contact_s of hand placements are splits, a row with limb "total" is
    a total time. Runs whose note says fell or slipped are left out. A table goes to standard
    output, or with --json - the JSON document alone; everything else to standard error.
    """
    from datetime import date

    from climbpath.body import read_athlete
    from climbpath.cli.plan import chosen_lane
    from climbpath.cli.progress import Progress
    from climbpath.study.calibrate import CalibrateRequest, calibrate
    from climbpath.study.sequence import read_sequences
    from climbpath.wall import read_wall

    if json_target == "":
        raise UsageError("--json: expected a name, found an empty text")
    target = _target(athlete_file, out)
    athlete = read_athlete(athlete_file)
    wall = chosen_lane(read_wall(wall_file), wall_file, lane)
    runs = read_sequences(runs_file)
    request = CalibrateRequest(draws=bootstrap, seed=seed, file=runs_file)
    with Progress() as progress:
        result = calibrate(wall, athlete, runs, request, progress, date.today().year)
    _write(result, target, json_target)


def _target(athlete_file: str, out: str | None) -> str:
    """Where the fitted athlete goes; UsageError where that would replace what nobody named."""
    if out is None:
        stem, kind = os.path.splitext(os.path.basename(athlete_file))
        out = f"{stem}_fitted{kind}"
        if os.path.lexists(out):
            raise UsageError(f"{out} exists; --out {out} replaces it")
    if out in ("", "-"):
        raise UsageError(f"--out: expected the name of a file, found {out!r}")
    if os.path.isdir(out):
        raise UsageError(f"--out: expected a file, and {out!r} is a folder")
    return out


def _write(result: Calibration, target: str, json_target: str | None) -> None:
    """Everything that is asked for: documents are made before the first file is written."""
    from climbpath.body import write_athlete
    from climbpath.figure.calibration_table import calibration_table
    from climbpath.study.calibration_document import calibration_document
    from climbpath.study.document import dump_json

    document = dump_json(calibration_document(result))
    table = calibration_table(result)
    write_athlete(result.athlete, target)
    say(f"wrote {target}")
    if json_target is not None:
        write_text(document, json_target)
        if json_target != "-":
            say(f"wrote {json_target}")
    if json_target != "-":
        click.echo(table, nl=False)

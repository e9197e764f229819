"""``climbpath plan``: the best sequences for one athlete on one wall."""

from __future__ import annotations

import os
from typing import TYPE_CHECKING, Any

import click

from climbpath.cli.options import athlete_options, json_option, resolve_athlete, say, write_text
from climbpath.errors import DataError, NoWayUpError, Problem, UsageError

if TYPE_CHECKING:
    from climbpath.study.climb import Conditions
    from climbpath.study.plan import PlanRequest
    from climbpath.study.results import PlanResult
    from climbpath.study.sequence import Sequence
    from climbpath.wall import Wall

AIMS = ("time", "straight", "both", "narrow")
MAX_LINE_WEIGHT = 10_000.0
"""Largest line weight: costs stay exact, and time has long ceased to count."""
BODY_KEYS = ("athlete_file", "sex", "stature_mm", "mass_kg", "span_mm", "sitting_height_mm")


@click.command("plan", short_help="Best sequences for one athlete on one wall.")
@click.argument("wall_file", metavar="WALL")
@athlete_options
@click.option(
    "--favour",
    type=click.Choice(AIMS),
    default="time",
    show_default=True,
    help="Least time; least lateral area; both weighted; or least greatest distance from the line.",
)
@click.option(
    "--line-weight",
    type=float,
    metavar="W",
    help="With --favour both: seconds that one metre-second of lateral area counts as, default 1.",
)
@click.option(
    "--alternatives",
    type=click.IntRange(1, 20),
    default=1,
    show_default=True,
    metavar="K",
    help="How many different sequences to look for, the best one included, 1 to 20.",
)
@click.option("--include", multiple=True, metavar="ID", help="A hold to touch. May be repeated.")
@click.option("--avoid", multiple=True, metavar="ID", help="A hold to leave out. May be repeated.")
@click.option(
    "--hand", multiple=True, metavar="LH=ID", help="This hand on that hold. May be repeated."
)
@click.option("--opening", metavar="FILE", help="A sequence file with the first placements.")
@click.option("--no-flights", is_flag=True, help="No moves without support.")
@click.option("--no-matching", is_flag=True, help="No hold with both hands or both feet at once.")
@click.option("--no-smears", is_flag=True, help="No feet on the bare surface.")
@click.option("--lane", metavar="ID", help="The lane to climb, on a wall that has lanes.")
@click.option("--refine", is_flag=True, help="Solve again more finely and state the step error.")
@click.option("--polish", is_flag=True, help="Smooth the path and its pace, the contacts kept.")
@click.option("--trade-off", is_flag=True, help="Also list trade-offs of time and straightness.")
@json_option
@click.option(
    "--out",
    metavar="DIR",
    help="Write plan.json, plan.txt, plan.csv and overlays (.png, .svg, .pdf) to DIR.",
)
@click.option(
    "--seed",
    type=click.IntRange(min=0),
    metavar="N",
    help="Accepted and not used yet: a plan draws nothing at random.",
)
def command(
    wall_file: str, json_target: str | None, out: str | None, seed: int | None, **options: Any
) -> None:
    """Find the best sequences for one athlete on the wall of a file.

    The athlete comes from --athlete, or from --sex, --stature-mm and --mass-kg. The table goes to
    standard output, or with --json - the JSON document alone; everything else to standard error.
    Exit code 3: there is no way up; what is written says why.
    """
    from datetime import date

    from climbpath.cli.progress import Progress
    from climbpath.study.plan import plan
    from climbpath.wall import read_wall

    _check_options(options, json_target, out)
    hands = _hands(options["hand"])
    athlete = resolve_athlete(**{key: options[key] for key in BODY_KEYS})
    wall = chosen_lane(read_wall(wall_file), wall_file, options["lane"])
    opening = None
    if options["opening"] is not None:
        opening = _opening(options["opening"], wall)
    request = _request(options, hands, opening)
    with Progress() as progress:
        result = plan(wall, athlete, request, progress=progress, this_year=date.today().year)
    _write(result, wall, json_target, out)
    if not result.plans:
        raise NoWayUpError(_no_way_up(result))


def _check_options(options: dict[str, Any], json_target: str | None, out: str | None) -> None:
    """UsageError that names every option that makes no sense, before any file is read."""
    wrong = []
    weight = options["line_weight"]
    if weight is not None:
        if not 0.0 <= weight <= MAX_LINE_WEIGHT:
            bounds = f"0 to {MAX_LINE_WEIGHT:g}"
            wrong.append(f"--line-weight: expected a number from {bounds}, found {weight:g}")
        if options["favour"] != "both":
            wrong.append(f"--line-weight needs --favour both, found {options['favour']}")
    for text in options["hand"]:
        limb, _, hold_id = text.partition("=")
        if limb not in ("LH", "RH") or not hold_id:
            wrong.append(f"--hand: expected LH=ID or RH=ID, found {text!r}")
    for name, target in (("--json", json_target), ("--out", out)):
        if target == "":
            wrong.append(f"{name}: expected a name, found an empty text")
    if out and os.path.lexists(out) and not os.path.isdir(out):
        wrong.append(f"--out: expected a folder, and {out!r} is none")
    if wrong:
        raise UsageError("\n".join(wrong))


def _hands(texts: tuple[str, ...]) -> tuple[tuple[str, str], ...]:
    """Limb and hold id of each --hand; ids may hold an equals sign themselves."""
    parts = (text.partition("=") for text in texts)
    return tuple(dict.fromkeys((limb, hold_id) for limb, _, hold_id in parts))


def chosen_lane(wall: Wall, file: str, lane: str | None) -> Wall:
    """The wall as it is climbed; UsageError for a lane it has not, or where one must be named."""
    names = ", ".join(one.id for one in wall.lanes) or "none"
    if lane is not None:
        if lane not in [one.id for one in wall.lanes]:
            raise UsageError(f"{file}: expected a lane of the wall ({names}), found {lane!r}")
        return wall.lane_view(lane)
    if wall.lanes and not (wall.starts and wall.finish):
        raise UsageError(
            f"{file}: only its lanes have a start and a finish; choose one by --lane ({names})"
        )
    return wall


def _opening(file: str, wall: Wall) -> Sequence:
    """The one sequence of a file; DataError where it has more or names holds the wall has not."""
    from climbpath.study.sequence import read_sequences, unknown_holds

    sequences = read_sequences(file)
    if len(sequences) > 1:
        raise DataError([Problem(file, "run", f"{len(sequences)} runs", "a single sequence")])
    unknown = unknown_holds(sequences[0], frozenset(hold.id for hold in wall.holds))
    if unknown:
        raise DataError(
            Problem(file, "hold", repr(name), "a hold of the wall or of its lane")
            for name in unknown
        )
    return sequences[0]


def _request(
    options: dict[str, Any], hands: tuple[tuple[str, str], ...], opening: Sequence | None
) -> PlanRequest:
    from climbpath.study.climb import Conditions
    from climbpath.study.plan import LINE_WEIGHT, PlanRequest

    weight = options["line_weight"]
    conditions: Conditions = Conditions(
        include=tuple(dict.fromkeys(options["include"])),
        avoid=tuple(dict.fromkeys(options["avoid"])),
        hands=hands,
        opening=opening,
        flights=not options["no_flights"],
        matching=not options["no_matching"],
        smears=not options["no_smears"],
    )
    return PlanRequest(
        aim=options["favour"],
        line_weight=LINE_WEIGHT if weight is None else weight,
        alternatives=options["alternatives"],
        conditions=conditions,
        refine=options["refine"],
        trade_off=options["trade_off"],
        polish=options["polish"],
    )


def _write(result: PlanResult, wall: Wall, json_target: str | None, out: str | None) -> None:
    """Everything that is asked for: documents are made before the first file is written."""
    from climbpath.cli.plan_files import plan_files, write_files
    from climbpath.figure.table import plan_table
    from climbpath.study.document import dump_json, plan_document

    document = dump_json(plan_document(result))
    table = plan_table(result)
    files = {} if out is None else plan_files(result, wall, document, table)
    if out is not None:
        write_files(files, out)
        say(f"wrote to {out}: {', '.join(files)}")
    if json_target is not None:
        write_text(document, json_target)
        if json_target != "-":
            say(f"wrote {json_target}")
    if json_target != "-":
        click.echo(table, nl=False)


def _no_way_up(result: PlanResult) -> str:
    from climbpath.figure.table import why_not_lines

    if result.why_not is None:
        return f"{result.wall_name}: no way up"
    return " ".join(line.strip() for line in why_not_lines(result.why_not))

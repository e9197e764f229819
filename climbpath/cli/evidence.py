"""``climbpath evidence``: the model against the hand holds that finals athletes used."""

from __future__ import annotations

import os
from typing import TYPE_CHECKING

import click

from climbpath.cli.options import json_option, say, write_text
from climbpath.errors import UsageError

if TYPE_CHECKING:
    from climbpath.study.evidence_results import Evidence

MAX_BODIES = 10_000
MAX_LAYOUTS = 1_000
MAX_JOBS = 61
"""Bounds that keep a slip of the finger from running for weeks."""


@click.command("evidence", short_help="The model against observed finals runs.")
@click.option(
    "--bodies",
    type=click.IntRange(1, MAX_BODIES),
    default=200,
    show_default=True,
    metavar="N",
    help="Bodies of each sex on the lane without foot holds.",
)
@click.option(
    "--layouts",
    type=click.IntRange(0, MAX_LAYOUTS),
    default=20,
    show_default=True,
    metavar="N",
    help="Random layouts of foot holds.",
)
@click.option(
    "--layout-bodies",
    type=click.IntRange(1, MAX_BODIES),
    default=12,
    show_default=True,
    metavar="N",
    help="Bodies of each sex on each layout.",
)
@click.option(
    "--seed", type=click.IntRange(min=0), default=0, show_default=True, metavar="N",
    help="Same seed, same bodies and layouts.",
)
@click.option(
    "--jobs",
    type=click.IntRange(1, MAX_JOBS),
    metavar="N",
    help="Processes that share the work; default all cores. The result does not depend on it.",
)
@json_option
@click.option(
    "--out",
    metavar="DIR",
    help="Write evidence.json, evidence.txt and the figure (.png, .svg, .pdf) to DIR.",
)
def command(
    bodies: int, layouts: int, layout_bodies: int, seed: int, jobs: int | None,
    json_target: str | None, out: str | None,
) -> None:  # fmt: skip
    """Compare the model with championship finals on the published 15 m lane.

    Draws finals athletes' bodies, plans each one's fastest way, and compares how often each of the
    20 hand holds is used, and the times, with the observed runs. As the lane's foot holds are
    unknown, everything is repeated with random ones. The table goes to standard output, or with
    --json - the JSON document alone; everything else to standard error.
    """
    from climbpath.cli.progress import Progress
    from climbpath.study.evidence import evidence, worker_pool
    from climbpath.study.evidence_results import EvidenceRequest

    _check_targets(json_target, out)
    request = EvidenceRequest(bodies, layouts, layout_bodies, seed)
    with Progress() as progress, worker_pool(jobs) as pool:
        result = evidence(request, pool, progress)
    _write(result, json_target, out)


def _check_targets(json_target: str | None, out: str | None) -> None:
    """UsageError for targets that cannot be, before the long work begins."""
    wrong = [f"{name}: expected a name, found an empty text"
             for name, target in (("--json", json_target), ("--out", out)) if target == ""]
    if out and os.path.lexists(out) and not os.path.isdir(out):
        wrong.append(f"--out: expected a folder, and {out!r} is none")
    if wrong:
        raise UsageError("\n".join(wrong))


def _write(result: Evidence, json_target: str | None, out: str | None) -> None:
    """Everything that is asked for: documents are made before the first file is written."""
    from climbpath.cli.plan_files import write_files
    from climbpath.figure.evidence_table import evidence_table
    from climbpath.study.document import dump_json
    from climbpath.study.evidence_document import evidence_document

    document = dump_json(evidence_document(result))
    table = evidence_table(result)
    if out is not None:
        files = _files(result, document, table)
        write_files(files, out)
        say(f"wrote to {out}: {', '.join(files)}")
    if json_target is not None:
        write_text(document, json_target)
        if json_target != "-":
            say(f"wrote {json_target}")
    if json_target != "-":
        click.echo(table, nl=False)


def _files(result: Evidence, document: str, table: str) -> dict[str, bytes | str]:
    from climbpath.cli.options import quiet_drawing
    from climbpath.figure.save import FORMATS, figure_bytes

    quiet_drawing()
    from climbpath.figure.evidence import evidence_figure

    files: dict[str, bytes | str] = {"evidence.json": document, "evidence.txt": table}
    figure = evidence_figure(result)
    for kind in FORMATS:
        files[f"evidence.{kind}"] = figure_bytes(figure, kind)
    return files

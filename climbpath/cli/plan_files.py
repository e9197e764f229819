"""The files of one plan: made in memory first, so that nothing half-done is left on a failure."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING

from climbpath.errors import DataError, Problem

if TYPE_CHECKING:
    from climbpath.study.results import PlanResult
    from climbpath.wall import Wall


def plan_files(
    result: PlanResult, wall: Wall, document: str, table: str
) -> dict[str, bytes | str]:
    """Contents by file name. Plan 1 is drawn as ``overlay``, the others as ``overlay-2`` on.

    Without a plan there are only the document and the table.
    """
    from climbpath.cli.options import quiet_drawing
    from climbpath.figure.overlay import overlay_figure
    from climbpath.figure.save import FORMATS, figure_bytes
    from climbpath.study.sequence import format_plan

    files: dict[str, bytes | str] = {"plan.json": document, "plan.txt": table}
    if not result.plans:
        return files
    files["plan.csv"] = format_plan(result.plans[0])
    quiet_drawing()
    for plan in result.plans:
        stem = "overlay" if plan.rank == 1 else f"overlay-{plan.rank}"
        figure = overlay_figure(result, plan, wall)
        for kind in FORMATS:
            files[f"{stem}.{kind}"] = figure_bytes(figure, kind)
    return files


def write_files(files: Mapping[str, bytes | str], folder: str) -> None:
    """Write all files into a folder, which is made if absent. DataError if that cannot be done."""
    from climbpath.files import write_atomically

    try:
        Path(folder).mkdir(parents=True, exist_ok=True)
    except OSError as error:
        reason = error.strerror or str(error)
        raise DataError([Problem(folder, "", reason, "a folder that can be made")]) from error
    for name, content in files.items():
        write_atomically(Path(folder) / name, content)

"""Sequences and runs as tables: one row a placement, read from and written to CSV.

Columns: run, step, limb, hold, contact_s, release_s, x_mm, y_mm, note. ``run`` may be left out for
a single sequence; step 0 is the start; the rows of one step happen together; ``hold`` is an id,
"floor", "free" or "smear". A row whose limb is "total" gives only a finish time.
"""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Mapping
from dataclasses import dataclass

from climbpath.contacts import CONTACT_CODES, LIMB_NAMES
from climbpath.errors import DataError, Problem
from climbpath.files import read_text
from climbpath.study.results import Plan

COLUMNS = ("run", "step", "limb", "hold", "contact_s", "release_s", "x_mm", "y_mm", "note")
MAX_ROWS = 100_000


@dataclass(frozen=True)
class Placement:
    """One limb's contact in one step. Times in s since the start signal, None where not given."""

    limb: str
    hold: str
    contact_s: float | None = None
    release_s: float | None = None


@dataclass(frozen=True)
class Sequence:
    """One run: its name, its placements step by step (step 0 first), and its total time, if any."""

    run: str
    steps: tuple[tuple[Placement, ...], ...]
    total_s: float | None = None
    note: str = ""


def read_sequences(path: str) -> tuple[Sequence, ...]:
    """All runs of a file. DataError with every problem of the table."""
    return parse_sequences(read_text(path), path)


def parse_sequences(text: str, file: str = "") -> tuple[Sequence, ...]:
    """All runs of a table given as text, in the order they first appear."""
    problems: list[Problem] = []
    try:
        rows = list(csv.reader(io.StringIO(text), strict=True))
    except csv.Error as error:
        wrong = Problem(file, "", str(error), "a table of comma-separated values")
        raise DataError([wrong]) from None
    if not rows:
        raise DataError([Problem(file, "", "an empty file", "a header line and rows")])
    header = [name.strip() for name in rows[0]]
    for name in header:
        if name not in COLUMNS:
            wanted = "one of " + ", ".join(COLUMNS)
            problems.append(Problem(file, "line 1", f"column {name!r}", wanted))
    for name in ("step", "limb", "hold"):
        if name not in header:
            problems.append(Problem(file, "line 1", "", f"a column {name}"))
    if len(rows) - 1 > MAX_ROWS:
        problems.append(Problem(file, "", f"{len(rows) - 1} rows", f"at most {MAX_ROWS}"))
    if problems:
        raise DataError(problems)
    runs: dict[str, dict[int, list[Placement]]] = {}
    totals: dict[str, float] = {}
    notes: dict[str, str] = {}
    for number, cells in enumerate(rows[1:], start=2):
        if not any(cell.strip() for cell in cells):
            continue
        if len(cells) != len(header):
            problems.append(
                Problem(file, f"line {number}", f"{len(cells)} cells", f"{len(header)} cells")
            )
            continue
        _take_row(file, number, dict(zip(header, (c.strip() for c in cells), strict=True)),
                  runs, totals, notes, problems)
    result = [
        _assembled(file, run, steps, totals.get(run), notes.get(run, ""), problems)
        for run, steps in runs.items()
    ]
    if not result and not problems:
        problems.append(Problem(file, "", "no rows", "at least one placement"))
    if problems:
        raise DataError(problems)
    return tuple(result)


def _take_row(
    file: str, number: int, row: Mapping[str, str], runs: dict[str, dict[int, list[Placement]]],
    totals: dict[str, float], notes: dict[str, str], problems: list[Problem],
) -> None:
    place = f"line {number}"
    run, limb, hold = row.get("run", ""), row["limb"], row["hold"]
    steps = runs.setdefault(run, {})
    contact = _seconds(file, place, "contact_s", row, problems)
    release = _seconds(file, place, "release_s", row, problems)
    if row.get("note"):
        notes[run] = row["note"]
    if limb == "total":
        if contact is None:
            problems.append(Problem(file, f"{place} contact_s", "", "the total time in seconds"))
        else:
            totals[run] = contact
        return
    if limb not in LIMB_NAMES:
        wanted = ", ".join((*LIMB_NAMES, "total"))
        problems.append(Problem(file, f"{place} limb", repr(limb), f"one of {wanted}"))
    if not hold:
        problems.append(Problem(file, f"{place} hold", "", "a hold id, floor, free or smear"))
    if limb in ("LH", "RH") and hold in ("floor", "smear"):
        problems.append(Problem(file, f"{place} hold", repr(hold), "a hold id or free for a hand"))
    if not row["step"].isascii() or not row["step"].isdigit() or len(row["step"]) > 6:
        problems.append(Problem(file, f"{place} step", repr(row["step"]), "a whole number from 0"))
        return
    placements = steps.setdefault(int(row["step"]), [])
    if any(placed.limb == limb for placed in placements):
        found = f"{limb} twice in step {row['step']}"
        problems.append(Problem(file, place, found, "one row a limb"))
    placements.append(Placement(limb, hold, contact, release))


def _seconds(file: str, place: str, key: str, row: Mapping[str, str], problems: list[Problem]
             ) -> float | None:
    text = row.get(key, "")
    if not text:
        return None
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value) or not 0.0 <= value < 1e5:
        problems.append(Problem(file, f"{place} {key}", repr(text), "seconds, 0 or more"))
        return None
    return value


def _assembled(
    file: str, run: str, steps: dict[int, list[Placement]], total: float | None, note: str,
    problems: list[Problem],
) -> Sequence:
    numbers = sorted(steps)
    if numbers and numbers != list(range(numbers[0], numbers[0] + len(numbers))):
        name = f"run {run}" if run else "steps"
        problems.append(Problem(file, name, "gaps in the numbering", "steps one after another"))
    if numbers and numbers[0] > 1:
        problems.append(Problem(file, f"run {run}" if run else "steps", f"first step {numbers[0]}",
                                "step 0 (the start) or 1 first"))
    listed = [tuple(steps[number]) for number in numbers]
    if numbers and numbers[0] == 1:
        listed.insert(0, ())
    return Sequence(run, tuple(listed), total, note)


def format_plan(plan: Plan, run: str = "plan") -> str:
    """A plan as a sequence table: the start's contacts, then what each step moved."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(COLUMNS[:8])
    for step in plan.steps:
        limbs = LIMB_NAMES if step.step == 0 else step.moved
        for limb in limbs:
            point = step.points_mm.get(limb)
            place = (f"{point[0]:.1f}", f"{point[1]:.1f}") if point else ("", "")
            writer.writerow([run, step.step, limb, step.contacts[limb], f"{step.time_s:.6f}", "",
                             *place])
    return out.getvalue()


def unknown_holds(sequence: Sequence, ids: frozenset[str]) -> tuple[str, ...]:
    """Hold ids of a sequence that a wall with ``ids`` has not, in order of appearance."""
    names = [p.hold for step in sequence.steps for p in step]
    return tuple(dict.fromkeys(n for n in names if n not in ids and n not in CONTACT_CODES))

"""Sequences and runs as tables: one row a placement, read from and written to CSV.

Columns: run, step, limb, hold, contact_s, release_s, x_mm, y_mm, note. ``run`` may be left out for
a single sequence; step 0 is the start; the rows of one step happen together; ``hold`` is an id,
"floor", "free" or "smear". A row whose limb is "total" gives only a finish time.
"""

from __future__ import annotations

import csv
import io
import math
from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass, field

from climbpath.contacts import CONTACT_CODES, LIMB_NAMES
from climbpath.files import read_text
from climbpath.study.results import Plan
from climbpath.wall.checking import Checker, has_control, shown

COLUMNS = ("run", "step", "limb", "hold", "contact_s", "release_s", "x_mm", "y_mm", "note")
MAX_ROWS = 100_000
SECONDS = (0.0, 1e5, "seconds, 0 or more")
MILLIMETRES = (-1e6, 1e6, "millimetres")
"""Bounds of the numbers of a table, and what a message says is expected."""


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
    check = Checker(file)
    rows = _rows(text, check)
    check.raise_if_any()
    header = [name.strip() for name in rows[0][1]]
    _check_header(header, f"line {rows[0][0]}", check)
    if len(rows) - 1 > MAX_ROWS:
        check.add("", f"{len(rows) - 1} rows", f"at most {MAX_ROWS}")
    check.raise_if_any()
    table = _Table()
    for number, cells in rows[1:]:
        if len(cells) == len(header):
            row = dict(zip(header, (cell.strip() for cell in cells), strict=True))
            _take_row(f"line {number}", row, table, check)
        else:
            check.add(f"line {number}", f"{len(cells)} cells", f"{len(header)} cells")
    if len(rows) == 1:
        check.add("", "no rows", "at least one placement")
    result = tuple(_assembled(run, table, check) for run in table.steps)
    check.raise_if_any()
    return result


@dataclass
class _Table:
    """What the rows say, by run: placements by step, total time, note."""

    steps: dict[str, dict[int, list[Placement]]] = field(default_factory=dict)
    totals: dict[str, float] = field(default_factory=dict)
    notes: dict[str, str] = field(default_factory=dict)


def _rows(text: str, check: Checker) -> list[tuple[int, list[str]]]:
    """Line number and cells of every row that is not empty; at least one, or a problem."""
    reader = csv.reader(io.StringIO(text), strict=True)
    rows = []
    try:
        for cells in reader:
            if any(cell.strip() for cell in cells):
                rows.append((reader.line_num, cells))
    except csv.Error as error:
        expected = "a table of comma-separated values"
        check.add(f"line {reader.line_num}", str(error), expected)
        return rows
    if not rows:
        check.add("", "an empty file", "a header line and rows")
    return rows


def _check_header(header: list[str], place: str, check: Checker) -> None:
    for name, count in Counter(header).items():
        if name not in COLUMNS:
            check.add(place, f"the column {shown(name)}", "one of " + ", ".join(COLUMNS))
        elif count > 1:
            check.add(place, f"the column {name} twice", "each column once")
    for name in ("step", "limb", "hold"):
        if name not in header:
            check.add(place, "no such column", f"a column {name}")


def _take_row(place: str, row: Mapping[str, str], table: _Table, check: Checker) -> None:
    run, limb, hold = row.get("run", ""), row["limb"], row["hold"]
    for key in ("run", "hold", "note"):
        if has_control(row.get(key, "")):
            check.add(f"{place} {key}", shown(row[key]), "a text without control characters")
    steps = table.steps.setdefault(run, {})
    contact = _number(place, "contact_s", row, check, SECONDS)
    release = _number(place, "release_s", row, check, SECONDS)
    for key in ("x_mm", "y_mm"):
        _number(place, key, row, check, MILLIMETRES)
    if row.get("note"):
        table.notes[run] = row["note"]
    if limb == "total":
        if not row.get("contact_s"):
            check.add(f"{place} contact_s", "nothing", "the total time in seconds")
        elif contact is not None:
            table.totals[run] = contact
        return
    if limb not in LIMB_NAMES:
        check.add(f"{place} limb", shown(limb), f"one of {', '.join((*LIMB_NAMES, 'total'))}")
    if not hold:
        check.add(f"{place} hold", "nothing", "a hold id, floor, free or smear")
    if limb in ("LH", "RH") and hold in ("floor", "smear"):
        check.add(f"{place} hold", shown(hold), "a hold id or free for a hand")
    step = row["step"]
    if not step.isascii() or not step.isdigit() or len(step) > 6:
        check.add(f"{place} step", shown(step), "a whole number from 0")
        return
    placements = steps.setdefault(int(step), [])
    if any(placed.limb == limb for placed in placements):
        check.add(place, f"{shown(limb)} twice in step {step}", "one row a limb")
    placements.append(Placement(limb, hold, contact, release))


def _number(
    place: str, key: str, row: Mapping[str, str], check: Checker, bounds: tuple[float, float, str]
) -> float | None:
    """A number of a cell, None where it is empty or, with a problem noted, out of bounds."""
    text = row.get(key, "")
    if not text:
        return None
    low, high, expected = bounds
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not low <= value < high:
        check.add(f"{place} {key}", shown(text), expected)
        return None
    return value


def _assembled(run: str, table: _Table, check: Checker) -> Sequence:
    numbers = sorted(table.steps[run])
    place = f"run {shown(run)}" if run else "steps"
    if numbers and numbers[-1] - numbers[0] != len(numbers) - 1:
        check.add(place, "gaps in the numbering", "steps one after another")
    if numbers and numbers[0] > 1:
        check.add(place, f"first step {numbers[0]}", "step 0 (the start) or 1 first")
    listed = [tuple(table.steps[run][number]) for number in numbers]
    if numbers and numbers[0] == 1:
        listed.insert(0, ())
    return Sequence(run, tuple(listed), table.totals.get(run), table.notes.get(run, ""))


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

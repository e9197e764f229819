"""Holds as a table (CSV): reading one into a wall, and writing the holds of a wall.

The first line that is neither empty nor a comment (#) is the header; it decides what separates
the cells: a tab if it has one, else a semicolon, else a comma. Where tabs or semicolons separate,
a number may have a decimal comma.
"""

from __future__ import annotations

import csv
import io
import os
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from climbpath.contacts import LIMB_NAMES
from climbpath.errors import DataError, Problem
from climbpath.files import read_text, write_atomically
from climbpath.wall.checking import Checker, shown
from climbpath.wall.document import SCHEMA, wall_from_document
from climbpath.wall.files import MAX_WALL_BYTES, hold_table
from climbpath.wall.model import Wall
from climbpath.wall.reading import HOLD_KEYS, MAX_HOLDS

TEXT_COLUMNS = ("id", "hole", "use", "lane")
COLUMNS = HOLD_KEYS
"""The columns a table may have: the keys of a hold in a wall file."""

NUMBER = re.compile(r"[+-]?([0-9]+(\.[0-9]*)?|\.[0-9]+)([eE][+-]?[0-9]{1,3})?")
POINT_SEPARATOR = "/"
"""Between the points of an outline, each of which is two numbers and a blank: -60 -40 / 60 -40."""

Allowed = Mapping[str, Sequence[str]]


@dataclass(frozen=True)
class TableFrame:
    """What a wall needs beyond its table of holds. Lengths in the unit named, angles in degrees.

    ``starts``: for each start and limb the contacts allowed. An empty ``finish`` means all holds
    of use strike. ``grid``: x0, y0 and pitch.
    """

    name: str
    width: float
    height: float
    overhang_deg: float = 0.0
    unit: str = "mm"
    floor_y: float = 0.0
    line_x: float | str | None = None
    starts: tuple[Allowed, ...] = ()
    finish: tuple[str, ...] = ()
    grid: tuple[float, float, float] | None = None


def read_table(path: str | os.PathLike[str], frame: TableFrame) -> Wall:
    """A wall from a CSV file of holds; DataError with every problem of the file."""
    return parse_table(read_text(path, MAX_WALL_BYTES), frame, os.fspath(path))


def parse_table(text: str, frame: TableFrame, file_name: str = "") -> Wall:
    """A wall from the text of a table of holds; DataError with every problem."""
    check = Checker(file_name)
    rows, decimal_comma = _rows(text, check)
    check.raise_if_any()
    holds, lines = _holds(rows, decimal_comma, check)
    document = _document(holds, frame)

    def label(index: int, hold_id: str | None) -> str:
        return f"line {lines[index]}" + (f' (hold "{hold_id}")' if hold_id is not None else "")

    try:
        wall = wall_from_document(document, file_name, label)
    except DataError as error:
        raise DataError([*check.problems, *error.problems]) from None
    check.raise_if_any()
    return wall


def write_table(wall: Wall, path: str | os.PathLike[str], separator: str = ",") -> None:
    """Write the holds of a wall as a table; DataError if the place cannot be written."""
    write_atomically(path, format_table(wall, separator))


def format_table(wall: Wall, separator: str = ",") -> str:
    """The holds of a wall as the text of a table, lengths in the wall's unit, positions as x, y.

    Sections, grid, lanes, starts and finish are not part of a table.
    """
    tables = []
    for hold in wall.holds:
        table = hold_table(hold, wall, by_hole=False)
        if "outline" in table:
            points = (f"{x} {y}" for x, y in table["outline"])
            table["outline"] = f" {POINT_SEPARATOR} ".join(points)
        tables.append(table)
    used = {key for table in tables for key in table}
    columns = [key for key in COLUMNS if key in used or key == "use"]
    stream = io.StringIO()
    writer = csv.writer(
        stream, delimiter=separator, quoting=csv.QUOTE_NONNUMERIC, lineterminator="\n"
    )
    stream.write(separator.join(columns) + "\n")
    for table in tables:
        table.setdefault("use", "both")
        writer.writerow([table.get(key) for key in columns])
    return stream.getvalue()


def _rows(text: str, check: Checker) -> tuple[list[tuple[int, list[str]]], bool]:
    """Line number and cells of every line that is neither empty nor a comment.

    With it, whether numbers may have a decimal comma.
    """
    lines = text.splitlines()
    lines = ["" if line.lstrip().startswith("#") else line for line in lines]
    header = next((line for line in lines if line.strip()), None)
    if header is None:
        check.add("", "an empty table", "a header such as id,x,y,use")
        return [], False
    separator = next((sign for sign in "\t;" if sign in header), ",")
    reader = csv.reader(
        (line + "\n" for line in lines), delimiter=separator, strict=True, skipinitialspace=True
    )
    rows = []
    try:
        for cells in reader:
            if any(cell.strip() for cell in cells):
                rows.append((reader.line_num, [cell.strip() for cell in cells]))
    except csv.Error as error:
        check.add(f"line {reader.line_num}", str(error), "cells of a table")
    if len(rows) > MAX_HOLDS + 1:
        check.add("", f"{len(rows) - 1} holds", f"at most {MAX_HOLDS}")
    return rows, separator != ","


def _holds(
    rows: list[tuple[int, list[str]]], decimal_comma: bool, check: Checker
) -> tuple[list[dict[str, Any]], list[int]]:
    """The rows as hold tables, and the line each stands on."""
    line, names = rows[0][0], [name.lower() for name in rows[0][1]]
    for place, name in enumerate(names):
        if name in names[:place] and name:
            check.add(f"line {line}", f"the column {shown(name)} twice", "each column once")
    check.known_keys({name: None for name in names if name}, f"line {line}", COLUMNS)
    if "id" not in names:
        check.add(f"line {line}", "no column id", "a header such as id,x,y,use")
    holds, lines = [], []
    for line, cells in rows[1:]:
        if any(cells[len(names) :]):
            check.add(
                f"line {line}", f"{len(cells)} cells", f"at most {len(names)}, as in the header"
            )
        table = {}
        for name, cell in zip(names, cells, strict=False):
            if cell and name in COLUMNS:
                table[name] = _value(name, cell, decimal_comma)
            elif cell and not name:
                check.add(
                    f"line {line}", f"{shown(cell)} in a column without name", "a name for it"
                )
        holds.append(table)
        lines.append(line)
    return holds, lines


def _value(name: str, cell: str, decimal_comma: bool) -> Any:
    """A cell as the value a wall file would have; what is no number stays text and is reported."""
    if name == "hole":
        return cell.replace(".", ",")
    if name in TEXT_COLUMNS:
        return cell
    if name == "outline":
        points = [point.split() for point in cell.split(POINT_SEPARATOR)]
        return [[_number(part, decimal_comma) for part in point] for point in points]
    return _number(cell, decimal_comma)


def _number(text: str, decimal_comma: bool) -> float | int | str:
    plain = text.replace(",", ".", 1) if decimal_comma else text
    if not NUMBER.fullmatch(plain) or len(plain) > 40:
        return text
    return int(plain) if plain.lstrip("+-").isdigit() else float(plain)


def _document(holds: list[dict[str, Any]], frame: TableFrame) -> dict[str, Any]:
    finish = frame.finish or tuple(
        str(hold["id"]) for hold in holds if hold.get("use") == "strike" and "id" in hold
    )
    document: dict[str, Any] = {
        "schema": SCHEMA,
        "name": frame.name,
        "unit": frame.unit,
        "width": frame.width,
        "floor_y": frame.floor_y,
        "section": [{"height": frame.height, "overhang_deg": frame.overhang_deg}],
        "hold": holds,
        "start": [
            {limb: list(start.get(limb, ())) for limb in LIMB_NAMES} for start in frame.starts
        ],
    }
    if frame.line_x is not None:
        document["line_x"] = frame.line_x
    if frame.grid is not None:
        document["grid"] = dict(zip(("x0", "y0", "pitch"), frame.grid, strict=True))
    if finish:
        document["finish"] = {"holds": list(finish)}
    return document


def parse_start(text: str) -> dict[str, tuple[str, ...]]:
    """A start such as "LH=1|2,RH=2,LF=floor,RF=floor|free"; DataError if it is none.

    A hand left out is free, a foot left out is on the floor.
    """
    start: dict[str, tuple[str, ...]] = {
        "LH": ("free",), "RH": ("free",), "LF": ("floor",), "RF": ("floor",)
    }  # fmt: skip
    problems = []
    for part in text.split(","):
        limb, equals, allowed = part.partition("=")
        entries = tuple(entry.strip() for entry in allowed.split("|"))
        if limb.strip() not in LIMB_NAMES or not equals or not all(entries):
            expected = "LH=ID, RH=ID, LF=ID or RF=ID, several ids joined by |"
            problems.append(Problem("", "start", shown(part), expected))
        else:
            start[limb.strip()] = entries
    if problems:
        raise DataError(problems)
    return start

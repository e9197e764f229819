"""Reading and writing wall files (TOML)."""

from __future__ import annotations

import math
import os
import tomllib
from collections.abc import Mapping
from typing import Any

import tomli_w

from climbpath.contacts import LIMB_NAMES
from climbpath.errors import DataError, Problem
from climbpath.files import read_text, write_atomically
from climbpath.wall.document import SCHEMA, wall_from_document
from climbpath.wall.model import (
    DEFAULT_RANGE_DEG,
    DEFAULT_SUPPORT_DEG,
    DEFAULT_SUPPORT_IN_DEG,
    Grid,
    Hold,
    Start,
    Wall,
)
from climbpath.wall.reading import DEGREE_DECIMALS, UNITS

MAX_WALL_BYTES = 4 * 1024 * 1024
"""Largest wall file that is read: 2,000 holds with outlines need less than half of it."""


def read_wall(path: str | os.PathLike[str]) -> Wall:
    """The wall in a TOML file; DataError with every problem of the file."""
    return parse_wall(read_text(path, MAX_WALL_BYTES), os.fspath(path))


def parse_wall(text: str, file_name: str = "") -> Wall:
    """The wall that TOML text describes; DataError with every problem, named by ``file_name``."""
    try:
        document = tomllib.loads(text)
    except RecursionError:
        problem = Problem(file_name, "", "lists or tables nested too deep", "a wall file")
        raise DataError([problem]) from None
    except ValueError as error:
        # TOMLDecodeError, which gives line and column, or a number with too many digits.
        is_syntax = isinstance(error, tomllib.TOMLDecodeError)
        reason = str(error)[:200] if is_syntax else "a number with too many digits"
        last = text.count("\n") + 1
        reason = reason.replace("at end of document", f"at line {last}, the end of the file")
        raise DataError([Problem(file_name, "", reason, "valid TOML")]) from None
    return wall_from_document(document, file_name)


def write_wall(wall: Wall, path: str | os.PathLike[str]) -> None:
    """Write a wall file; reading it gives the same wall. DataError if it cannot be written."""
    write_atomically(path, format_wall(wall))


def format_wall(wall: Wall) -> str:
    """A wall as the text of a wall file, lengths in the wall's own unit.

    Values that equal their defaults are left out. A hold given by hole is written by hole as
    long as its position is that of the hole.
    """
    return "\n".join(_lines(document_of(wall), "")) + "\n"


def document_of(wall: Wall) -> dict[str, Any]:
    """A wall as the nested tables of its file."""
    unit = wall.unit
    document: dict[str, Any] = {
        "schema": SCHEMA,
        "name": wall.name,
        "unit": unit,
        "width": in_unit(wall.width, unit),
        "line_x": "fit" if wall.line_is_fit else in_unit(wall.line_x, unit),
        "floor_y": in_unit(wall.floor_y, unit),
        "section": [
            {
                "height": in_unit(section.height, unit),
                "overhang_deg": in_degrees(section.overhang),
            }
            for section in wall.sections
        ],
    }
    if wall.grid is not None:
        document["grid"] = _grid_table(wall.grid, unit)
    document["hold"] = [hold_table(hold, wall) for hold in wall.holds]
    document.update(_start_and_finish(wall.starts, wall.finish))
    if wall.lanes:
        document["lane"] = [
            {
                "id": lane.id,
                "x_from": in_unit(lane.x_from, unit),
                "x_to": in_unit(lane.x_to, unit),
                "line_x": in_unit(lane.line_x, unit),
                **_start_and_finish(lane.starts, lane.finish),
            }
            for lane in wall.lanes
        ]
    return document


def in_unit(metres: float, unit: str) -> float | int:
    """A length in a unit, to the micrometre; whole numbers as such."""
    decimals = {"mm": 3, "cm": 4, "m": 6}[unit]
    return _plain(round(metres * UNITS[unit], decimals))


def in_degrees(angle: float) -> float | int:
    """An angle in degrees, to 1e-6; whole numbers as such."""
    return _plain(round(math.degrees(angle), DEGREE_DECIMALS))


def _plain(value: float) -> float | int:
    return int(value) if value == int(value) else value


def hold_table(hold: Hold, wall: Wall, by_hole: bool = True) -> dict[str, Any]:
    """One hold as a table of the file, without what equals the defaults.

    With ``by_hole`` a hold that was given by hole stays so.
    """
    unit = wall.unit
    table: dict[str, Any] = {"id": hold.id}
    grid = wall.grid if by_hole and hold.hole is not None else None
    if grid is not None and grid.hole_at(hold.x, hold.y) == hold.hole:
        table["hole"] = hold.hole
    else:
        table["x"] = in_unit(hold.x, unit)
        table["y"] = in_unit(hold.y, unit)
    values: Mapping[str, tuple[Any, Any]] = {
        "use": (hold.use, "both"),
        "depth": (in_unit(hold.depth, unit), 0),
        "hands": (hold.hands, 2),
        "support_deg": (in_degrees(hold.support), DEFAULT_SUPPORT_DEG),
        "support_in_deg": (in_degrees(hold.support_in), DEFAULT_SUPPORT_IN_DEG),
        "range_deg": (in_degrees(hold.range), DEFAULT_RANGE_DEG),
        "hand_quality": (_plain(hold.hand_quality), 1),
        "foot_quality": (_plain(hold.foot_quality), 1),
        "outline": ([[in_unit(x, unit), in_unit(y, unit)] for x, y in hold.outline], []),
        "lane": (hold.lane, None),
    }
    table.update({key: value for key, (value, default) in values.items() if value != default})
    return table


def _lines(table: Mapping[str, Any], path: str) -> list[str]:
    """The lines of a table: its values, one a line, then the tables inside it.

    tomli_w writes the values; it would spread an outline over a line for each number.
    """
    lines = []
    inner = []
    for key, value in table.items():
        name = f"{path}.{key}" if path else key
        if isinstance(value, dict):
            inner += ["", f"[{name}]", *_lines(value, name)]
        elif isinstance(value, list) and value and isinstance(value[0], dict):
            for item in value:
                inner += ["", f"[[{name}]]", *_lines(item, name)]
        else:
            lines.append(f"{key} = {_text(value)}")
    return lines + inner


def _text(value: object) -> str:
    if isinstance(value, list):
        return "[" + ", ".join(_text(item) for item in value) + "]"
    return tomli_w.dumps({"a": value}).removeprefix("a = ").rstrip("\n")


def _grid_table(grid: Grid, unit: str) -> dict[str, Any]:
    table: dict[str, Any] = {
        "x0": in_unit(grid.x0, unit),
        "y0": in_unit(grid.y0, unit),
        "pitch": in_unit(grid.pitch, unit),
    }
    if grid.panel:
        table["panel"] = grid.panel
        table["panel_columns"] = grid.panel_columns
        table["panel_rows"] = grid.panel_rows
    if grid.columns:
        table["columns"] = grid.columns
    return table


def _start_and_finish(starts: tuple[Start, ...], finish: tuple[str, ...]) -> dict[str, Any]:
    tables: dict[str, Any] = {}
    if starts:
        tables["start"] = [
            {
                limb: allowed[0] if len(allowed) == 1 else list(allowed)
                for limb, allowed in zip(LIMB_NAMES, start.allowed, strict=True)
            }
            for start in starts
        ]
    if finish:
        tables["finish"] = {"holds": list(finish)}
    return tables

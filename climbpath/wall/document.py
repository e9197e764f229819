"""From the parsed content of a wall file (nested tables) to a Wall, with every problem noted."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import Any

from climbpath.contacts import LIMB_NAMES
from climbpath.wall.checking import Checker, joined, shown
from climbpath.wall.consistency import check_wall
from climbpath.wall.model import MICROMETRE, Grid, Hold, Lane, Section, Start, Wall, mean_hand_x
from climbpath.wall.reading import (
    MAX_HOLDS,
    MAX_ID,
    MAX_LANES,
    MAX_NAME,
    MAX_SECTIONS,
    MAX_SIZE_M,
    MAX_STARTS,
    MIN_SIZE_M,
    OVERHANG_DEG,
    UNITS,
    Reading,
    default_label,
    hold_labels,
    radians,
    read_hold,
)

SCHEMA = "climbpath/wall/1"
WALL_KEYS = (
    "schema", "name", "unit", "width", "line_x", "floor_y",
    "section", "grid", "hold", "start", "finish", "lane",
)  # fmt: skip
SECTION_KEYS = ("height", "overhang_deg")
GRID_KEYS = ("x0", "y0", "pitch", "panel", "panel_columns", "panel_rows", "columns")
LANE_KEYS = ("id", "x_from", "x_to", "line_x", "start", "finish")


def wall_from_document(
    document: Mapping[str, Any],
    file_name: str,
    label: Callable[[int, str | None], str] = default_label,
) -> Wall:
    """The wall a parsed file describes.

    ``label`` names the hold at an index (from 0) in messages. Raises DataError with every problem
    of the document.
    """
    check = Checker(file_name)
    check.known_keys(document, "", WALL_KEYS)
    if document.get("schema") != SCHEMA:
        found = shown(document["schema"]) if "schema" in document else "nothing"
        check.add("schema", found, f'"{SCHEMA}"')
    name = check.text(document, "name", "", MAX_NAME, "a name")
    unit = check.choice(document, "unit", "", UNITS, "mm")
    if unit is None:
        # Every length would be judged in a unit that was not meant.
        check.raise_if_any()
    reading = Reading(check, unit or "mm")
    sections = _sections(reading, document)
    reading.width = reading.length(document, "width", "", MIN_SIZE_M, MAX_SIZE_M)
    if sections is not None:
        reading.height = round(sum(section.height for section in sections), MICROMETRE)
    floor_y = reading.length(
        document, "floor_y", "", -MAX_SIZE_M, reading.height or MAX_SIZE_M, 0.0
    )
    reading.grid = _grid(reading, document)
    reading.grid_is_wrong = "grid" in document and reading.grid is None
    tables = check.tables(document, "hold", "", MAX_HOLDS)
    if not tables and document.get("hold", []) == []:
        check.add("hold", "no hold", "at least one [[hold]]")
    labels = hold_labels(tables, label)
    holds = [read_hold(reading, table, place) for table, place in zip(tables, labels, strict=True)]
    lanes = _lanes(reading, document, tuple(hold for hold in holds if hold is not None))
    starts = _starts(check, document, "")
    finish = _finish(check, document, "")
    line_x, is_fit = _line(
        reading, document, "", 0.0, reading.width, tuple(hold for hold in holds if hold is not None)
    )
    wall = Wall(
        name=name or "",
        width=reading.width if reading.width is not None else math.inf,
        line_x=line_x or 0.0,
        floor_y=floor_y or 0.0,
        sections=sections or (),
        holds=tuple(hold for hold in holds if hold is not None),
        starts=starts,
        finish=finish,
        grid=reading.grid,
        lanes=lanes,
        unit=reading.unit,
        line_is_fit=is_fit,
    )
    ids = [table.get("id") for table in tables]
    read_labels = [place for hold, place in zip(holds, labels, strict=True) if hold is not None]
    check_wall(check, wall, read_labels, [value for value in ids if isinstance(value, str)])
    check.raise_if_any()
    return wall


def _sections(reading: Reading, document: Mapping[str, Any]) -> tuple[Section, ...] | None:
    check = reading.check
    tables = check.tables(document, "section", "", MAX_SECTIONS)
    if not tables:
        if document.get("section", []) == []:
            check.add("section", "no section", "at least one [[section]]")
        return None
    sections = []
    for index, table in enumerate(tables):
        place = f"section[{index + 1}]"
        check.known_keys(table, place, SECTION_KEYS)
        height = reading.length(table, "height", place, MIN_SIZE_M, MAX_SIZE_M)
        low, high = OVERHANG_DEG
        overhang = check.number(
            table, "overhang_deg", place, low, high, unit="degrees", open_ends=True
        )
        if height is not None and overhang is not None:
            sections.append(Section(height, radians(overhang)))
    if len(sections) < len(tables):
        return None
    total = sum(section.height for section in sections)
    if total > MAX_SIZE_M:
        per_m = UNITS[reading.unit]
        found = f"{total * per_m:.10g} {reading.unit} in all"
        check.add("section", found, f"at most {MAX_SIZE_M * per_m:.10g} {reading.unit} in all")
        return None
    return tuple(sections)


def _grid(reading: Reading, document: Mapping[str, Any]) -> Grid | None:
    check = reading.check
    table = check.table(document, "grid", "")
    if table is None:
        return None
    check.known_keys(table, "grid", GRID_KEYS)
    x0 = reading.length(table, "x0", "grid", -MAX_SIZE_M, reading.width or MAX_SIZE_M)
    y0 = reading.length(table, "y0", "grid", -MAX_SIZE_M, reading.height or MAX_SIZE_M)
    pitch = reading.length(table, "pitch", "grid", 0.005, 10.0)
    panel = check.whole(table, "panel", "grid", 0, 1000, 0)
    columns = check.whole(table, "columns", "grid", 0, 99999, 0)
    per_panel = [0, 0]
    if panel:
        for i, key in enumerate(("panel_columns", "panel_rows")):
            per_panel[i] = check.whole(table, key, "grid", 1, panel, panel) or 0
    elif panel == 0:
        for key in ("panel_columns", "panel_rows"):
            if table.get(key, 0) != 0:
                check.add(f"grid.{key}", shown(table[key]), "panel, which it belongs to")
    if x0 is None or y0 is None or pitch is None or panel is None or columns is None:
        return None
    return Grid(x0, y0, pitch, panel, per_panel[0], per_panel[1], columns)


def _line(
    reading: Reading,
    table: Mapping[str, Any],
    place: str,
    x_from: float,
    x_to: float | None,
    holds: tuple[Hold, ...],
) -> tuple[float | None, bool]:
    """x of the line (default: the middle of the strip) and whether it is the mean of the holds."""
    key = joined(place, "line_x")
    if isinstance(table.get("line_x"), str):
        if table["line_x"] != "fit":
            reading.check.add(key, shown(table["line_x"]), 'a number or "fit"')
            return None, False
        mean = mean_hand_x(holds)
        if mean is None and holds:
            reading.check.add(key, '"fit"', "a hold for hands, of whose x it is the mean")
        return mean, True
    if "line_x" not in table and x_to is not None:
        return round((x_from + x_to) / 2.0, MICROMETRE), False
    if "line_x" not in table:
        return None, False
    return reading.length(table, "line_x", place, x_from, x_to or MAX_SIZE_M), False


def _starts(check: Checker, parent: Mapping[str, Any], place: str) -> tuple[Start, ...]:
    starts = []
    for index, table in enumerate(check.tables(parent, "start", place, MAX_STARTS)):
        here = joined(place, f"start[{index + 1}]")
        check.known_keys(table, here, LIMB_NAMES)
        allowed = []
        for limb in LIMB_NAMES:
            key = f"{here}.{limb}"
            value = table.get(limb)
            entries = [value] if isinstance(value, str) else value
            good = isinstance(entries, list) and all(isinstance(entry, str) for entry in entries)
            if entries is None or not good or not entries:
                found = "nothing" if value is None else shown(value)
                check.add(key, found, "a hold id, or a list of what is allowed, in quotes")
                entries = []
            elif len(set(entries)) < len(entries):
                check.add(key, shown(entries), "each entry once")
            allowed.append(tuple(dict.fromkeys(entries)))
        starts.append(Start(tuple(allowed)))
    return tuple(starts)


def _finish(check: Checker, parent: Mapping[str, Any], place: str) -> tuple[str, ...]:
    table = check.table(parent, "finish", place)
    if table is None:
        return ()
    here = joined(place, "finish")
    check.known_keys(table, here, ("holds",))
    value = table.get("holds")
    if not isinstance(value, list) or not all(isinstance(item, str) for item in value) or not value:
        found = "nothing" if value is None else shown(value)
        check.add(f"{here}.holds", found, "a list of hold ids in quotes")
        return ()
    return tuple(dict.fromkeys(value))


def _lanes(
    reading: Reading, document: Mapping[str, Any], holds: tuple[Hold, ...]
) -> tuple[Lane, ...]:
    check = reading.check
    lanes = []
    for index, table in enumerate(check.tables(document, "lane", "", MAX_LANES)):
        place = f"lane[{index + 1}]"
        check.known_keys(table, place, LANE_KEYS)
        lane_id = check.text(table, "id", place, MAX_ID, "an id")
        width = reading.width or MAX_SIZE_M
        x_from = reading.length(table, "x_from", place, 0.0, width, 0.0)
        x_to = reading.length(table, "x_to", place, 0.0, width, width)
        starts = _starts(check, table, place)
        finish = _finish(check, table, place)
        if x_from is None or x_to is None:
            continue
        if x_to <= x_from:
            check.add(f"{place}.x_to", shown(table.get("x_to")), "more than x_from")
            continue
        own = tuple(
            hold
            for hold in holds
            if hold.lane == lane_id or (hold.lane is None and x_from <= hold.x <= x_to)
        )
        line_x, _ = _line(reading, table, place, x_from, x_to, own)
        if lane_id is not None and line_x is not None:
            lanes.append(Lane(lane_id, x_from, x_to, line_x, starts, finish))
    return tuple(lanes)

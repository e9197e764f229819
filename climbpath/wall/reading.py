"""Reading one hold table, and lengths and angles in the units of a file."""

from __future__ import annotations

import math
import re
from collections import Counter
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import shapely

from climbpath.wall.checking import Checker, shown
from climbpath.wall.model import (
    DEFAULT_RANGE_DEG,
    DEFAULT_SUPPORT_DEG,
    DEFAULT_SUPPORT_IN_DEG,
    MICROMETRE,
    USES,
    Grid,
    Hold,
)

UNITS = {"mm": 1000.0, "cm": 100.0, "m": 1.0}
"""Name of a length unit: how many of it make a metre."""

RESERVED_IDS = ("floor", "free", "smear")
MAX_HOLDS = 2000
MAX_SECTIONS = 50
MAX_LANES = 50
MAX_STARTS = 200
MAX_OUTLINE = 64
MAX_NAME = 100
MAX_ID = 32
MAX_SIZE_M = 100.0
"""Widest and highest wall, m: six times the published lane."""
MIN_SIZE_M = 0.1
MAX_DEPTH_M = 1.0
MAX_OUTLINE_M = 2.0
OVERHANG_DEG = (-60.0, 90.0)
"""Overhangs between these are taken; at 90 a roof gains no height, below −60 one walks."""
DEGREE_DECIMALS = 6
"""Angles are rounded to 1e-6 degrees when read, so that they survive writing and reading."""

HOLD_KEYS = (
    "id", "x", "y", "hole", "use", "depth", "hands", "support_deg", "support_in_deg", "range_deg",
    "hand_quality", "foot_quality", "outline", "lane",
)  # fmt: skip
HOLE_NAME = re.compile(r" *([0-9]{1,5}) *, *([0-9]{1,5}) *")


@dataclass
class Reading:
    """What reading one document needs to hand on: the checker, the unit, the wall's size."""

    check: Checker
    unit: str
    width: float | None = None
    height: float | None = None
    grid: Grid | None = None
    grid_is_wrong: bool = False

    def length(
        self,
        table: Mapping[str, Any],
        key: str,
        place: str,
        low: float,
        high: float,
        default: float | None = None,
    ) -> float | None:
        """A length in m, rounded to 1 µm; ``low``, ``high`` and ``default`` are in m too."""
        if key not in table and default is not None:
            return default
        per_m = UNITS[self.unit]
        # Bounds are often lengths of the file themselves: rounded, they compare as they were given.
        bounds = (round(low * per_m, MICROMETRE), round(high * per_m, MICROMETRE))
        value = self.check.number(table, key, place, *bounds, unit=self.unit)
        return None if value is None else metres(value, self.unit)


def metres(value: float, unit: str) -> float:
    """A length of a file in m, rounded to 1 µm."""
    # Adding 0.0 turns a negative zero into a plain one.
    return round(value / UNITS[unit], MICROMETRE) + 0.0


def radians(degrees: float) -> float:
    """An angle of a file in rad."""
    return math.radians(round(degrees, DEGREE_DECIMALS) + 0.0)


def half_turn(degrees: float) -> float:
    """The same direction as an angle above −180 and up to 180 degrees."""
    rounded = round(degrees, DEGREE_DECIMALS)
    return 180.0 - (180.0 - rounded) % 360.0


def default_label(index: int, hold_id: str | None) -> str:
    """How messages name a hold: by its id, or counted from 1 where it has none of its own."""
    return f'hold "{hold_id}"' if hold_id is not None else f"hold[{index + 1}]"


def hold_labels(
    tables: list[Mapping[str, Any]], label: Callable[[int, str | None], str]
) -> list[str]:
    ids = [table.get("id") for table in tables]
    counts = Counter(value for value in ids if isinstance(value, str))
    labels = []
    for index, value in enumerate(ids):
        own = isinstance(value, str) and counts[value] == 1 and len(value) <= MAX_ID
        safe = own and isinstance(value, str) and value.isprintable() and value.strip() == value
        labels.append(label(index, value if safe and value else None))
    return labels


def read_hold(reading: Reading, table: Mapping[str, Any], place: str) -> Hold | None:
    """One hold, None if anything about it is wrong."""
    check = reading.check
    check.known_keys(table, place, HOLD_KEYS)
    before = len(check.problems)  # an unknown key alone does not keep the hold from being read
    hold_id = check.text(table, "id", place, MAX_ID, "an id")
    if hold_id in RESERVED_IDS:
        check.add(f"{place}.id", shown(hold_id), "an id other than " + ", ".join(RESERVED_IDS))
    x, y, hole = _position(reading, table, place)
    use = check.choice(table, "use", place, USES, "both")
    depth = reading.length(table, "depth", place, 0.0, MAX_DEPTH_M, 0.0)
    hands = check.whole(table, "hands", place, 1, 2, 2)
    angles = [
        check.number(table, key, place, low, high, default=default, unit="degrees")
        for key, low, high, default in (
            ("support_deg", -360.0, 360.0, DEFAULT_SUPPORT_DEG),
            ("support_in_deg", -90.0, 90.0, DEFAULT_SUPPORT_IN_DEG),
            ("range_deg", 1.0, 90.0, DEFAULT_RANGE_DEG),
        )
    ]
    qualities = [
        check.number(table, key, place, 0.0, 1.0, default=1.0)
        for key in ("hand_quality", "foot_quality")
    ]
    outline = _outline(reading, table, place)
    lane = None
    if "lane" in table:
        lane = check.text(table, "lane", place, MAX_ID, "the id of a lane")
    if len(check.problems) > before or hold_id is None or x is None or y is None:
        return None
    support, support_in, half_angle = (angle or 0.0 for angle in angles)
    return Hold(
        id=hold_id,
        x=x,
        y=y,
        use=use or "both",
        depth=depth or 0.0,
        hands=hands or 2,
        support=radians(half_turn(support)),
        support_in=radians(support_in),
        range=radians(half_angle),
        hand_quality=qualities[0] or 0.0,
        foot_quality=qualities[1] or 0.0,
        outline=outline,
        lane=lane,
        hole=hole,
    )


def _position(
    reading: Reading, table: Mapping[str, Any], place: str
) -> tuple[float | None, float | None, str | None]:
    """x, y and name of the hole; x and y are None after a problem."""
    check = reading.check
    if "hole" not in table:
        x = reading.length(table, "x", place, 0.0, reading.width or MAX_SIZE_M)
        y = reading.length(table, "y", place, 0.0, reading.height or MAX_SIZE_M)
        return x, y, None
    if "x" in table or "y" in table:
        check.add(place, "both", "either hole or x and y")
        return None, None, None
    key = f"{place}.hole"
    value = table["hole"]
    match = HOLE_NAME.fullmatch(value) if isinstance(value, str) else None
    if match is None:
        check.add(key, shown(value), 'a hole as "column,row", both counted from 1')
        return None, None, None
    if reading.grid is None:
        if not reading.grid_is_wrong:
            check.add(key, shown(value), "a [grid] in the file, or x and y")
        return None, None, None
    column, row = int(match[1]), int(match[2])
    x, y = reading.grid.position(column, row)
    off_wall = not 0.0 <= x <= (reading.width or math.inf)
    off_wall = off_wall or not 0.0 <= y <= (reading.height or math.inf)
    if off_wall or not reading.grid.has_hole(column, row):
        check.add(key, shown(value), "a hole that the grid has on the wall")
        return None, None, None
    return x, y, f"{column},{row}"


def _outline(
    reading: Reading, table: Mapping[str, Any], place: str
) -> tuple[tuple[float, float], ...]:
    check = reading.check
    value = table.get("outline", [])
    key = f"{place}.outline"
    pairs = isinstance(value, list) and all(
        isinstance(point, list) and len(point) == 2 for point in value
    )
    if not pairs:
        check.add(key, shown(value), "a list of points [x, y] about the hold's position")
        return ()
    if "outline" in table and not 3 <= len(value) <= MAX_OUTLINE:
        check.add(key, f"{len(value)} points", f"3 to {MAX_OUTLINE} points")
        return ()
    most = MAX_OUTLINE_M * UNITS[reading.unit]
    points = []
    for index, point in enumerate(value):
        numbers = [
            check.number_value(part, f"{key}[{index + 1}]", -most, most, reading.unit)
            for part in point
        ]
        points.append(tuple(metres(part or 0.0, reading.unit) for part in numbers))
    outline = tuple((point[0], point[1]) for point in points)
    if outline:
        polygon = shapely.Polygon(outline)
        if not polygon.is_valid or polygon.area <= 0.0:
            check.add(key, "one that crosses or touches itself", "a simple outline")
            return ()
    return outline

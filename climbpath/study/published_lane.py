"""The published 15 m speed lane as a wall, from the package's own table of its hand holds.

The lane's foot holds, hold orientations and shapes are not in it, because no readable source gives
them: orientations are the program's defaults. Assumed: the size of the finish pad's outline, the
plumb line in the middle of the lane, and the start (common practice, no source).
"""

from __future__ import annotations

import csv
import math
from collections.abc import Mapping
from functools import cache
from importlib.resources import files

from climbpath.wall import Grid, Hold, Section, Start, Wall

HAND_HOLDS = tuple(str(number) for number in range(1, 21))
"""Ids of the hand holds from the bottom up."""

FINISH = "pad"

NAME = "Published 15 m lane, hand holds only"

WIDTH = 3.0
HEIGHT = 15.0
OVERHANG = math.radians(5.0)
FLOOR_Y = -0.2
"""The international federation's rules, from a secondary page: m, rad."""

GRID = Grid(x0=0.125, y0=0.1875, pitch=0.125, panel=12, panel_columns=11, panel_rows=10)
"""11 x 10 holes to a panel, 125 mm apart (secondary); centred on a panel (ours)."""

PAD = ((-0.175, -0.125), (0.175, -0.125), (0.175, 0.125), (-0.175, 0.125))
"""Outline of the finish pad about its bolt, m. An assumption."""

_BOTH = ("floor", "free", "smear")
_OTHER = ("free", "smear")

STARTS = (
    Start((("1",), ("1", "2"), ("floor",), _BOTH)),
    Start((("1",), ("1", "2"), _OTHER, ("floor",))),
    Start((("2",), ("1",), ("floor",), _BOTH)),
    Start((("2",), ("1",), _OTHER, ("floor",))),
)
"""At least one foot on the floor, both hands on hold 1 or one on 1 and one on 2 (common practice,
no source)."""


def table_rows(name: str) -> tuple[Mapping[str, str], ...]:
    """Rows of a CSV table of ``climbpath/study/tables`` by column name."""
    text = (files("climbpath.study") / "tables" / name).read_text(encoding="utf-8")
    return tuple(csv.DictReader(line for line in text.splitlines() if not line.startswith("#")))


@cache
def published_lane() -> Wall:
    """The lane with its 20 hand holds and the finish pad, no foot holds."""
    holds = []
    for row in table_rows("standard_lane_hands.csv"):
        x, y = (round(float(row[key]) * 1e-3, 6) for key in ("x_mm", "y_mm"))
        pad = row["hold"] == FINISH
        holds.append(Hold(row["hold"], x, y, use="strike" if pad else "both",
                          outline=PAD if pad else ()))
    return Wall(
        name=NAME, width=WIDTH, line_x=WIDTH / 2, floor_y=FLOOR_Y,
        sections=(Section(HEIGHT, OVERHANG),), holds=tuple(holds), starts=STARTS,
        finish=(FINISH,), grid=GRID,
    )

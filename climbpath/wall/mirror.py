"""The mirror image of a wall, left for right."""

from __future__ import annotations

import math
from dataclasses import replace

from climbpath.wall.model import MICROMETRE, Grid, Hold, Lane, Start, Wall, mean_hand_x
from climbpath.wall.reading import DEGREE_DECIMALS, half_turn, radians

EDGE_M = 1e-7
"""A hole nearer than this to the wall's right edge counts as lying on it, so it is none."""


def mirror(wall: Wall) -> Wall:
    """The wall seen in a mirror: x becomes width − x, directions 180° − support, left limbs right.

    The grid is mirrored too and holes are named anew. Mirroring twice gives the same wall.
    """
    grid = None if wall.grid is None else _mirrored_grid(wall.grid, wall.width)
    holds = tuple(_mirrored_hold(hold, wall.width, grid) for hold in wall.holds)
    line_x = _across(wall.line_x, wall.width)
    if wall.line_is_fit:
        mean = mean_hand_x(holds)
        line_x = line_x if mean is None else mean
    return replace(
        wall,
        line_x=line_x,
        holds=holds,
        starts=tuple(_mirrored_start(start) for start in wall.starts),
        grid=grid,
        lanes=tuple(_mirrored_lane(lane, wall.width) for lane in wall.lanes),
    )


def _across(x: float, width: float) -> float:
    return round(width - x, MICROMETRE) + 0.0


def _mirrored_hold(hold: Hold, width: float, grid: Grid | None) -> Hold:
    x = _across(hold.x, width)
    degrees = round(math.degrees(hold.support), DEGREE_DECIMALS)
    hole = None if hold.hole is None or grid is None else grid.hole_at(x, hold.y)
    # Reversed, so that the points keep their sense of rotation.
    outline = tuple((0.0 - across, along) for across, along in reversed(hold.outline))
    return replace(
        hold, x=x, support=radians(half_turn(180.0 - degrees)), outline=outline, hole=hole
    )


def _mirrored_start(start: Start) -> Start:
    left_hand, right_hand, left_foot, right_foot = start.allowed
    return Start((right_hand, left_hand, right_foot, left_foot))


def _mirrored_lane(lane: Lane, width: float) -> Lane:
    return replace(
        lane,
        x_from=_across(lane.x_to, width),
        x_to=_across(lane.x_from, width),
        line_x=_across(lane.line_x, width),
        starts=tuple(_mirrored_start(start) for start in lane.starts),
    )


def _edge_column(grid: Grid, width: float) -> int:
    """The last column that lies on the wall, carried on to the end of its panel."""
    pitches = (width - EDGE_M - grid.x0) / grid.pitch
    last = max(math.floor(pitches) + 1, 1)
    if not grid.panel:
        return last
    return (last - 1) // grid.panel * grid.panel + grid.panel_columns


def _mirrored_grid(grid: Grid, width: float) -> Grid:
    natural = _edge_column(grid, width)
    last = grid.columns or natural
    if grid.panel:
        last = (last - 1) // grid.panel * grid.panel + grid.panel_columns
    x0 = _across(grid.position(last, 1)[0], width)
    turned = replace(grid, x0=x0, columns=0)
    # Where the first column was more than a pitch from the edge, the mirror image ends there too.
    return turned if _edge_column(turned, width) == last else replace(turned, columns=last)

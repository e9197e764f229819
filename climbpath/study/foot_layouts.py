"""Random foot holds: the published lane's own are unknown, so conclusions must stand many layouts.

The wall's height between two bounds is cut into equal bands, and each band gets one foot hold in a
free hole of the grid, drawn with equal chances among those near enough to the line and not beside
another hold.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from math import hypot

import numpy as np

from climbpath.errors import UsageError
from climbpath.wall import Grid, Hold, Start, Wall
from climbpath.wall.model import MICROMETRE

FOOT_HOLDS = 11
"""Foot holds of the published lane (from a secondary page)."""

LOWEST, HIGHEST = 0.4, 13.0
"""Bounds of the foot holds, m along the surface: choices, from below the first hand hold to where
the last foot stands before the finish is struck."""

FARTHEST = 1.1
"""Greatest distance of a foot hold from the line, m: about that of the outermost hand hold."""

APART = 0.125
"""A foot hold is farther than this from every other hold, m: the next hole stays free."""

Hole = tuple[float, float, str]


def band_holes(wall: Wall, grid: Grid, low: float, high: float) -> list[Hole]:
    """Holes of a band of height (low included) that are near enough to the line: x, y, name."""
    holes = []
    row = max(1, int((low - grid.y0) / grid.pitch) - 1)
    while (y := grid.position(1, row)[1]) < high:
        if y >= low:
            columns = range(1, int(wall.width / grid.pitch) + 2)
            places = ((grid.position(column, row)[0], column) for column in columns
                      if grid.has_hole(column, row))
            holes += [
                (x, y, f"{column},{row}") for x, column in places
                if x <= wall.width and abs(x - wall.line_x) <= FARTHEST + 1e-9
            ]
        row += 1
    return holes


def _is_free(x: float, y: float, holds: Sequence[Hold]) -> bool:
    return all(hypot(x - hold.x, y - hold.y) > APART + 10.0**-MICROMETRE for hold in holds)


def _with_foot_on(start: Start, lowest: dict[str, float], feet: Sequence[Hold]) -> Start:
    """A foot that may be free at the start may also stand on a new hold below the start hands."""
    hands = {name for allowed in start.allowed[:2] for name in allowed if name in lowest}
    top = min((lowest[name] for name in hands), default=0.0)
    more = tuple(hold.id for hold in feet if hold.y < top)
    return Start(tuple(
        (*allowed, *more) if limb >= 2 and "free" in allowed else allowed
        for limb, allowed in enumerate(start.allowed)
    ))


def with_random_feet(wall: Wall, seed: int | Sequence[int], number: int = FOOT_HOLDS) -> Wall:
    """The wall with ``number`` foot holds more, ``f1`` (lowest) to ``fn``; same seed, same holds.

    A foot that a start lets hang free may start on a new hold below the start's hands. UsageError
    for a wall without a hole grid, with such ids already, or without a free hole in some band.
    """
    if wall.grid is None:
        raise UsageError(f"{wall.name}: random foot holds need a hole grid")
    if number < 1:
        raise UsageError(f"foot holds: expected at least 1, found {number}")
    ids = [f"f{k}" for k in range(1, number + 1)]
    taken = sorted({hold.id for hold in wall.holds}.intersection(ids))
    if taken:
        raise UsageError(f"{wall.name}: already has holds with the ids {', '.join(taken)}")
    rng = np.random.default_rng(np.random.SeedSequence(seed))
    edges = np.linspace(LOWEST, HIGHEST, number + 1)
    feet: list[Hold] = []
    for name, low, high in zip(ids, edges[:-1], edges[1:], strict=True):
        holes = [hole for hole in band_holes(wall, wall.grid, float(low), float(high))
                 if _is_free(hole[0], hole[1], (*wall.holds, *feet))]
        if not holes:
            raise UsageError(f"{wall.name}: no free hole between {low:.3f} and {high:.3f} m")
        x, y, hole = holes[int(rng.integers(len(holes)))]
        feet.append(Hold(name, x, y, use="foot", hole=hole))
    heights = {hold.id: hold.y for hold in wall.holds}
    return replace(
        wall,
        name=f"{wall.name}, random foot holds",
        holds=(*wall.holds, *feet),
        starts=tuple(_with_foot_on(start, heights, feet) for start in wall.starts),
    )

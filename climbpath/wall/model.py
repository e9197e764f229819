"""The wall as data: holds, sections, hole grid, starts and lanes. Lengths in m, angles in rad.

Surface coordinates: x to the right seen facing the wall, y along the surface upward. Nothing is
checked here; ``climbpath.wall.files`` and ``climbpath.wall.table`` check what they read.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

DEFAULT_SUPPORT_DEG = 90.0
"""Best support straight up the surface: a hold mounted to be pulled down on."""

DEFAULT_SUPPORT_IN_DEG = 15.0
"""Tilt of the best support into the wall of a hold of which nothing is known.

An assumption, no source: most hand holds for pulling have a rim that holds the fingers from
sliding off outward, so the force they give best points up and a little into the wall.
"""

DEFAULT_RANGE_DEG = 45.0
"""Half-angle about the best support of a hold of which nothing is known.

An assumption: the friction angle of chalked fingers, atan(0.64) to atan(0.74) = 33 to 37 degrees
(friction on rock, Amca et al. 2012, from a secondary page), and some ten more for a rounded rim.
"""

USES = ("hand", "foot", "both", "strike")
"""Who may use a hold: hands, feet, both, or a hand that strikes it as the finish."""

HAND_USES = ("hand", "both")
FOOT_USES = ("foot", "both")

MICROMETRE = 6
"""Decimals of a metre that coordinates are rounded to when they are read."""


@dataclass(frozen=True)
class Hold:
    """One hold.

    ``x``, ``y``: point of grip in the surface, ``depth``: how far it stands out, all m.
    ``hands``: how many hands fit. ``support``: direction in the surface of the best support force
    on a hand, counter-clockwise from +x; ``support_in``: its tilt into the wall; ``range``: the
    half-angle about it, rad. Qualities are 0 to 1. ``outline``: polygon about (x, y), m, () where
    unknown. ``lane``: id of the lane it belongs to, None for all. ``hole``: name of its hole on
    the wall's grid where it was given by hole.
    """

    id: str
    x: float
    y: float
    use: str = "both"
    depth: float = 0.0
    hands: int = 2
    support: float = math.radians(DEFAULT_SUPPORT_DEG)
    support_in: float = math.radians(DEFAULT_SUPPORT_IN_DEG)
    range: float = math.radians(DEFAULT_RANGE_DEG)
    hand_quality: float = 1.0
    foot_quality: float = 1.0
    outline: tuple[tuple[float, float], ...] = ()
    lane: str | None = None
    hole: str | None = None


@dataclass(frozen=True)
class Section:
    """A flat part of the wall: ``height`` along the surface (m) and ``overhang`` (rad).

    A positive overhang leans over the climber, a negative one is a slab.
    """

    height: float
    overhang: float


@dataclass(frozen=True)
class Grid:
    """Square grid of bolt holes: hole "1,1" at (``x0``, ``y0``), ``pitch`` apart, all m.

    A hole is named "column,row", both counted from 1 over the whole wall in steps of one pitch.
    Where holes come in panels, ``panel`` is the number of pitches from one panel to the next and
    only the first ``panel_columns`` columns and ``panel_rows`` rows of each have holes; 0 for
    ``panel`` is a grid without gaps. ``columns`` is the last column there is, 0 for as many as
    the wall is wide.
    """

    x0: float
    y0: float
    pitch: float
    panel: int = 0
    panel_columns: int = 0
    panel_rows: int = 0
    columns: int = 0

    def has_hole(self, column: int, row: int) -> bool:
        """Whether the panels have that hole; the edge of the wall is not looked at."""
        if column < 1 or row < 1 or (self.columns and column > self.columns):
            return False
        if not self.panel:
            return True
        return (column - 1) % self.panel < self.panel_columns and (
            row - 1
        ) % self.panel < self.panel_rows

    def position(self, column: int, row: int) -> tuple[float, float]:
        """Surface coordinates of a hole, m, rounded to 1 µm."""
        return (
            round(self.x0 + (column - 1) * self.pitch, MICROMETRE),
            round(self.y0 + (row - 1) * self.pitch, MICROMETRE),
        )

    def hole_at(self, x: float, y: float) -> str | None:
        """Name of the hole at (x, y), m, to the micrometre; None if there is none."""
        column = round((x - self.x0) / self.pitch) + 1
        row = round((y - self.y0) / self.pitch) + 1
        if not self.has_hole(column, row):
            return None
        there = self.position(column, row)
        here = (round(x, MICROMETRE), round(y, MICROMETRE))
        return f"{column},{row}" if there == here else None


@dataclass(frozen=True)
class Start:
    """One allowed start: for LH, RH, LF and RF, in this order, the contacts allowed.

    An entry is a hold id, "free", or, for feet, "floor" or "smear".
    """

    allowed: tuple[tuple[str, ...], ...]


@dataclass(frozen=True)
class Lane:
    """A strip ``x_from`` to ``x_to`` (m) of a wall with its own line, starts and finish.

    Empty ``starts`` or ``finish`` mean those of the wall.
    """

    id: str
    x_from: float
    x_to: float
    line_x: float
    starts: tuple[Start, ...] = ()
    finish: tuple[str, ...] = ()


@dataclass(frozen=True)
class Wall:
    """A wall: ``width``, ``line_x`` and ``floor_y`` in m, sections from bottom to top.

    ``finish``: ids of the holds any of which ends the climb. ``unit`` is the length unit its file
    uses; ``line_is_fit`` says that the line was asked for as the mean x of the hand holds.
    """

    name: str
    width: float
    line_x: float
    floor_y: float
    sections: tuple[Section, ...]
    holds: tuple[Hold, ...]
    starts: tuple[Start, ...]
    finish: tuple[str, ...]
    grid: Grid | None = None
    lanes: tuple[Lane, ...] = ()
    unit: str = "mm"
    line_is_fit: bool = False

    @property
    def height(self) -> float:
        """Length of the whole wall along the surface, m."""
        return round(sum(section.height for section in self.sections), MICROMETRE)

    def hold(self, hold_id: str) -> Hold:
        """The hold with this id; KeyError if there is none."""
        for hold in self.holds:
            if hold.id == hold_id:
                return hold
        raise KeyError(hold_id)

    def lane(self, lane_id: str) -> Lane:
        """The lane with this id; KeyError if there is none."""
        for lane in self.lanes:
            if lane.id == lane_id:
                return lane
        raise KeyError(lane_id)

    def lane_view(self, lane_id: str) -> Wall:
        """The wall with that lane alone: its holds and those of no lane, its line, start, finish.

        Coordinates stay those of the whole wall. KeyError if there is no such lane.
        """
        lane = self.lane(lane_id)
        return replace(
            self,
            line_x=lane.line_x,
            holds=tuple(
                replace(hold, lane=None) for hold in self.holds if hold.lane in (None, lane_id)
            ),
            starts=lane.starts or self.starts,
            finish=lane.finish or self.finish,
            lanes=(),
            line_is_fit=False,
        )


def mean_hand_x(holds: tuple[Hold, ...]) -> float | None:
    """Mean x of the holds for hands (m, rounded to 1 µm), None if there are none."""
    xs = [hold.x for hold in holds if hold.use in HAND_USES]
    return round(math.fsum(xs) / len(xs), MICROMETRE) if xs else None

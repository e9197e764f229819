"""Walls: holds, sections, lanes and frames; reading, checking and writing wall files."""

from climbpath.wall.files import format_wall, parse_wall, read_wall, write_wall
from climbpath.wall.frames import Surface, surface_of
from climbpath.wall.mirror import mirror
from climbpath.wall.model import Grid, Hold, Lane, Section, Start, Wall

__all__ = [
    "Grid",
    "Hold",
    "Lane",
    "Section",
    "Start",
    "Surface",
    "Wall",
    "format_wall",
    "mirror",
    "parse_wall",
    "read_wall",
    "surface_of",
    "write_wall",
]

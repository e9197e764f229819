"""Bodies: published tables, the athlete, reading and writing athlete files."""

from climbpath.body.checks import MEASURED_NAMES
from climbpath.body.files import (
    format_athlete,
    growth_caution,
    parse_athlete,
    read_athlete,
    write_athlete,
)
from climbpath.body.lengths import make_athlete
from climbpath.body.model import LENGTH_NAMES, MASS_TABLES, Athlete, Length
from climbpath.body.segments import (
    SEGMENT_ENDS,
    SEGMENT_NAMES,
    SegmentTable,
    segment_table,
    whole_body_com,
)

__all__ = [
    "LENGTH_NAMES",
    "MASS_TABLES",
    "MEASURED_NAMES",
    "SEGMENT_ENDS",
    "SEGMENT_NAMES",
    "Athlete",
    "Length",
    "SegmentTable",
    "format_athlete",
    "growth_caution",
    "make_athlete",
    "parse_athlete",
    "read_athlete",
    "segment_table",
    "whole_body_com",
    "write_athlete",
]

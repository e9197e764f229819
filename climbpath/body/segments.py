"""Segment masses and centres of mass on the linkage's own endpoints.

The published tables measure from bony landmarks; the linkage runs between joints. What is mapped:

- trunk, hip-joint line to shoulder-joint line: de Leva's trunk MIDS–MIDH, read from the hips
  (1 - CM); Dempster's trunk, greater trochanter to glenohumeral axis, as printed;
- head_neck, shoulder-joint line to top of head: de Leva's head, whose centre lies 58.94 % (F) or
  59.76 % (M) of VERT–MIDG below the top, on the length VERT–MIDS = VERT–CERV + CERV–MIDH -
  MIDS–MIDH of the same bodies; Dempster's at the ear canal, the survey's tragion to top of head
  below the top;
- hand, wrist to fingertip: de Leva WJC–DAC3; Dempster wrist–knuckle, the knuckle lying where
  de Leva's bodies have it (WJC–MET3 over WJC–DAC3);
- shank, knee to ankle: de Leva KJC–AJC;
- foot, ankle joint to the contact point of the toe: de Leva's centre along heel–toe tip less the
  ankle's distance from the heel; Dempster's half way from the ankle to the ball.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from climbpath.body.model import Athlete
from climbpath.body.survey import mean
from climbpath.body.tables import rows, settings
from climbpath.errors import DataError, Problem

Array = NDArray[np.float64]

PAIRED = ("upper_arm", "forearm", "hand", "thigh", "shank", "foot")
SEGMENT_NAMES = ("trunk", "head_neck", *(f"{name}_{side}" for name in PAIRED for side in "LR"))
"""Order of every segment axis."""

_ENDS = {
    "upper_arm": ("shoulder", "elbow"),
    "forearm": ("elbow", "wrist"),
    "hand": ("wrist", "fingertip"),
    "thigh": ("hip", "knee"),
    "shank": ("knee", "ankle"),
    "foot": ("ankle", "toe"),
}
SEGMENT_ENDS = (
    ("hip_centre", "shoulder_centre"),
    ("shoulder_centre", "head_top"),
    *((f"{_ENDS[name][0]}_{side}", f"{_ENDS[name][1]}_{side}") for name in PAIRED for side in "LR"),
)
"""Proximal and distal end of each segment, in the order of ``SEGMENT_NAMES``."""


@dataclass(frozen=True)
class SegmentTable:
    """Segments of one body.

    ``names`` (14,); ``mass_fraction`` (14,) share of the body's mass, sum 1; ``cm_fraction`` (14,)
    centre of mass, share of the segment's length from its proximal end (``SEGMENT_ENDS``).
    """

    names: tuple[str, ...]
    mass_fraction: Array
    cm_fraction: Array


def de_leva(sex: str, segment: str, first: str, second: str) -> tuple[float, float, float]:
    """Length (m), mass share, centre of mass (share of the length from ``first``): de Leva 1996."""
    for row in rows("segments_de_leva.csv"):
        if (row["segment"], row["first"], row["second"]) == (segment, first, second):
            return (
                float(row[f"length_{sex}"]) * 1e-3,
                float(row[f"mass_{sex}"]) * 1e-2,
                float(row[f"cm_{sex}"]) * 1e-2,
            )
    found = f"{segment} {first}-{second}"
    raise DataError([Problem("segments_de_leva.csv", "", found, "a segment of the table")])


def dempster(segment: str) -> tuple[float, float]:
    """Mass share and centre of mass (share from the proximal end), Dempster as in Winter."""
    for row in rows("segments_dempster.csv"):
        if row["segment"] == segment:
            return float(row["mass"]), float(row["cm"])
    raise DataError([Problem("segments_dempster.csv", "", segment, "a segment of the table")])


def _foot_line(athlete: Athlete) -> tuple[float, float]:
    """Along the sole, as shares of the foot's length: ankle to ball, ankle to toe contact."""
    marks = settings("constants.toml")["landmarks"]
    ball = mean(athlete.sex, "balloffootlength") / mean(athlete.sex, "footlength")
    contact = ball + marks["toe_contact"] * (1.0 - ball)
    ankle = float(marks["ankle_from_heel"])
    return ball - ankle, contact - ankle


def _de_leva_table(athlete: Athlete) -> dict[str, tuple[float, float]]:
    sex = athlete.sex
    head, head_mass, head_cm = de_leva(sex, "head", "VERT", "MIDG")
    trunk, trunk_mass, trunk_cm = de_leva(sex, "trunk", "MIDS", "MIDH")
    top_to_shoulders = (
        de_leva(sex, "head", "VERT", "CERV")[0] + de_leva(sex, "trunk", "CERV", "MIDH")[0] - trunk
    )
    _, foot_mass, foot_cm = de_leva(sex, "foot", "HEEL", "TTIP")
    heel = float(settings("constants.toml")["landmarks"]["ankle_from_heel"])
    return {
        "trunk": (trunk_mass, 1.0 - trunk_cm),
        "head_neck": (head_mass, 1.0 - head_cm * head / top_to_shoulders),
        "upper_arm": de_leva(sex, "upper_arm", "SJC", "EJC")[1:],
        "forearm": de_leva(sex, "forearm", "EJC", "WJC")[1:],
        "hand": de_leva(sex, "hand", "WJC", "DAC3")[1:],
        "thigh": de_leva(sex, "thigh", "HJC", "KJC")[1:],
        "shank": de_leva(sex, "shank", "KJC", "AJC")[1:],
        "foot": (foot_mass, (foot_cm - heel) / _foot_line(athlete)[1]),
    }


def _dempster_table(athlete: Athlete) -> dict[str, tuple[float, float]]:
    sex = athlete.sex
    table = {name: dempster(name) for name in ("trunk", "head_neck", *PAIRED)}
    # The head's length is taken at the athlete's stature, as the survey gives the ear's.
    ear = mean(sex, "tragiontopofhead") / mean(sex, "stature") * athlete.stature
    table["head_neck"] = (table["head_neck"][0], 1.0 - ear / athlete.length("neck_head"))
    knuckle = de_leva(sex, "hand", "WJC", "MET3")[0] / de_leva(sex, "hand", "WJC", "DAC3")[0]
    table["hand"] = (table["hand"][0], table["hand"][1] * knuckle)
    ball, contact = _foot_line(athlete)
    table["foot"] = (table["foot"][0], table["foot"][1] * ball / contact)
    return table


def segment_table(athlete: Athlete) -> SegmentTable:
    """Mass and centre-of-mass fractions of the 14 segments, by the athlete's ``mass_table``.

    De Leva's female masses sum to .9999; masses are divided by their sum.
    """
    build = _dempster_table if athlete.mass_table == "dempster" else _de_leva_table
    table = build(athlete)
    kinds = ("trunk", "head_neck", *(name for name in PAIRED for _ in "LR"))
    mass = np.array([table[kind][0] for kind in kinds])
    centre = np.array([table[kind][1] for kind in kinds])
    return SegmentTable(SEGMENT_NAMES, mass / mass.sum(), centre)


def whole_body_com(points: ArrayLike, masses: ArrayLike) -> Array:
    """Centre of mass Σ m r / Σ m.

    ``points`` shape (..., N, D), the segments' centres in any unit; ``masses`` shape (N,), kg or
    fractions. Returns shape (..., D) in the unit of ``points``; NaN where the masses sum to 0.
    """
    r = np.asarray(points, dtype=np.float64)
    m = np.asarray(masses, dtype=np.float64)
    total = float(m.sum())
    if total == 0.0:
        return np.full(r.shape[:-2] + r.shape[-1:], np.nan)
    return np.asarray(np.einsum("n,...nd->...d", m, r) / total)

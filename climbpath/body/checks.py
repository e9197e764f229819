"""Checks of what a body is made from. Problems name the keys and units of the athlete file."""

from __future__ import annotations

from collections.abc import Mapping
from math import isfinite, pi

from climbpath.body.model import MASS_TABLES
from climbpath.body.tables import SEXES, range_bounds, share_bounds
from climbpath.errors import Problem

MEASURED_NAMES = (
    "span",
    "sitting_height",
    "standing_reach",
    "shoulder_height",
    "shoulder_breadth",
    "upper_arm",
    "forearm",
    "hand",
    "hand_breadth",
    "hip_height",
    "hip_breadth",
    "thigh",
    "shank",
    "ankle_height",
    "foot",
    "chest_depth",
    "pelvis_depth",
)
"""What can be measured; keys of ``measured``, and with ``_mm`` of the athlete file."""

STATURE_BOUNDS = (1.2, 2.3)
"""m."""
MASS_BOUNDS = (25.0, 200.0)
"""kg."""
BIRTH_YEAR_BOUNDS = (1900, 2100)


def _outside(key: str, value: float, low: float, high: float, factor: float = 1.0) -> list[Problem]:
    """A problem unless ``low <= value <= high``; texts show the numbers times ``factor``."""
    if isfinite(value) and low <= value <= high:
        return []
    expected = f"a number from {low * factor:.6g} to {high * factor:.6g}"
    return [Problem("", key, f"{value * factor:.6g}", expected)]


def _unknown(key: str, known: tuple[str, ...]) -> Problem:
    return Problem("", key, "", f"one of {', '.join(known)}")


def check_inputs(
    sex: str,
    stature: float,
    mass: float,
    measured: Mapping[str, float],
    ranges: Mapping[str, float],
    birth_year: int | None,
    mass_table: str,
) -> list[Problem]:
    """Every problem of the inputs of ``make_athlete`` (m, kg, rad) that shows before the body is
    put together."""
    problems = []
    if sex not in SEXES:
        problems.append(Problem("", "sex", repr(sex), '"female" or "male"'))
    if mass_table not in MASS_TABLES:
        expected = " or ".join(f'"{table}"' for table in MASS_TABLES)
        problems.append(Problem("", "mass_table", repr(mass_table), expected))
    stature_problem = _outside("stature_mm", stature, *STATURE_BOUNDS, 1e3)
    problems += stature_problem
    problems += _outside("mass_kg", mass, *MASS_BOUNDS)
    if birth_year is not None:
        problems += _outside("birth_year", birth_year, *BIRTH_YEAR_BOUNDS)
    for name, value in measured.items():
        key = f"measured.{name}_mm"
        if name not in MEASURED_NAMES:
            problems.append(_unknown(key, MEASURED_NAMES))
        elif not stature_problem:
            low, high = share_bounds()[name]
            problems += _outside(key, value, low * stature, high * stature, 1e3)
    for name, value in ranges.items():
        key = f"range.{name}_deg"
        if name not in range_bounds():
            problems.append(_unknown(key, tuple(range_bounds())))
            continue
        low, high = range_bounds()[name]
        # A rounding error of the conversion to radians is no reason to refuse the bound itself.
        slack = 1e-9
        problems += _outside(key, value, low * pi / 180 - slack, high * pi / 180 + slack, 180 / pi)
    return problems


def length_problems(
    lengths: Mapping[str, float], stature: float, measured: Mapping[str, float]
) -> list[Problem]:
    """Lengths (m) of a finished body that no human has: the measured lengths contradict each
    other."""
    problems = []
    given = ", ".join(f"{name}_mm" for name in measured) or "stature_mm"
    for name, value in lengths.items():
        low, high = share_bounds()[name]
        if low * stature <= value <= high * stature:
            continue
        expected = (
            f"lengths that fit one body: {name} would be {value * 1e3:.0f} mm, outside "
            f"{low * stature * 1e3:.0f} to {high * stature * 1e3:.0f} mm (from {given})"
        )
        problems.append(Problem("", "measured", "", expected))
    return problems

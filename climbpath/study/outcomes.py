"""What one body does on the published lane: its hand holds, time, speeds and opening.

Measures are taken from the steps of a plan. Between two steps the centre of mass (CoM) is taken to
move evenly in a straight line; until the pad is left it stands where the last step before put it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete
from climbpath.study.climb import Climb, Conditions, demands_of, prepare
from climbpath.study.decode import plan_of
from climbpath.study.plan import PlanRequest, best_route
from climbpath.study.polish import polish
from climbpath.study.results import Plan
from climbpath.wall import Wall

Array = NDArray[np.float64]

SPLIT_HOLDS = ("6", "12")
"""Where the stretches end of which the published description speaks: it says that climbers speed up
to hold 6, keep their speed to hold 12 and slow down after it (Pandurevic et al. 2023, doi
10.1007/s12283-023-00431-7, abstract)."""

OPENING_HOLD = "4"
"""The hand hold that the straighter start leaves out (common practice, no source)."""

OPENING_END = "6"
"""The opening is looked at until a hand is on this hold or a higher one."""


@dataclass(frozen=True)
class OpeningWay:
    """The fastest climb with a hand on the opening's hold, or with none on it.

    ``opening_mean_mm``: mean distance of the CoM from the line until the opening ends, over time;
    ``lateral_max_mm`` is the plan's own, over the whole climb.
    """

    time_s: float
    lateral_max_mm: float
    opening_mean_mm: float


@dataclass(frozen=True)
class BodyOutcome:
    """One body on one wall. ``time_s`` is None and ``hand_holds`` empty without a way up.

    ``speeds_m_s``: mean speed up the wall in the three stretches, None where there is no time in
    one. ``with_hold`` and ``without_hold`` are None where that way does not get up.
    """

    body: str
    stature_m: float
    mass_kg: float
    time_s: float | None = None
    hand_holds: tuple[str, ...] = ()
    speeds_m_s: tuple[float | None, float | None, float | None] = (None, None, None)
    with_hold: OpeningWay | None = None
    without_hold: OpeningWay | None = None


@dataclass(frozen=True)
class _Track:
    """Way of the CoM: ``time`` (T,) s, ``x`` and ``y`` (T,) mm; ``start`` s, the first force."""

    time: Array
    x: Array
    y: Array
    start: float


def _track(chosen: Plan) -> _Track:
    """The steps' CoM, with a point more where the pad is left.

    What a plan tells of the first force is when the pad is left: the two differ where the feet
    push for a while, or where hands move first.
    """
    points = [(step.time_s, step.com_mm[0], step.com_mm[1]) for step in chosen.steps]
    start = 0.0 if chosen.pad_off_s is None else chosen.pad_off_s
    before = [k for k, point in enumerate(points) if point[0] <= start]
    if before and start > points[before[-1]][0]:
        _, x, y = points[before[-1]]
        points.insert(before[-1] + 1, (start, x, y))
    track = np.array(points).T
    return _Track(track[0], track[1], track[2], start)


def first_touch(chosen: Plan, wall: Wall, hold_id: str) -> float | None:
    """When a hand first is on a hold as high as this one or higher, s; None if never."""
    lowest = wall.hold(hold_id).y
    high = {hold.id for hold in wall.holds if hold.y >= lowest}
    for step in chosen.steps:
        if high.intersection((step.contacts["LH"], step.contacts["RH"])):
            return step.time_s
    return None


def stretch_speeds(
    chosen: Plan, wall: Wall, holds: Sequence[str] = SPLIT_HOLDS
) -> tuple[float | None, ...]:
    """Mean speeds of the CoM up the wall, m/s, before, between and after the first touches of
    ``holds`` (or of higher ones): the rise of the CoM in a stretch over the time of it.

    The first stretch begins with the first force. None for a stretch without time.
    """
    track = _track(chosen)
    ends = [track.start, *(first_touch(chosen, wall, hold) for hold in holds), chosen.time_s]
    speeds: list[float | None] = []
    for begin, end in pairwise(ends):
        if begin is None or end is None or end <= begin:
            speeds.append(None)
            continue
        low, high = np.interp([begin, end], track.time, track.y)
        speeds.append(float(high - low) / 1e3 / (end - begin))
    return tuple(speeds)


def mean_off_line(chosen: Plan, line_x_mm: float, until_s: float) -> float:
    """Mean distance of the CoM from the line from the signal to ``until_s``, over time, mm."""
    track = _track(chosen)
    inside = track.time < until_s
    time = np.append(track.time[inside], until_s)
    off = np.append(track.x[inside], np.interp(until_s, track.time, track.x)) - line_x_mm
    return _mean_distance(time, off)


def _mean_distance(time: Array, off: Array) -> float:
    """Mean of abs(off) over time, ``off`` straight between its points."""
    a, b = off[:-1], off[1:]
    lasted = np.diff(time)
    total = float(lasted.sum())
    if total <= 0.0:
        return float(abs(off[-1]))
    # Where the line is crossed: two triangles with the sides |a| and |b|.
    sides = np.abs(a) + np.abs(b)
    crossed = a * b < 0.0
    safe = np.where(crossed, sides, 1.0)
    mean = np.where(crossed, (a**2 + b**2) / (2.0 * safe), sides / 2.0)
    return float(mean @ lasted) / total


def opening_way(chosen: Plan, wall: Wall) -> OpeningWay:
    """The figures of a plan that ways through the opening are compared by."""
    end = first_touch(chosen, wall, OPENING_END)
    return OpeningWay(
        time_s=chosen.time_s,
        lateral_max_mm=chosen.lateral_max_mm,
        opening_mean_mm=mean_off_line(
            chosen, wall.line_x * 1e3, chosen.time_s if end is None else end
        ),
    )


def _best(climb: Climb, forbidden: Sequence[int] = ()) -> Plan | None:
    found = best_route(climb, PlanRequest(), forbidden)
    if found is None:
        return None
    return plan_of(climb, found.route, 1, polish(climb, found.route).track)


def body_outcome(wall: Wall, athlete: Athlete) -> BodyOutcome:
    """What the fastest plan of a body on the published lane does, or one with foot holds more.

    The fastest plan is also the fastest with a hand on the opening's hold or the fastest with none
    on it, whichever it is; the other is searched. Leaving a hold out means no hand on it: feet may
    stand on it, since that is how use was counted in the observed runs.
    """
    blank = BodyOutcome(athlete.name, athlete.stature, athlete.mass)
    climb = prepare(wall, athlete, Conditions())
    best = _best(climb)
    if best is None:
        return blank
    uses = OPENING_HOLD in best.hand_holds
    if uses:
        other = _best(climb, [climb.options.index(OPENING_HOLD)])
    else:
        asked = Conditions(include=(OPENING_HOLD,))
        other = _best(replace(climb, demands=demands_of(climb.options, asked, climb.search)))
    ways = (opening_way(best, wall), None if other is None else opening_way(other, wall))
    first, second, third = stretch_speeds(best, wall)
    return replace(
        blank,
        time_s=best.time_s,
        hand_holds=best.hand_holds,
        speeds_m_s=(first, second, third),
        with_hold=ways[0] if uses else ways[1],
        without_hold=ways[1] if uses else ways[0],
    )

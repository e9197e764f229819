"""The polish of a plan: the contacts stay, the centre of mass moves as well as it can.

The search moves between samples and rounds speeds down to its levels. Between stops and flights
the polish leads the centre of mass along a smooth path (``polish_path``) and paces it in least time
with forces that the contacts have (``climbpath.motion.climb_pacing``): at every point

    |ŷ + a / g| <= c (1 − v / V0)

with the strength c changing evenly between crests, as in the search. What the search held each
move to it keeps: a rise lasts as long as the limbs that land with it need from where the body now
is, and as long as what later landings count on. Flights, waits, and steps along or down last as
the search has them, with its upward speeds at their beginnings and ends; sideways a flight drifts
evenly. A piece that is no quicker so, or that cannot be paced, stays as it was: a polished plan is
never slower than its lattice time, which goes on to decide rank.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise
from math import ceil
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from climbpath.errors import NoPacingError
from climbpath.motion.climb_pacing import pace_climb
from climbpath.motion.force import ForceMotion
from climbpath.motion.pacing import Pacing
from climbpath.motion.path_shape import PathShape
from climbpath.route.flights import FLIGHT_BIN, FLIGHT_SIDE
from climbpath.route.nodes import LANDED
from climbpath.route.shortest import Route
from climbpath.study.climb import Climb
from climbpath.study.polish_path import Crests, crests_of, needed
from climbpath.study.polish_pieces import LAND, LEAVE, Piece, RouteReader
from climbpath.study.track import Track, kept_points, lattice_track, path_area
from climbpath.wall.frames import GRAVITY

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Slopes = tuple[Array | None, Array | None]

GRID = 0.05
LEAST_GRID = 4
"""Intervals of a rise are no longer than this, m, and there are at least so many."""

FLIGHT_POINTS = 6
"""Points of the path that show a flight."""

SLOW = 0.5
"""A flight that leaves or lands slower than this upward, m/s, does not set the path's direction."""

ROUNDS = 8
"""How often single rises are taken out of pieces that are no gain, before whole pieces are."""

LEAST_GAIN = 1
"""A piece that gains less than this, us, stays as it was."""


@dataclass(frozen=True)
class Paced:
    """A piece as it was paced; ``first``: number of its first crest.

    ``path`` (M + 1, 3) world [m] with its ``shape``, ``strength`` (M, 2) [body weights] and
    ``pacing`` over its grid, after a ``wait`` [s] at rest; ``least`` (K,) [s] of each rise;
    ``clock`` (K,) [us]: when each rise ends, from the beginning of the piece.
    """

    piece: Piece
    first: int
    path: Array
    shape: PathShape
    strength: Array
    pacing: Pacing
    wait: float
    least: Array
    clock: Ints

    @property
    def bounds(self) -> Ints:
        """Grid points of the crests, (K + 1,)."""
        return self.shape.bounds


Known = dict[tuple[Piece, bytes], Paced | int]


@dataclass(frozen=True)
class Polish:
    """What became of a route: its track, and the pieces that were paced anew."""

    track: Track
    paced: tuple[Paced, ...]


def polish(climb: Climb, route: Route) -> Polish:
    """The polished track of a route; its own where the motion model knows no forces."""
    if not isinstance(climb.motion, ForceMotion):
        return Polish(lattice_track(climb, route), ())
    reader = RouteReader(climb, route)
    kept: set[int] = set()
    crests, paced, known = None, list[Paced](), Known()
    for turn in range(len(reader.kinds) + 1):
        pieces = reader.pieces(kept)
        if not pieces:
            break
        crests = crests_of(reader, pieces)
        paced, bad = _all_paced(reader, crests, pieces, climb.motion.capacities.speed, known)
        if not bad:
            break
        for piece, rise in bad:
            kept.update(piece.rises if turn >= ROUNDS else [rise])
    if crests is None or not pieces:
        return Polish(lattice_track(climb, route), ())
    return Polish(_track(reader, crests, paced), tuple(paced))


def _all_paced(
    reader: RouteReader, crests: Crests, pieces: list[Piece], fastest: float, known: Known,
) -> tuple[list[Paced], list[tuple[Piece, int]]]:
    """The pieces in least time; and those for which that fails, with the rise that is to blame.

    ``known``: what was found for pieces before, to look up and to add to.
    """
    paced, bad, first = list[Paced](), list[tuple[Piece, int]](), 0
    for piece in pieces:
        found = _paced(reader, crests, piece, first, fastest, known)
        if isinstance(found, Paced):
            paced.append(found)
        else:
            bad.append((piece, piece.rises[found]))
        first += len(piece.crests)
    where = _moved(reader, paced)
    for land in (p for p, kind in enumerate(reader.kinds) if kind == LAND):
        left, landed = (_stands(reader, crests, where, p) for p in (land - 1, land + 1))
        if abs(left[0] - landed[0]) > FLIGHT_SIDE + FLIGHT_BIN:
            # Farther than the search lets a flight drift.
            bad += [(one.piece, one.piece.rises[0 if one.piece.begin == land + 1 else -1])
                    for one in paced if land in (one.piece.begin - 1, one.piece.end + 1)]
    return paced, bad


def _paced(
    reader: RouteReader, crests: Crests, piece: Piece, first: int, fastest: float, known: Known,
) -> Paced | int:
    """The piece in least time, or the number of the rise that is to blame if that is no gain."""
    row = {p: first + sum(rise <= p for rise in piece.rises)
           for p in range(piece.begin, piece.end)}
    floors = reader.least(piece, lambda p: needed(reader, crests, p, row[p]))
    if floors is None or not _in_time(reader, crests, piece, first):
        return 0
    # Whole microseconds, as the clock of the search has them.
    least = np.ceil(np.array(floors) * 1e6 - 1e-3) / 1e6
    marks = [piece.begin, *piece.crests[1:]]
    before = np.array([sum(reader.time[a:b]) for a, b in pairwise(marks)])
    slopes = _slopes(reader, crests, piece, first)
    own = slice(first, first + len(piece.crests))
    given = [crests.com[own], crests.strength[own], least, *(s for s in slopes if s is not None)]
    key = (piece, b"".join(values.tobytes() for values in given))
    if key in known:
        earlier = known[key]
        return earlier if isinstance(earlier, int) else replace(earlier, first=first)
    found = _along(crests, piece, first, fastest, least, before, slopes)
    if isinstance(found, int) and any(slope is not None for slope in slopes):
        # The search does not ask a flight to drift the way the body went before.
        found = _along(crests, piece, first, fastest, least, before, (None, None))
    known[key] = found
    return found


def _along(crests: Crests, piece: Piece, first: int, fastest: float, least: Array, before: Ints,
           slopes: Slopes) -> Paced | int:
    """The same along the path with these directions at its ends; ``before`` (K,) [us]: the search's
    own times."""
    count = len(piece.rises)
    path, shape, bounds = _curve(crests.com[first:first + count + 1], slopes)
    strength = _strengths(path, bounds, crests.strength[first:first + count + 1])
    pacing = _pacing(piece, shape, strength, fastest, least)
    if isinstance(pacing, int):
        return pacing
    # Where the body stands at first it waits for its limbs there, and then has all its speed.
    wait = max(float(least[0] - pacing.time[bounds[1]]), 0.0) if piece.start_speed <= 0.0 else 0.0
    clock = np.array([ceil((wait + t) * 1e6 - 1e-3) for t in pacing.time[bounds[1:]]],
                     dtype=np.int64)
    if clock[-1] > before.sum() - LEAST_GAIN:
        return int(np.argmax(np.diff(clock, prepend=0) - before))
    return Paced(piece, first, path, shape, strength, pacing, wait, least, clock)


def _pacing(piece: Piece, shape: PathShape, strength: Array, fastest: float, least: Array
            ) -> Pacing | int:
    """Least-time pacing with the speeds a piece begins and ends with, or the rise to blame."""
    own = least.copy()
    if piece.start_speed <= 0.0:
        if strength[0, 0] < 1.0:
            return 0
        own[0] = 0.0
    upward = shape.tangent[:, 1]
    end = None if piece.end_speed is None else piece.end_speed / float(upward[-1])
    try:
        return pace_climb(shape, strength, fastest, least=own, end_speed=end,
                          start_speed=piece.start_speed / float(upward[0]))
    except NoPacingError as error:
        if error.place:
            return max(int(np.searchsorted(shape.bounds, error.place)) - 1, 0)
        # What the speed does not carry the body over.
        weak = [strength[a:b].mean() for a, b in pairwise(shape.bounds.tolist())]
        return int(np.argmin(weak))


def _slopes(reader: RouteReader, crests: Crests, piece: Piece, first: int) -> Slopes:
    """Directions of the path (2,), across and out by height, where a flight ends at the first crest
    and begins at the last: those of the flight there. None where the path is free."""
    samples = reader.search.stances.com
    last = first + len(piece.rises)
    land, leave = piece.begin - 1, piece.end
    begin = end = None
    if land > 0 and reader.kinds[land] == LAND and piece.start_speed > SLOW:
        flew = first > 0 and crests.place[first - 1] == land - 1
        left = crests.com[first - 1] if flew else samples[reader.sample[land - 1]]
        begin = _drift(reader, land, left, crests.com[first]) / piece.start_speed
    if leave < len(reader.kinds) and reader.kinds[leave] == LEAVE:
        goes_on = last + 1 < len(crests.com) and crests.begin[last + 1] == leave + 2
        landed = crests.com[last + 1] if goes_on else samples[reader.sample[leave + 2]]
        end = _drift(reader, leave + 1, crests.com[last], landed) / max(piece.end_speed or 0, SLOW)
    return begin, end


def _drift(reader: RouteReader, land: int, left: Array, landed: Array) -> Array:
    """Speeds (2,) across and out of a flight [m/s]."""
    lasted = (reader.time[land - 1] + reader.time[land]) / 1e6
    return np.asarray((landed - left)[::2] / max(lasted, 1e-3))


def _in_time(reader: RouteReader, crests: Crests, piece: Piece, first: int) -> bool:
    """Whether a hand that lands from a flight is there in time, the body being at its crest."""
    land = piece.begin - 1
    if piece.pinned[0] or land < 1 or reader.kinds[land] != LAND:
        return True
    phase = reader.phase[land - 1]
    had = reader.classes[phase - LANDED][0] if phase >= LANDED else 0.0
    flown = (reader.time[land - 1] + reader.time[land]) / 1e6
    return needed(reader, crests, land, first) <= had + flown + 1e-6


def _curve(points: Array, slopes: Slopes) -> tuple[Array, PathShape, Ints]:
    """A smooth path over rising points (K + 1, 3): grid (M + 1, 3), shape, and the points' places.

    Across the line and out of the wall it is a cubic spline of the height, straight at an end whose
    slope (2,) is not given.
    """
    height = points[:, 1]
    number = [max(LEAST_GRID, ceil(rise / GRID)) for rise in np.diff(height).tolist()]
    bounds = np.concatenate([[0], np.cumsum(number)]).astype(np.int64)
    grid = np.concatenate([
        *(np.linspace(a, b, n, endpoint=False)
          for (a, b), n in zip(pairwise(height.tolist()), number, strict=True)), height[-1:]])
    spline = CubicSpline(height, points[:, ::2], bc_type=(_end(slopes[0]), _end(slopes[1])))
    across, slope, second = spline(grid), spline(grid, 1), spline(grid, 2)
    ones, nothing = np.ones(len(grid)), np.zeros(len(grid))
    along = np.column_stack([slope[:, 0], ones, slope[:, 1]])
    bend = np.column_stack([second[:, 0], nothing, second[:, 1]])
    size = np.linalg.norm(along, axis=1)
    tangent = along / size[:, None]
    curvature = (bend - (bend * tangent).sum(axis=1)[:, None] * tangent) / (size**2)[:, None]
    at, weight = np.polynomial.legendre.leggauss(4)
    step = np.diff(grid)
    inner = grid[:-1] + 0.5 * step * (1.0 + at[:, None])
    length = np.sqrt(1.0 + (spline(inner, 1) ** 2).sum(axis=-1))
    s = np.concatenate([[0.0], np.cumsum(0.5 * step * (weight @ length))])
    path = np.column_stack([across[:, 0], grid, across[:, 1]])
    shape = PathShape(s=s, height=grid, tangent=tangent, bounds=bounds,
                      curvature=np.stack([curvature[:-1], curvature[1:]], axis=1))
    return path, shape, bounds


def _end(slope: Array | None) -> tuple[Literal[1, 2], Array]:
    """A given first derivative, or a second one of nothing."""
    return (2, np.zeros(2)) if slope is None else (1, slope)


def _strengths(path: Array, bounds: Ints, strength: Array) -> Array:
    """Strengths (M, 2) along a path: even between those of what carries the body from a crest and
    to the next, of crests' ``strength`` (K + 1, 3)."""
    parts = []
    for k, (a, b) in enumerate(pairwise(bounds.tolist())):
        height = path[a:b + 1, 1]
        share = (height - height[0]) / (height[-1] - height[0])
        values = strength[k, 2] + share * (strength[k + 1, 1] - strength[k, 2])
        parts.append(np.stack([values[:-1], values[1:]], axis=1))
    return np.concatenate(parts)


def _moved(reader: RouteReader, paced: list[Paced]) -> dict[int, int]:
    """Number of the crest at which the body stands, for all places of paced pieces."""
    where = {}
    for one in paced:
        rises = one.piece.rises
        for place in range(one.piece.begin, one.piece.end + 1):
            where[place] = one.first + sum(rise < place for rise in rises)
    return where


def _stands(reader: RouteReader, crests: Crests, where: dict[int, int], place: int) -> Array:
    """Centre of mass (3,) at a place that is not in the air."""
    if place in where:
        return np.asarray(crests.com[where[place]])
    return np.asarray(reader.search.stances.com[reader.sample[place]])


def _track(reader: RouteReader, crests: Crests, paced: list[Paced]) -> Track:
    """The clock and the path with the pieces in their places."""
    climb = reader.climb
    where = _moved(reader, paced)
    begins = {one.piece.begin: one for one in paced}
    clock = np.zeros(len(reader.nodes), dtype=np.int64)
    source = int(np.flatnonzero(climb.sources == reader.nodes[0])[0])
    now = int(climb.source_time[source])
    clock[0] = now
    here = _stands(reader, crests, where, 0)
    points = [np.array([[0.0, *here], [now / 1e6, *here]])]
    place = 0
    while place < len(reader.kinds):
        one = begins.get(place)
        if one is not None:
            points.append(_points(one, now))
            for p in range(place, one.piece.end + 1):
                rises = sum(rise < p for rise in one.piece.rises)
                clock[p] = now + (int(one.clock[rises - 1]) if rises else 0)
            place = one.piece.end
            now = int(clock[place])
            here = crests.com[where[place]]
            continue
        before, now = now, now + reader.time[place]
        place += 1
        clock[place] = now
        if reader.kinds[place - 1] != LEAVE:
            there = _stands(reader, crests, where, place)
            if reader.kinds[place - 1] == LAND:
                points.append(_flight(before, now, here, there))
            points.append(np.array([[now / 1e6, *there]]))
            here = there
    path = kept_points(np.concatenate(points))
    area = round(path_area(path, climb.wall.line_x) * 1e6)
    rows = {p: 3 * k for p, k in where.items() if reader.stance[p] >= 0}
    return Track(clock, path, area, rows, crests.postures)


def _points(one: Paced, begin: int) -> Array:
    """Path points (M + 1, 4) of a paced piece; crests stand at whole microseconds."""
    marks = [one.wait, *(one.clock / 1e6).tolist()]
    time = np.empty(len(one.path))
    for (a, b), (start, stop) in zip(pairwise(one.bounds.tolist()), pairwise(marks), strict=True):
        own = one.pacing.time[a:b + 1]
        time[a:b + 1] = start + (own - own[0]) / (own[-1] - own[0]) * (stop - start)
    points = np.column_stack([begin / 1e6 + time, one.path])
    return np.vstack([[begin / 1e6, *one.path[0]], points])


def _flight(begin: int, end: int, left: Array, landed: Array) -> Array:
    """Points (T, 4) of a body that flies: evenly across and out, upward losing g t."""
    share = np.linspace(0.0, 1.0, FLIGHT_POINTS)[:, None]
    lasted = (end - begin) / 1e6
    place = left + share * (landed - left)
    place[:, 1] += 0.5 * GRAVITY * lasted**2 * (share * (1.0 - share))[:, 0]
    return np.column_stack([begin / 1e6 + share[:, 0] * lasted, place])

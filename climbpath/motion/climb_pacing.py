"""Least-time pacing of a path of the centre of mass by a climber of bounded strength.

At speed v a climber of strength S, in body weights at rest, makes the accelerations a with

    |ŷ + a / g| <= S (1 - v / V0)

(the linear force-velocity relation for one common V0). With t the unit tangent, κ the curvature
vector and e = v² / g, the force along the path f = t_y + v̇ / g and that across it add by squares:

    f² + |ŷ - t_y t + κ e|² <= S² (1 - c √e)²,    c = √g / V0

In f and e this is convex but for the term -2 S² c √e. Two rounds of convex problems (``lenses``)
follow each other. From above: √e is replaced by its chord from 0 to the last profile, which is
never above it, so the limits are too wide, and touch the true ones at the last profile; each
round lowers it, until something fits the second kind. From inside: √e is replaced by its tangent
at the last profile, which is never below it; each round keeps within the true limits and is kept
if it is quicker. References: Pham & Pham 2018, arXiv 1707.07239 (the two passes).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from climbpath.errors import DataError, NoPacingError, Problem
from climbpath.motion.lenses import Lenses, fastest, slowest
from climbpath.motion.pacing import Pacing, pacing_of
from climbpath.motion.path_shape import PathShape, path_shape
from climbpath.wall.frames import GRAVITY

Array = NDArray[np.float64]

SLACK = 0.01
"""Body weights that count as none: free fall may need so much, for the path is only sampled."""

UPWARD = np.array([0.0, 1.0, 0.0])

_ROUNDS = 40
_SETTLED = 1e-9
"""Share of the time by which a further round must gain."""
_LEAST_ROOT = 1e-6
"""Least √e [√m] at which a tangent is taken: its slope is without bound at rest."""
_LARGE = 100.0
"""A speed above all that are asked for [m/s]."""
_ABOVE = 1e-8
"""Share of its least time that a phase which is held back is given on top."""
_NEAR = 1e-6
"""A phase held back by less than this share beyond its least time is left so."""
_SLOWER = 5
"""Rounds in which the slowest motion is looked for."""
_RAISES = 8
"""Rounds in which a speed limit may be raised again when neighbours slow its phase too."""


@dataclass(frozen=True)
class _Climb:
    """M intervals. ``strength``, ``steep`` (c), and what the path needs across it, ``across`` +
    2 ``bend`` e + ``turn`` e² (M, 2): at both ends of each; ``free`` (M,): intervals in
    free fall; ``most`` (M + 1,), ``start``, ``end`` [m]: e.
    """

    shape: PathShape
    strength: Array
    steep: Array
    free: NDArray[np.bool_]
    across: Array
    bend: Array
    turn: Array
    most: Array
    start: float
    end: float | None

    def inside(self, e: Array) -> Lenses:
        """Convex limits inside the true ones: √ is replaced by its tangent at e (M + 1,)."""
        root = np.maximum(np.sqrt(e), _LEAST_ROOT)
        return self._lenses(0.5 * root, 0.5 / root)

    def wider(self, above: Array) -> Lenses:
        """Convex limits around the true ones up to e = ``above`` (M + 1,): √ by its chord."""
        return self._lenses(np.zeros(len(above)), 1.0 / np.maximum(np.sqrt(above), _LEAST_ROOT))

    def _lenses(self, constant: Array, factor: Array) -> Lenses:
        """Limits with constant + factor e in the place of √e."""
        pull = self.strength**2 * self.steep
        room = np.stack([
            self.strength**2 - 2.0 * pull * _at_ends(constant) - self.across,
            pull * self.steep - 2.0 * pull * _at_ends(factor) - 2.0 * self.bend,
            self.turn,
        ], axis=-1)
        slope = _slopes(self.shape, self.free)
        return Lenses(np.diff(self.shape.s), slope, room[:, 0], room[:, 1])


def pace_climb(path: ArrayLike | PathShape, strength: ArrayLike, fastest_speed: float, *,
               start_speed: float = 0.0, end_speed: float | None = None,
               most_speed: ArrayLike = np.inf, bounds: Sequence[int] = (),
               least: ArrayLike = (), slack: float = SLACK) -> Pacing:
    """Least-time pacing of a path within a climber's strength; s is the arc length [m].

    ``path`` (M + 1, 3) [m]: right, up and out of points of a smooth path, or its ``PathShape``.
    ``strength`` (M + 1,) or (M, 2) [body weights]: 1 / load at rest, at grid points or at both
    ends of each interval; up to ``slack`` it is free fall, with a force of at most ``slack`` at
    any speed. ``fastest_speed`` [m/s]: V0, may be inf. ``start_speed``, ``end_speed`` [m/s]: None
    leaves the end free. ``most_speed`` [m/s]: a further limit, broadcast to (M + 1,).

    ``bounds`` (K + 1,): grid points at which phases begin and end, from 0 to M; the path's
    curvature may jump there, and so may a strength of shape (M, 2). A ``PathShape`` brings its
    own. ``least`` (K,) [s]: what each phase takes at least. One that would be quicker gets a speed
    limit; where the body cannot brake down to it in time, its slowest motion is the limit.

    The limit on the force holds at both ends of every interval; times err by a share that falls
    with the square of the intervals' length. A path in free fall fixes its speeds: it has to be a
    parabola with points close together. DataError for arguments that do not fit; NoPacingError,
    with a grid point, when no motion along the path was found that keeps within the strength, or
    a phase cannot take that long.
    """
    shape = path if isinstance(path, PathShape) else path_shape(path, bounds)
    climb = _climb(shape, strength, fastest_speed, most_speed, (start_speed, end_speed), slack)
    least_times = np.asarray(least, dtype=np.float64)
    phases = len(shape.bounds) - 1
    if least_times.size and not (least_times.shape == (phases,)
                                 and ((least_times >= 0.0) & (least_times < np.inf)).all()):
        raise DataError([Problem("", "least", f"{least_times}", f"{phases} times, 0 or more")])
    profile = _settled(climb)
    if least_times.size:
        profile = _held_back(climb, profile, least_times)
    return _pacing(climb, profile)


def climb_forces(pacing: Pacing, path: ArrayLike | PathShape, strength: ArrayLike,
                 fastest_speed: float, *, bounds: Sequence[int] = (),
                 slack: float = SLACK) -> Array:
    """Forces of a pacing, ŷ + a / g, (M, 2, 3) [body weights], at both ends of each interval.

    Arguments as for ``pace_climb``. Speeds say the mean acceleration along an interval; at its
    ends the forces along the path stand to each other as the largest that are possible there.
    """
    shape = path if isinstance(path, PathShape) else path_shape(path, bounds)
    climb = _climb(shape, strength, fastest_speed, np.inf, (0.0, None), slack)
    e = pacing.speed**2 / GRAVITY
    ends = np.stack([e[:-1], e[1:]], axis=1)
    most = climb.strength**2 * (1.0 - climb.steep * np.sqrt(ends)) ** 2
    room = np.sqrt(np.maximum(
        most - climb.across - (2.0 * climb.bend + climb.turn * ends) * ends, 0.0))
    slope = _slopes(shape, climb.free)
    total = np.diff(e) / np.diff(shape.s) + slope.sum(axis=1)
    whole = room.sum(axis=1)
    share = np.where(whole[:, None] > 0.0, room / np.where(whole > 0.0, whole, 1.0)[:, None], 0.5)
    tangent = np.stack([shape.tangent[:-1], shape.tangent[1:]], axis=1)
    along = (share * total[:, None])[..., None] * tangent
    across = UPWARD - tangent[..., 1:2] * tangent + shape.curvature * ends[..., None]
    return np.asarray(along + across)


def _slopes(shape: PathShape, free: NDArray[np.bool_]) -> Array:
    """Vertical part of the direction (M, 2) at both ends of each interval.

    In free fall it is the mean over the interval: then the change of speed is exact.
    """
    upward = shape.tangent[:, 1]
    mean = np.diff(shape.height) / np.diff(shape.s)
    return np.where(free[:, None], mean[:, None], np.stack([upward[:-1], upward[1:]], axis=1))


def _needs(shape: PathShape) -> tuple[Array, Array, Array]:
    """Parts of |ŷ - t_y t + κ e|², (M, 2): constant, half the factor of e, factor of e²."""
    level = np.maximum(1.0 - shape.tangent[:, 1] ** 2, 0.0)
    return (np.stack([level[:-1], level[1:]], axis=1), shape.curvature[..., 1],
            (shape.curvature**2).sum(axis=-1))


def _climb(shape: PathShape, strength: ArrayLike, fastest_speed: float, most_speed: ArrayLike,
           ends: tuple[float, float | None], slack: float) -> _Climb:
    """Arguments as arrays of one size."""
    count = len(shape.s) - 1
    strong = np.asarray(strength, dtype=np.float64)
    problems = []
    if strong.shape not in ((count + 1,), (count, 2)):
        expected = f"shape ({count + 1},) or ({count}, 2)"
        problems.append(Problem("", "strength", f"shape {strong.shape}", expected))
    elif not ((strong >= 0.0) & (strong < np.inf)).all():
        problems.append(Problem("", "strength", "", "numbers of 0 or more"))
    try:
        most = np.array(np.broadcast_to(np.asarray(most_speed, dtype=np.float64), (count + 1,)))
    except ValueError:
        most = np.full(count + 1, np.nan)
    if not (most >= 0.0).all():
        problems.append(Problem("", "most_speed", "", "one speed, or one a grid point"))
    if not fastest_speed > 0.0:
        problems.append(Problem("", "fastest_speed", f"{fastest_speed}", "more than 0"))
    for key, speed in (("start_speed", ends[0]), ("end_speed", ends[1] or 0.0), ("slack", slack)):
        if not 0.0 <= speed < np.inf:
            problems.append(Problem("", key, f"{speed}", "0 or more"))
    if problems:
        raise DataError(problems)
    if strong.ndim == 1:
        strong = np.stack([strong[:-1], strong[1:]], axis=1)
    free: NDArray[np.bool_] = np.asarray(strong <= slack)
    steep = np.where(free, 0.0, np.sqrt(GRAVITY) / fastest_speed)
    held = np.zeros(count + 1, dtype=np.bool_)
    held[:-1] |= ~free[:, 0]
    held[1:] |= ~free[:, 1]
    most = np.minimum(most, np.where(held, min(fastest_speed, _LARGE), _LARGE))
    start, end = (None if speed is None else speed**2 / GRAVITY for speed in ends)
    flight = free[:, 0] & free[:, 1]
    return _Climb(shape, np.where(free, slack, strong), steep, flight, *_needs(shape),
                  most**2 / GRAVITY, start or 0.0, end)


def _at_ends(values: Array) -> Array:
    """Values at grid points (M + 1,) at both ends of each interval (M, 2)."""
    return np.stack([values[:-1], values[1:]], axis=1)


def _pacing(climb: _Climb, e: Array) -> Pacing:
    return pacing_of(climb.shape.s, np.sqrt(GRAVITY * e))


def _settled(climb: _Climb, guess: Array | None = None) -> Array:
    """The profile e (M + 1,) [m] that further rounds no longer quicken.

    ``guess`` (M + 1,): a profile near it, if one is known.
    """
    found = None if guess is None else _tried(climb, guess)
    above = climb.most
    for _ in range(_ROUNDS):
        if found is not None:
            break
        # If nothing keeps within the wider limits, nothing keeps within the strength.
        above = _round(climb, climb.wider(above))
        found = _tried(climb, above)
    if found is None:
        raise NoPacingError("no motion was found that keeps within the strength", 0)
    time = _time(climb, found)
    for _ in range(_ROUNDS if climb.steep.any() else 0):
        better = _tried(climb, found)
        if better is None:
            # By rounding: what was found before stays right.
            break
        before, time = time, _time(climb, better)
        if time < before:
            found = better
        if time >= before * (1.0 - _SETTLED):
            break
    return found


def _tried(climb: _Climb, e: Array) -> Array | None:
    """A round of the convex problem that touches the true one at e; None if nothing fits it."""
    try:
        return _round(climb, climb.inside(e))
    except NoPacingError:
        return None


def _round(climb: _Climb, lenses: Lenses) -> Array:
    return fastest(lenses, climb.most, climb.start, climb.end)


def _time(climb: _Climb, e: Array) -> float:
    root = np.sqrt(GRAVITY * e)
    with np.errstate(divide="ignore"):
        return float((2.0 * np.diff(climb.shape.s) / (root[:-1] + root[1:])).sum())


def _phase_times(climb: _Climb, e: Array) -> Array:
    return np.diff(_pacing(climb, e).time[climb.shape.bounds])


def _held_back(climb: _Climb, e: Array, least: Array) -> Array:
    """The profile with a speed limit in each phase that would be quicker than it may.

    A phase keeps its speeds at both ends if it can slow down and catch up between them; so the
    others stay as they were. Otherwise the limit holds at its last point too, then at its first.
    """
    bounds = climb.shape.bounds
    limits = np.full(len(least), np.inf)
    kept = np.ones(len(bounds), dtype=np.bool_)
    further = range(len(limits))
    for turn in range(_ROUNDS):
        times = _phase_times(climb, e)
        changed = limits.copy()
        short = np.flatnonzero(times < least).tolist()
        slow = _slowed(climb, e, kept) if np.isfinite(limits).any() or short else e
        for k in short:
            # The end first: what comes before the phase then stays as it was.
            for part in (slice(k + 1, k + 2), *(slice(max(0, k - n), k + 2 + n) for n in further)):
                if _longest(climb, k, slow) >= least[k] * (1.0 + 2.0 * _ABOVE):
                    break
                kept[part] = False
                slow = _slowed(climb, e, kept)
        for k in short:
            changed[k] = _limit(climb, k, e, slow, float(least[k]))
        if turn < _RAISES:
            late = np.isfinite(limits) & (times > least * (1.0 + _NEAR))
            for k in np.flatnonzero(late).tolist():
                changed[k] = _raised(climb, k, e, float(limits[k]), float(least[k]))
        if (changed == limits).all():
            return e
        limits = changed
        allowed = np.full(len(e), np.inf)
        for k, limit in enumerate(limits.tolist()):
            part = slice(bounds[k], bounds[k + 1] + 1)
            allowed[part] = np.minimum(allowed[part], limit)
        allowed = np.minimum(climb.most, np.maximum(allowed, slow))
        e = _settled(replace(climb, most=allowed), np.minimum(e, allowed))
    k = int(np.argmax(least - _phase_times(climb, e)))
    raise NoPacingError(f"phase {k} cannot be held back", int(bounds[k]))


def _slowed(climb: _Climb, e: Array, kept: NDArray[np.bool_]) -> Array:
    """The slowest profile below e that is e at the bounds that are kept."""
    least = np.zeros(len(e))
    at = climb.shape.bounds[kept]
    # A little less: e itself may miss the limits by rounding.
    least[at] = e[at] * (1.0 - 1e-9)
    slow = e
    for _ in range(_SLOWER if climb.steep.any() else 1):
        try:
            lower = slowest(climb.inside(slow), least, e, climb.start, climb.end)
        except NoPacingError:
            # By rounding: what was found before stays right.
            break
        slow = np.minimum(lower, slow)
    return slow


def _longest(climb: _Climb, k: int, slow: Array) -> float:
    """How long phase k takes at its slowest [s]; inf if it may stop."""
    part = slice(climb.shape.bounds[k], climb.shape.bounds[k + 1] + 1)
    root = np.sqrt(GRAVITY * slow[part])
    both = root[:-1] + root[1:]
    return float((2.0 * np.diff(climb.shape.s[part]) / both).sum()) if both.all() else np.inf


def _limit(climb: _Climb, k: int, e: Array, slow: Array, least: float) -> float:
    """The e at which cutting a profile off makes phase k take its least time."""
    begin, stop = climb.shape.bounds[k], climb.shape.bounds[k + 1]
    part = slice(begin, stop + 1)
    twice = 2.0 * np.diff(climb.shape.s[part])
    speed, lowest = np.sqrt(GRAVITY * e[part]), np.sqrt(GRAVITY * slow[part])
    aim = least * (1.0 + _ABOVE)

    def time(limit: float) -> float:
        cut = np.minimum(speed, np.maximum(limit, lowest))
        both = cut[:-1] + cut[1:]
        return float((twice / both).sum()) if both.all() else np.inf

    low, high = 0.0, float(speed.max())
    if time(low) < aim:
        raise NoPacingError(f"phase {k} takes {time(low):.6g} s at most, not {least:.6g} s",
                            int(begin))
    for _ in range(60):
        middle = 0.5 * (low + high)
        if time(middle) < aim:
            high = middle
        else:
            low = middle
    return low**2 / GRAVITY


def _raised(climb: _Climb, k: int, e: Array, limit: float, least: float) -> float:
    """The e with which phase k takes its least time if only the time at the limit shrinks."""
    part = slice(climb.shape.bounds[k], climb.shape.bounds[k + 1] + 1)
    speed = np.sqrt(GRAVITY * e[part])
    times = 2.0 * np.diff(climb.shape.s[part]) / (speed[:-1] + speed[1:])
    full = e[part] >= limit * (1.0 - _NEAR)
    at_limit = float(times[full[:-1] & full[1:]].sum())
    rest = float(times.sum()) - at_limit
    aim = least * (1.0 + _ABOVE)
    return limit * (at_limit / (aim - rest)) ** 2 if aim > rest else np.inf

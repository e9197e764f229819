"""The fastest profile of speeds when the force along a path is bounded at each grid point.

With e = v² / g [m] an interval of length Δ takes e from x to y. The force f along the path, in
body weights, is the acceleration by g and the slope r there (the vertical part of the direction).
It is linear in the interval, may jump at its ends, and is bounded there by what the force across
the path leaves:

    y - x = Δ (f_near - r_near + f_far - r_far),    f² <= q(e) = q0 + q1 e - q2 e²,    q2 >= 0

with e = x at the near end and e = y at the far end. So a pair of x and y is possible when

    |y - x + Δ (r_near + r_far)| <= Δ (√q_near(x) + √q_far(y)),

a convex lens about the line of free fall whose edges are roots of quadratics. Both passes of Pham
& Pham 2018 (arXiv 1707.07239) are in closed form then: backward, the range of e from which the end
can be reached; forward, the largest e that stays inside. The error of the time falls with Δ².
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, sqrt

import numpy as np
from numpy.typing import NDArray

from climbpath.errors import NoPacingError

Array = NDArray[np.float64]
Row = tuple[float, ...]

_CLOSE = 1e-10
"""What counts as nothing beside the e at hand and the length of an interval."""
_TINY = 1e-12
"""An e [m] as good as rest."""
_GOLDEN = 0.5 * (sqrt(5.0) - 1.0)
_CUTS = 14
"""Golden cuts with which two speeds are traded."""
_NEAR = 0.5
"""Share of the largest e from which a speed near the tip of a lens is worth trading."""


@dataclass(frozen=True)
class Lenses:
    """M intervals. ``step`` (M,): Δ [m]; ``slope`` (M, 2): r at both ends; ``near``, ``far``
    (M, 3): q0, q1 [1/m], q2 [1/m²] there.
    """

    step: Array
    slope: Array
    near: Array
    far: Array


def roots(two: Array, one: Array, zero: Array) -> tuple[Array, Array]:
    """Lower and upper root of two x² + one x + zero, with two >= 0; any shape.

    Roots that lie at infinity are -inf and inf; NaN where the whole is above 0 everywhere.
    """
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        root = np.sqrt(one * one - 4.0 * two * zero)
        # The sum that does not cancel.
        half = -0.5 * (one + np.copysign(root, one))
        by_two, by_half = half / two, zero / half
    flat = half == 0.0
    lower = np.where(half < 0.0, by_two, by_half)
    upper = np.where(half < 0.0, by_half, by_two)
    # With no root of the sum there is x² = 0, or a constant: all x if it is not above 0.
    lower = np.where(flat, np.where(two > 0.0, 0.0, -inf), lower)
    upper = np.where(flat, np.where(two > 0.0, 0.0, inf), upper)
    none = np.isnan(root) | (flat & (two == 0.0) & (zero > 0.0))
    return np.where(none, np.nan, lower), np.where(none, np.nan, upper)


def possible(room: Array) -> tuple[Array, Array]:
    """Least and largest e with q(e) >= 0, for q's (..., 3); NaN where there is none."""
    return roots(room[..., 2], -room[..., 1], -room[..., 0])


def fastest(lenses: Lenses, most: Array, start: float, end: float | None) -> Array:
    """The largest profile e (M + 1,) [m] with e <= ``most`` (M + 1,), from start to end.

    An ``end`` of None is free. Near the tips of lenses no profile is largest everywhere: on a grid
    of finite steps the quicker one of two rules is taken. NoPacingError, with the grid point,
    when there is none.
    """
    rows = _rows(lenses, 1.0), _rows(lenses, -1.0)
    ranges, limits, ends = _attainable(lenses), (np.zeros(len(most)), most), (start, end)
    low, high, tips = _controllable(rows, ranges, limits, ends, None)
    profile = _largest(rows[0], low, high, start)
    near = profile / np.maximum(high, _TINY)
    if not (near[tips] >= 1.0 - _CLOSE).any():
        return profile
    try:
        low, high, _ = _controllable(rows, ranges, limits, ends, (near > _NEAR).tolist())
    except NoPacingError:
        return profile
    other = _largest(rows[0], low, high, start)
    return min(profile, other, key=lambda e: _time(lenses.step, e))


def _largest(forth: list[Row], low: list[float], high: list[float], start: float) -> Array:
    """The largest e (M + 1,) inside these ranges, step by step."""
    profile = np.empty(len(low))
    profile[0] = now = start
    for i, row in enumerate(forth):
        profile[i + 1] = now = min(max(_after(row, now), low[i + 1]), high[i + 1])
    return profile


def _time(step: Array, e: Array) -> float:
    """Time along a profile, but for a factor."""
    root = np.sqrt(np.maximum(e, _TINY))
    return float((step / (root[:-1] + root[1:])).sum())


def slowest(lenses: Lenses, least: Array, most: Array, start: float, end: float | None) -> Array:
    """The least profile e (M + 1,) [m] with ``least`` <= e <= ``most``, else as ``fastest``."""
    back = _rows(lenses, -1.0)
    rows = _rows(lenses, 1.0), back
    low, high, _ = _controllable(rows, _attainable(lenses), (least, most), (start, end), None)
    profile = np.empty(len(most))
    profile[0] = now = start
    for i, row in enumerate(back):
        profile[i + 1] = now = min(max(-_after(row, -now), low[i + 1]), high[i + 1])
    return profile


def _rows(lenses: Lenses, sign: float) -> list[Row]:
    """What the passes need of each interval; with sign -1, of the plane turned by half a turn."""
    step = lenses.step
    mirror = np.array([1.0, sign, 1.0])
    near, far = lenses.near * mirror, lenses.far * mirror
    (_, near_high), (_, far_high) = possible(near), possible(far)
    a_near, a_far = 1.0 + step**2 * near[:, 2], 1.0 + step**2 * far[:, 2]
    columns = (step, sign * step * lenses.slope.sum(axis=1), *near.T, a_near, near_high,
               *far.T, a_far, far_high, _turning(step, far)[1])
    return list(zip(*(column.tolist() for column in columns), strict=True))


def _turning(step: Array, room: Array) -> tuple[Array, Array]:
    """Where e - Δ √q(e) is least and e + Δ √q(e) largest (M,)."""
    q0, q1, q2 = room.T
    a = 1.0 + step**2 * q2
    return roots(q2 * a, -q1 * a, 0.25 * (step * q1) ** 2 - q0)


def _attainable(lenses: Lenses) -> tuple[Array, Array]:
    """Least and largest e (M,) that each interval can end with, whatever it begins with.

    NoPacingError, with the grid point at its end, for an interval that nothing can pass.
    """
    step, (near_slope, far_slope) = lenses.step, lenses.slope.T
    ranges = []
    for sign in (1.0, -1.0):
        mirror = np.array([1.0, sign, 1.0])
        near, far = lenses.near * mirror, lenses.far * mirror
        best = _turning(step, near)[1]
        q0, q1, q2 = near.T
        with np.errstate(invalid="ignore"):
            gain = best + step * np.sqrt(np.maximum(q0 + (q1 - q2 * best) * best, 0.0))
        gain = np.where(best < inf, gain, inf)
        low, high = _met(gain - sign * step * (near_slope + far_slope), step, far)
        ranges.append((low, high) if sign > 0.0 else (-high, -low))
    bottom, top = np.maximum(ranges[0][0], ranges[1][0]), np.minimum(ranges[0][1], ranges[1][1])
    impossible = np.flatnonzero(~(bottom <= top + _CLOSE * (np.abs(bottom) + step)))
    if impossible.size:
        raise NoPacingError("too little strength for any speed", int(impossible[-1]) + 1)
    return bottom, top


def _met(on: Array, step: Array, room: Array) -> tuple[Array, Array]:
    """Least and largest e with Δ √q(e) >= e - on (M,); NaN where there is none."""
    q0, q1, q2 = room.T
    low, high = possible(room)
    a = 1.0 + step**2 * q2
    with np.errstate(invalid="ignore"):
        turn = 0.5 * step**2 * (q1 - 2.0 * q2 * on)
        root = np.sqrt(turn**2 + a * step**2 * (q0 + (q1 - q2 * on) * on))
        least, most = on + (turn - root) / a, on + (turn + root) / a
    return np.where(on >= low, low, least), np.where(on >= high, high, most)


def _controllable(rows: tuple[list[Row], list[Row]], ranges: tuple[Array, Array],
                  limits: tuple[Array, Array], ends: tuple[float, float | None],
                  trade: list[bool] | None) -> tuple[list[float], list[float], list[int]]:
    """Least and largest e at each grid point from which the end can be reached.

    Also the grid points near the tip of a lens, where the largest e leaves less than the largest
    at the next; where ``trade`` says so the largest there is traded for a smaller one.
    NoPacingError where there is none, or if the start does not lie between them.
    """
    forth, back = rows
    bottom, top = ranges[0].tolist(), ranges[1].tolist()
    start, end = ends
    low, high = limits[0].tolist(), limits[1].tolist()
    if end is not None:
        low[-1], high[-1] = end, min(high[-1], end)
    tips: list[int] = []
    for i in range(len(forth), 0, -1):
        row = forth[i - 1]
        close = _CLOSE * (abs(low[i]) + row[0])
        least, largest = max(low[i], bottom[i - 1]), min(high[i], top[i - 1])
        if least > largest + close:
            raise NoPacingError("no speed there keeps within the limits and reaches the end", i)
        low[i], high[i] = min(least, largest), max(least, largest)
        x, y = _before(row, low[i], high[i])
        low[i - 1] = max(low[i - 1], -_before(back[i - 1], -high[i], -low[i])[0])
        if i > 1 and y < high[i]:
            tips.append(i - 1)
            if trade is not None and trade[i - 1]:
                x = max(_traded(row, y, high[i], high[i - 1]), min(x, low[i - 1]))
        high[i - 1] = min(high[i - 1], x)
    close = _CLOSE * (start + forth[0][0])
    if not low[0] - close <= start <= high[0] + close:
        raise NoPacingError(f"squared speeds over g from {low[0]:.6g} to {high[0]:.6g} m reach "
                            f"the end, not {start:.6g} m", 0)
    return low, high, tips


def _before(row: Row, low: float, high: float) -> tuple[float, float]:
    """Largest x for any y from low to high, and the largest such y."""
    y = max(low, min(high, row[-1]))
    reach = _reach(row, y)
    if y + row[1] - reach > row[6]:
        # x has to gain too much for its top: a smaller y does better, best one in free fall.
        y = max(low, min(y, row[6] - row[1]))
        reach = _reach(row, y)
    return _edge(y + row[1], reach, row[0], row[2:7]), y


def _traded(row: Row, y: float, high: float, most: float) -> float:
    """The x up to ``most`` whose inverse speed and that of the y it leaves have the least sum.

    Near the tips of a lens a larger x leaves a smaller y, even none.
    """

    def before(at: float) -> float:
        return _edge(at + row[1], _reach(row, at), row[0], row[2:7])

    def cost(at: float) -> float:
        return 1.0 / sqrt(max(min(before(at), most), _TINY)) + 1.0 / sqrt(max(at, _TINY))

    width = high - y
    first, second = high - _GOLDEN * width, y + _GOLDEN * width
    cost_first, cost_second = cost(first), cost(second)
    for _ in range(_CUTS):
        width *= _GOLDEN
        if cost_first <= cost_second:
            high, second, cost_second = second, first, cost_first
            first = high - _GOLDEN * width
            cost_first = cost(first)
        else:
            y, first, cost_first = first, second, cost_second
            second = y + _GOLDEN * width
            cost_second = cost(second)
    return before(first if cost_first <= cost_second else second)


def _reach(row: Row, y: float) -> float:
    """Δ √q(y) at the far end."""
    room = row[7] + (row[8] - row[9] * y) * y
    return row[0] * sqrt(room) if room > 0.0 else 0.0


def _after(row: Row, x: float) -> float:
    """Largest y for one x."""
    step, rise, p0, p1, p2, _, _, q0, q1, q2, a, top, _ = row
    room = p0 + (p1 - p2 * x) * x
    reach = step * sqrt(room) if room > 0.0 else 0.0
    return _edge(x - rise, reach, step, (q0, q1, q2, a, top))


def _edge(fall: float, reach: float, step: float, room: Row) -> float:
    """Largest e with q(e) >= 0 and abs(e - fall) <= reach + Δ √q(e)."""
    q0, q1, q2, a, top = room
    on = fall + reach
    if on >= top:
        on = fall - reach
        if on <= top:
            return top
    square = step * step
    turn = 0.5 * square * (q1 - 2.0 * q2 * on)
    inside = turn * turn + a * square * (q0 + (q1 - q2 * on) * on)
    # Below 0 by rounding only: that there is such an e is known here.
    return on + (turn + sqrt(inside)) / a if inside > 0.0 else on + turn / a

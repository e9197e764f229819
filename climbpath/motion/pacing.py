"""Time-optimal pacing of a given path under linear rows.

A point moves along a path q(s). With u the acceleration of s and x the square of its speed, many
limits take the form of rows

    a(s) u + b(s) x + c(s) <= 0

given at M + 1 grid points. Between grid points u is constant, so that x_{i+1} = x_i + 2 (s_{i+1} -
s_i) u_i and the time of an interval is 2 (s_{i+1} - s_i) / (√x_i + √x_{i+1}).

A backward pass finds at each grid point the x from which the end can be reached, an interval; a
forward pass then takes the largest u that stays inside. Both need the least or largest x or u of a
problem in two variables. u is eliminated from every pair of rows that bound it from opposite
sides (Fourier-Motzkin), without a division: a point where all a vanish needs no special case.

Reference: Pham & Pham 2018, arXiv 1707.07239. The forces of a climber: ``climb_pacing``.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from climbpath.errors import DataError, NoPacingError, Problem

Array = NDArray[np.float64]

_ROUNDING = 1e-12
"""Share of a row's largest term that counts as nothing."""
_CLOSE = 1e-9
"""Share by which the forward pass may miss an interval of the backward pass."""
_UNBOUNDED = 1e200
"""A squared speed that stands for no bound."""
_PAIRS_AT_ONCE = 2_000_000
"""Pairs of rows held in memory at once."""


@dataclass(frozen=True)
class Pacing:
    """A motion along a path with M intervals.

    ``s`` (M + 1,): where the grid points lie on the path; ``speed`` (M + 1,): its rate there;
    ``time`` (M + 1,) [s]: since the start; ``duration`` [s]. For ``climb_pacing`` s is the arc
    length [m], speed [m/s].
    """

    s: Array
    speed: Array
    time: Array
    duration: float

    @property
    def acceleration(self) -> Array:
        """(M,): half the change of the squared speed, by the length of the interval."""
        return np.diff(self.speed**2) / (2.0 * np.diff(self.s))


def pacing_of(s: Array, speed: Array) -> Pacing:
    """Pacing with these speeds (M + 1,) at the grid points s (M + 1,).

    NoPacingError where two speeds in a row are 0: the motion would stop for good.
    """
    both = speed[:-1] + speed[1:]
    if not (both > 0.0).all():
        raise NoPacingError("the motion stops for good", int(np.argmin(both)))
    time = np.concatenate([[0.0], np.cumsum(2.0 * np.diff(s) / both)])
    return Pacing(s, speed, time, float(time[-1]))


def pace_rows(s: ArrayLike, a: ArrayLike, b: ArrayLike, c: ArrayLike, *,
              most: ArrayLike = np.inf, start: float = 0.0, end: float | None = 0.0,
              far_end: bool = True) -> Pacing:
    """Least-time pacing with a u + b x + c <= 0 at every grid point.

    ``s`` (M + 1,): increasing grid. ``a``, ``b``, ``c`` (M + 1, R), in one unit per row. ``most``:
    largest speed of s, broadcast to (M + 1,). ``start``, ``end``: speed of s at the ends; an
    ``end`` of None is free. With ``far_end`` the rows of a grid point hold also for the u of the
    interval before it (exact at both ends of an interval), else only for that of the one after it.

    DataError for arguments that do not fit together; NoPacingError, with a grid point, when no
    motion keeps the rows.
    """
    grid, rows, limit = _checked(s, (a, b, c), most, start, end)
    twice = 2.0 * np.diff(grid)
    near = [row[:-1] for row in rows]
    if far_end:
        far_a, far_b, far_c = (row[1:] for row in rows)
        u_part = far_a + twice[:, None] * far_b
        near = [np.concatenate(pair, axis=1)
                for pair in zip(near, (u_part, far_b, far_c), strict=True)]
    between = _scaled(*near)
    low, high = np.zeros(len(grid)), np.minimum(limit**2, _UNBOUNDED)
    _keep_static_range(between, low[:-1], high[:-1])
    _keep_static_range(_scaled(*(row[-1:] for row in rows)), low[-1:], high[-1:])
    if end is not None:
        low[-1], high[-1] = max(low[-1], end**2), min(high[-1], end**2)
    _controllable(twice, between, low, high)
    x = _forward(twice, between, (low, high), start**2)
    if x.max() == _UNBOUNDED:
        raise NoPacingError("nothing bounds the speed there", int(np.argmax(x)))
    return pacing_of(grid, np.sqrt(x))


def _checked(s: ArrayLike, rows: tuple[ArrayLike, ...], most: ArrayLike, start: float,
             end: float | None) -> tuple[Array, list[Array], Array]:
    """Arguments as arrays of one size."""
    grid = np.asarray(s, dtype=np.float64)
    arrays = [np.asarray(row, dtype=np.float64) for row in rows]
    problems = []
    if grid.ndim != 1 or len(grid) < 2 or not (np.diff(grid) > 0.0).all():
        problems.append(Problem("", "s", "", "at least two numbers, each larger than the last"))
    for key, array in zip("abc", arrays, strict=True):
        if array.ndim != 2 or array.shape != (grid.size, arrays[0].shape[-1]):
            found = f"an array of shape {array.shape}"
            problems.append(Problem("", key, found, f"{grid.size} grid points, the rows of a"))
        elif not np.isfinite(array).all():
            problems.append(Problem("", key, "", "finite numbers"))
    try:
        limit = np.array(np.broadcast_to(np.asarray(most, dtype=np.float64), (grid.size,)))
    except ValueError:
        limit = np.full(grid.size, np.nan)
    if not (limit >= 0.0).all():
        problems.append(Problem("", "most", "", "one speed, or one a grid point, 0 or more"))
    for key, speed in (("start", start), ("end", 0.0 if end is None else end)):
        if not 0.0 <= speed < np.inf:
            problems.append(Problem("", key, f"{speed}", "a speed, 0 or more"))
    if problems:
        raise DataError(problems)
    return grid, arrays, limit


def _scaled(a: Array, b: Array, c: Array) -> tuple[Array, Array, Array]:
    """Rows with a largest factor of 1; those that say nothing stay 0."""
    largest = np.maximum(np.maximum(np.abs(a), np.abs(b)), np.abs(c))
    by = np.where(largest > 0.0, largest, 1.0)
    return a / by, b / by, c / by


def _keep_static_range(rows: tuple[Array, Array, Array], low: Array, high: Array) -> None:
    """Shrink ranges of x to those for which some u keeps the rows there."""
    a, b, c = rows
    size = max(1, _PAIRS_AT_ONCE // max(1, a.shape[1] ** 2))
    for k in range(0, len(a), size):
        part = slice(k, k + size)
        least, largest = _static_range(a[part], b[part], c[part])
        low[part] = np.maximum(low[part], least)
        high[part] = np.minimum(high[part], largest)


def _static_range(a: Array, b: Array, c: Array) -> tuple[Array, Array]:
    """Least and largest x (M,) for which some u keeps the rows (M, R); inf, -inf if none."""
    up, down = np.maximum(a, 0.0)[:, :, None], np.minimum(a, 0.0)[:, None, :]
    # Each pair that bounds u from above and from below, and the rows without u.
    factor = up * b[:, None, :] - down * b[:, :, None]
    constant = up * c[:, None, :] - down * c[:, :, None]
    scale = up - down
    pair = (up > 0.0) & (down < 0.0)
    factor, constant, scale = (
        np.concatenate([np.where(pair, of_pair, 0.0).reshape(len(a), -1), alone], axis=1)
        for of_pair, alone in (
            (factor, np.where(a == 0.0, b, 0.0)),
            (constant, np.where(a == 0.0, c, 0.0)),
            (scale, np.ones_like(a)),
        )
    )
    return _bounds(factor, constant, _ROUNDING * scale)


def _bounds(factor: Array, constant: Array, tolerance: Array) -> tuple[Array, Array]:
    """Least and largest x with factor x + constant <= 0 in every row, along the last axis."""
    with np.errstate(divide="ignore", invalid="ignore"):
        at = -constant / factor
    largest = np.where(factor > tolerance, at, np.inf).min(axis=-1)
    least = np.where(factor < -tolerance, at, -np.inf).max(axis=-1)
    impossible = ((np.abs(factor) <= tolerance) & (constant > tolerance)).any(axis=-1)
    return np.where(impossible, np.inf, least), np.where(impossible, -np.inf, largest)


def _controllable(twice: Array, rows: tuple[Array, Array, Array], low: Array, high: Array) -> None:
    """Shrink the range of x at each grid point to that from which the end can be reached."""
    a, b, c = rows
    step = twice[:, None]
    # A row together with low <= x + 2 Δ u (where a > 0) or x + 2 Δ u <= high (where a < 0).
    factor, constant = step * b - a, step * c
    up, down = np.maximum(a, 0.0), np.minimum(a, 0.0)
    tolerance = _ROUNDING * (step * (np.abs(b) + np.abs(c)) + np.abs(a))
    with np.errstate(divide="ignore"):
        inverse = np.where(np.abs(factor) > tolerance, -1.0 / factor, 0.0)
    no_most = np.where(factor > tolerance, 0.0, np.inf)
    no_least = np.where(factor < -tolerance, 0.0, -np.inf)
    level = inverse == 0.0
    _refuse_empty(low, high, len(low) - 1)
    for i in range(len(twice) - 1, -1, -1):
        value = constant[i] + up[i] * low[i + 1] + down[i] * high[i + 1]
        at = inverse[i] * value
        high[i] = min(high[i], float((at + no_most[i]).min()))
        low[i] = max(low[i], float((at + no_least[i]).max()))
        if level[i].any():
            scale = np.abs(constant[i]) + up[i] * low[i + 1] - down[i] * high[i + 1]
            if (level[i] & (value > _CLOSE * scale)).any():
                raise NoPacingError("no acceleration there keeps within the limits", i)
        _refuse_empty(low, high, i)


def _refuse_empty(low: Array, high: Array, i: int) -> None:
    """NoPacingError for an empty range; one that is empty by rounding becomes a point."""
    if low[i] <= high[i]:
        return
    # Infinite: some row alone cannot be kept.
    if low[i] < np.inf and low[i] - high[i] <= _CLOSE * (abs(low[i]) + abs(high[i])):
        low[i] = high[i] = max(0.0, 0.5 * (low[i] + high[i]))
        return
    raise NoPacingError("no speed there keeps within the limits and reaches the end", i)


def _forward(twice: Array, rows: tuple[Array, Array, Array], ranges: tuple[Array, Array],
             start: float) -> Array:
    """Largest x (M + 1,) step by step, inside the ranges."""
    a, b, c = rows
    low, high = ranges
    close = _CLOSE * (low[0] + start)
    if not low[0] - close <= start <= high[0] + close:
        raise NoPacingError(f"squared speeds {low[0]:.6g} to {high[0]:.6g} reach the end, "
                            f"not {start:.6g}", 0)
    with np.errstate(divide="ignore"):
        inverse = np.where(np.abs(a) > _ROUNDING, -1.0 / a, 0.0)
    no_most = np.where(a > _ROUNDING, 0.0, np.inf)
    no_least = np.where(a < -_ROUNDING, 0.0, -np.inf)
    x = np.empty(len(low))
    x[0] = now = start
    for i, step in enumerate(twice.tolist()):
        at = (b[i] * now + c[i]) * inverse[i]
        most, least = float((at + no_most[i]).min()), float((at + no_least[i]).max())
        after = min(now + step * most, high[i + 1])
        lowest = max(now + step * least, low[i + 1])
        # Where the two bounds meet, rounding parts them.
        if lowest > after + _CLOSE * (now + step * (abs(most) + abs(least))):
            raise NoPacingError("no acceleration there keeps within the limits", i)
        x[i + 1] = now = max(after, low[i + 1])
    return x

"""Closed forms of motion: least times, push-offs, flights, reaches and measures of a path.

Small pure functions that broadcast over arrays; the model and its checks use the same ones. Units:
m, s, kg, N. All raise DataError, with every problem, for values that are not above 0 where they
have to be.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import lambertw
from shapely import MultiPoint

from climbpath.errors import DataError, Problem
from climbpath.wall.frames import GRAVITY

Array = NDArray[np.float64]

_LAMBERT: Any = lambertw
"""Lambert's W; scipy's type stubs do not know it for arrays of floats."""


class TimeAndSpeed(NamedTuple):
    """``time`` [s] and ``speed`` [m/s], of the shape that the arguments broadcast to."""

    time: Array
    speed: Array


def _positive(**values: ArrayLike) -> list[Array]:
    """The values as arrays; DataError names those that are not above 0."""
    arrays = {key: np.asarray(value, dtype=np.float64) for key, value in values.items()}
    problems = [Problem("", key, f"{array}", "more than 0")
                for key, array in arrays.items() if not (array > 0.0).all()]
    if problems:
        raise DataError(problems)
    return list(arrays.values())


# Rest to rest


def rest_to_rest(distance: ArrayLike, forward: ArrayLike, backward: ArrayLike,
                 most_speed: ArrayLike = np.inf) -> TimeAndSpeed:
    """Least time over a distance [m] from rest to rest, and the peak speed.

    ``forward``, ``backward`` [m/s²]: largest acceleration a+ and braking a-. Full acceleration
    and full braking meet at the peak v = √(2 D a+ a- / (a+ + a-)), after T = √(2 D (a+ + a-) /
    (a+ a-)) in all. Where v would be above ``most_speed`` V, it is V for a while:
    T = D / V + V (1 / a+ + 1 / a-) / 2.
    """
    d, plus, minus, most = _positive(distance=distance, forward=forward, backward=backward,
                                     most_speed=most_speed)
    inverse = 1.0 / plus + 1.0 / minus
    peak = np.minimum(np.sqrt(2.0 * d / inverse), most)
    return TimeAndSpeed(d / peak + 0.5 * peak * inverse, peak)


# Push-off


def take_off_speed(mass: ArrayLike, push: ArrayLike, force: ArrayLike,
                   speed: ArrayLike) -> Array:
    """Speed [m/s] after a vertical push-off, from means over the whole push-off.

    ``push`` h [m]: way of the centre of mass; ``force`` F0 [N] and ``speed`` V0 [m/s]: where the
    line of *mean* force over *mean* speed meets the axes, over many push-offs. With F = F0 (1 - v
    / (2 V0)) as the mean force of a push-off that ends at v, m v² / 2 = (F - m g) h gives

        v = (h / m) (√(F0² / (4 V0²) + (2 m / h) (F0 - m g)) - F0 / (2 V0)),

    0 where F0 does not lift the body. Source: Samozino et al., force-velocity profiles of jumps.

    These F0 and V0 are not those of ``push_off``: put into the law of each instant they make a
    weaker jump (2.69 m/s in place of 3.31 m/s for 75 kg, .4 m, 3000 N, 4 m/s). A fit of one kind
    goes with the formula of the same kind only.
    """
    m, h, f, v = _positive(mass=mass, push=push, force=force, speed=speed)
    half = f / (2.0 * v)
    root = np.sqrt(half**2 + (2.0 * m / h) * np.maximum(f - m * GRAVITY, 0.0))
    return np.asarray((h / m) * (root - half))


def push_off(mass: ArrayLike, push: ArrayLike, force: ArrayLike,
             speed: ArrayLike) -> TimeAndSpeed:
    """Time and speed of a vertical push-off whose force at each instant is F0 (1 - v / V0).

    Arguments as for ``take_off_speed``, but of each instant: see there for the trap. From m dv/dt
    = F0 (1 - v / V0) - m g, with a = F0 / m - g and k = F0 / (m V0), follow v = (a / k) (1 -
    e^(-k t)) and h k² / a = k t - 1 + e^(-k t); the time is k t = 1 + c + W(-e^(-1 - c)) with c =
    h k² / a and W the principal branch of Lambert's function. Time inf and speed 0 where F0 does
    not lift the body.
    """
    m, h, f, v = _positive(mass=mass, push=push, force=force, speed=speed)
    start = np.maximum(f / m - GRAVITY, 0.0)
    rate = f / (m * v)
    with np.errstate(divide="ignore"):
        c = h * rate**2 / start
    turns = 1.0 + c + np.real(_LAMBERT(-np.exp(-1.0 - c)))
    return TimeAndSpeed(turns / rate, np.asarray(start / rate * -np.expm1(-turns)))


# Flight


def rise_speed(height: ArrayLike) -> Array:
    """Vertical speed [m/s] that carries a body up by a height [m]: √(2 g h)."""
    (h,) = _positive(height=height)
    return np.asarray(np.sqrt(2.0 * GRAVITY * h))


def rise_time(height: ArrayLike) -> Array:
    """Time [s] from take-off to the top of a flight that rises by a height [m]: √(2 h / g)."""
    (h,) = _positive(height=height)
    return np.asarray(np.sqrt(2.0 * h / GRAVITY))


def rise_height(speed: ArrayLike) -> Array:
    """Height [m] gained by a body that leaves upward with a speed [m/s]: v² / (2 g)."""
    (v,) = _positive(speed=speed)
    return np.asarray(v**2 / (2.0 * GRAVITY))


def time_near_top(drop: ArrayLike) -> Array:
    """Time [s] that a flight stays within a drop [m] of its top: 2 √(2 δ / g)."""
    return 2.0 * rise_time(drop)


# Reaching


def minimum_jerk(share: ArrayLike, distance: ArrayLike = 1.0) -> Array:
    """Way [m] covered after a share τ of the time of a reach from rest to rest of least jerk.

    x = A (10 τ³ - 15 τ⁴ + 6 τ⁵), the motion with the least integral of squared jerk; τ is cut to
    0 to 1. Source: Flash & Hogan 1985, doi 10.1523/JNEUROSCI.05-07-01688.1985 (from memory).
    """
    tau = np.clip(np.asarray(share, dtype=np.float64), 0.0, 1.0)
    return np.asarray(np.asarray(distance) * tau**3 * (10.0 - tau * (15.0 - 6.0 * tau)))


def minimum_jerk_peaks(distance: ArrayLike, duration: ArrayLike) -> tuple[Array, Array]:
    """Peak speed 1.875 A / T [m/s] and peak acceleration (10 / √3) A / T² [m/s²] of such a reach.

    The speed peaks half-way in time, the acceleration at τ = (3 - √3) / 6.
    """
    a, t = _positive(distance=distance, duration=duration)
    return np.asarray(1.875 * a / t), np.asarray(10.0 / np.sqrt(3.0) * a / t**2)


def dimensionless_jerk(time: ArrayLike, jerk: ArrayLike, peak_speed: float) -> float:
    """(T³ / v_peak²) ∫ j² dt of a motion; 204.8 is the least a reach from rest to rest can have.

    ``time`` (N,) [s], increasing; ``jerk`` (N,) [m/s³], integrated by trapezes; ``peak_speed``
    [m/s]. Measures of smoothness often give its negative natural logarithm.
    """
    t, j = np.asarray(time, dtype=np.float64), np.asarray(jerk, dtype=np.float64)
    (peak,) = _positive(peak_speed=peak_speed)
    if t.ndim != 1 or t.shape != j.shape or len(t) < 2 or not (np.diff(t) > 0.0).all():
        raise DataError([Problem("", "time", "", "two or more, increasing, one for each jerk")])
    return float((t[-1] - t[0]) ** 3 / peak**2 * np.trapezoid(j**2, t))


# Measures of a path


def path_length(points: ArrayLike) -> float:
    """Length [m] of the line through points (N, 2) or (N, 3)."""
    path = np.asarray(points, dtype=np.float64)
    return float(np.linalg.norm(np.diff(path, axis=0), axis=1).sum())


def hull_perimeter(points: ArrayLike) -> float:
    """Perimeter [m] of the convex hull of points (N, 2); twice the length if they are in line."""
    hull = MultiPoint(np.asarray(points, dtype=np.float64)).convex_hull
    # A hull without area is a line, gone around on both sides.
    return float(hull.length if hull.area > 0.0 else 2.0 * hull.length)


def geometric_entropy(points: ArrayLike) -> float:
    """ln(2 L / C) of a path through points (N, 2) [m]: 0 if straight, ln 2 if out and back.

    L is the length of the path, C the perimeter of its convex hull. Source: Watts et al. 2016.
    DataError for fewer than two different points.
    """
    path = np.asarray(points, dtype=np.float64)
    if path.ndim != 2 or path.shape[1] != 2 or not np.isfinite(path).all():
        raise DataError([Problem("", "points", f"shape {path.shape}", "points (N, 2)")])
    length = path_length(path)
    if not length > 0.0:
        raise DataError([Problem("", "points", "no way at all", "two or more different points")])
    return float(np.log(2.0 * length / hull_perimeter(path)))

"""Lengths, directions and curvatures of a smooth path that is given by points.

Each part of the path is a cubic spline over the chord lengths: its second derivative is continuous
inside a part and may jump where two parts meet, as a body's path does where it leaves the wall and
flies. There the direction is the mean of what cubics through the four nearest points of either
side say.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import cos, radians

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.linalg import solve_banded

from climbpath.errors import DataError, Problem

Array = NDArray[np.float64]

SHARPEST = radians(60.0)
"""Largest turn between neighbouring chords: beyond it the points do not show a smooth path."""


@dataclass(frozen=True)
class PathShape:
    """A path with M intervals. World axes: right, up, out.

    ``s`` (M + 1,) [m]: arc length. ``height`` (M + 1,) [m]. ``tangent`` (M + 1, 3): unit vectors.
    ``curvature`` (M, 2, 3) [1/m]: change of the tangent by arc length at both ends of each
    interval. ``bounds`` (K + 1,): grid points at which parts begin and end.
    """

    s: Array
    height: Array
    tangent: Array
    curvature: Array
    bounds: NDArray[np.int64]


def path_shape(path: ArrayLike, bounds: Sequence[int] | NDArray[np.int64] = ()) -> PathShape:
    """Shape of a path through points (M + 1, 3) [m]: right, up, out of the wall.

    ``bounds`` (K + 1,): grid points at which its parts begin and end, from 0 to M; left out, the
    path is one part. DataError for fewer than two points, points in one place, sharp corners, or
    bounds that do not increase from 0 to M.
    """
    points = np.asarray(path, dtype=np.float64)
    problems = _path_problems(points)
    if problems:
        raise DataError(problems)
    last = len(points) - 1
    parts = np.asarray(bounds if len(bounds) else (0, last), dtype=np.int64)
    if len(parts) < 2 or parts[0] != 0 or parts[-1] != last or not (np.diff(parts) > 0).all():
        expected = f"grid points that increase from 0 to {last}"
        raise DataError([Problem("", "bounds", f"{parts.tolist()}", expected)])
    step = np.linalg.norm(np.diff(points, axis=0), axis=1)
    slope = _slopes(points, step, parts)
    begin, finish = slope[:-1], slope[1:]
    chord = np.diff(points, axis=0) / step[:, None]
    second = np.stack([6.0 * chord - 4.0 * begin - 2.0 * finish,
                       2.0 * begin + 4.0 * finish - 6.0 * chord], axis=1) / step[:, None, None]
    size = np.linalg.norm(slope, axis=1)
    tangent = slope / size[:, None]
    ends = np.stack([np.arange(last), np.arange(1, last + 1)], axis=1)
    along = tangent[ends]
    across = second - (second * along).sum(axis=-1, keepdims=True) * along
    return PathShape(
        s=np.concatenate([[0.0], np.cumsum(_lengths(step, chord, begin, finish))]),
        height=points[:, 1].copy(),
        tangent=tangent,
        curvature=across / (size**2)[ends][..., None],
        bounds=parts,
    )


def _path_problems(points: Array) -> list[Problem]:
    if points.ndim != 2 or points.shape[-1] != 3 or len(points) < 2:
        expected = "two or more points: right, up, out"
        return [Problem("", "path", f"an array of shape {points.shape}", expected)]
    if not np.isfinite(points).all():
        return [Problem("", "path", "", "finite numbers")]
    change = np.diff(points, axis=0)
    step = np.linalg.norm(change, axis=1)
    problems = [Problem("", f"path[{k + 1}]", "the same point again", "another point")
                for k in np.flatnonzero(step == 0.0)]
    if not problems:
        turn = (change[:-1] * change[1:]).sum(axis=1) / (step[:-1] * step[1:])
        problems = [Problem("", f"path[{k + 1}]", "a corner", "a smooth path of closer points")
                    for k in np.flatnonzero(turn < cos(SHARPEST))]
    return problems


def _slopes(points: Array, step: Array, parts: NDArray[np.int64]) -> Array:
    """First derivatives by chord length (M + 1, 3), of splines with given ends."""
    place = np.concatenate([[0.0], np.cumsum(step)])
    given: dict[int, list[Array]] = {}
    for first, last in zip(parts[:-1].tolist(), parts[1:].tolist(), strict=True):
        few = min(4, last - first + 1)
        head = slice(first, first + few)
        tail = slice(last, last - few if last >= few else None, -1)
        given.setdefault(first, []).append(_end_slope(place[head], points[head]))
        given.setdefault(last, []).append(_end_slope(place[tail], points[tail]))
    bands = np.zeros((3, len(points)))
    right = np.empty_like(points)
    weight = 1.0 / step
    bands[1, 1:-1] = 2.0 * (weight[:-1] + weight[1:])
    bands[0, 2:] = weight[1:]
    bands[2, :-2] = weight[:-1]
    pull = 3.0 * np.diff(points, axis=0) * (weight**2)[:, None]
    right[1:-1] = pull[:-1] + pull[1:]
    for k, slopes in given.items():
        bands[1, k] = 1.0
        right[k] = np.mean(slopes, axis=0)
        # Nothing of the neighbours enters where the direction is given.
        if k + 1 < len(points):
            bands[0, k + 1] = 0.0
        if k > 0:
            bands[2, k - 1] = 0.0
    return np.asarray(solve_banded((1, 1), bands, right))


def _end_slope(place: Array, points: Array) -> Array:
    """Derivative (3,) at the first of up to four places of the polynomial through the points."""
    rest = place[1:] - place[0]
    weights = np.empty(len(rest))
    for k, own in enumerate(rest):
        others = np.delete(rest, k)
        weights[k] = np.prod(others / (others - own)) / own
    return np.asarray(weights @ (points[1:] - points[0]))


def _lengths(step: Array, chord: Array, begin: Array, finish: Array) -> Array:
    """Arc length (M,) of each interval, by four Gauss points."""
    at, weights = np.polynomial.legendre.leggauss(4)
    t = (0.5 * (at + 1.0))[:, None, None]
    slope = (begin * (1.0 - t * (4.0 - 3.0 * t)) + chord * (6.0 * t * (1.0 - t))
             + finish * (t * (3.0 * t - 2.0)))
    return np.asarray(0.5 * step * (weights @ np.linalg.norm(slope, axis=2)))

"""Paths, problems and a slow second solver for the tests of pacing."""

from __future__ import annotations

from itertools import pairwise
from math import pi

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from climbpath.motion.path_shape import path_shape

Array = NDArray[np.float64]

G = 9.81


def straight(length: float, count: int, direction: int = 0) -> Array:
    """Points (count + 1, 3) of a straight line along one world axis."""
    points = np.zeros((count + 1, 3))
    points[:, direction] = np.linspace(0.0, length, count + 1)
    return points


def half_circle(count: int) -> Array:
    """Radius .5 m, lying flat."""
    angle = np.linspace(0.0, pi, count + 1)
    return 0.5 * np.stack([np.cos(angle), np.zeros(count + 1), np.sin(angle)], axis=1)


def swaying(count: int) -> Array:
    """15 m up, swaying to the sides and out."""
    y = np.linspace(0.0, 15.0, count + 1)
    return np.stack([0.25 * np.sin(2.0 * pi * y / 3.0), y, 0.1 * np.cos(y)], axis=1)


def random_climb(seed: int, count: int, weakest: float) -> tuple[Array, Array, list[int]]:
    """A smooth path (count + 1, 3), strengths (count, 2) that jump, and the bounds of phases."""
    draw = np.random.default_rng(seed)
    knots = int(draw.integers(4, 8))
    through = np.stack([
        draw.normal(0.0, 0.2, knots),
        0.7 * np.arange(knots) + draw.normal(0.0, 0.1, knots),
        draw.normal(0.3, 0.1, knots),
    ], axis=1)
    path = CubicSpline(np.arange(knots), through)(np.linspace(0.0, knots - 1.0, count + 1))
    inner = draw.choice(np.arange(5, count - 4), int(draw.integers(0, 5)), replace=False)
    bounds = [0, *sorted(int(k) for k in inner), count]
    strength = np.empty((count, 2))
    for first, last in pairwise(bounds):
        strength[first:last] = draw.uniform(weakest, 3.0)
    return path, strength, bounds


def lattice_time(path: Array, strength: Array, fastest: float, end: float | None,
                 levels: int = 400) -> float:
    """Least time over all profiles whose speeds at grid points lie on a lattice.

    Forces along the path are linear in an interval and bounded at its ends, as the pacing has
    them; each pair of speeds is looked at. Never less than the least time of that problem.
    """
    shape = path_shape(path)
    speed = np.linspace(0.0, min(fastest, 8.0), levels)
    step, upward = np.diff(shape.s), shape.tangent[:, 1]
    cost = np.where(speed == 0.0, 0.0, np.inf)
    up = np.array([0.0, 1.0, 0.0])
    for i, length in enumerate(step):
        largest = []
        for side, k in ((0, i), (1, i + 1)):
            tangent = shape.tangent[k]
            across = (up - upward[k] * tangent)[None, :] + (
                shape.curvature[i, side][None, :] * (speed**2 / G)[:, None])
            room = (strength[i, side] * (1.0 - speed / fastest)) ** 2 - (across**2).sum(axis=1)
            largest.append(np.sqrt(np.where(room >= 0.0, room, np.nan)))
        change = (speed**2)[None, :] - (speed**2)[:, None]
        forces = change / (G * length) + upward[i] + upward[i + 1]
        fits = np.abs(forces) <= largest[0][:, None] + largest[1][None, :]
        with np.errstate(divide="ignore"):
            time = 2.0 * length / (speed[:, None] + speed[None, :])
        cost = np.where(fits, cost[:, None] + time, np.inf).min(axis=0)
    return float(cost.min() if end is None else cost[0])

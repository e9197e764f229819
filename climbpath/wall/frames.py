"""The folded surface in space: from surface to world coordinates and back, and clearance.

World axes: X right, Y vertically up, Z out of the wall toward the climber; y = 0 of the lowest
section lies at Y = 0, Z = 0. All lengths m, angles rad.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from climbpath.wall.model import Wall

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

GRAVITY = 9.81
"""Acceleration of free fall, m/s²."""


@dataclass(frozen=True)
class Surface:
    """The sections of a wall, stacked bottom to top and folded.

    ``y_from`` (S,): surface y of each section's lower edge, m. ``overhang`` (S,), rad.
    ``origin`` (S, 3): world point of that edge at x = 0, m. ``up`` (S, 3) = (0, cos θ, sin θ) and
    ``normal`` (S, 3) = (0, −sin θ, cos θ): unit vectors along the surface and out of it.
    ``length`` (S,): heights along the surface, m. ``floor_height``: world Y of the ground, m.
    Overhangs stay within ±π/2, so height grows along the whole profile.
    """

    y_from: Floats
    overhang: Floats
    origin: Floats
    up: Floats
    normal: Floats
    length: Floats
    floor_height: float

    def section_at(self, y: ArrayLike) -> Ints:
        """Index of the section at surface y, any shape (m).

        A fold belongs to the upper section; below the wall is the first, above it the last.
        """
        index = np.searchsorted(self.y_from, np.asarray(y, dtype=np.float64), side="right") - 1
        return np.clip(index, 0, len(self.y_from) - 1).astype(np.int64)

    def to_world(self, x: ArrayLike, y: ArrayLike, depth: ArrayLike = 0.0) -> Floats:
        """World points, shape (..., 3), m, of surface points ``depth`` out of their section.

        The three arguments broadcast. The first and last section are prolonged.
        """
        across, along, out = np.broadcast_arrays(
            np.asarray(x, dtype=np.float64),
            np.asarray(y, dtype=np.float64),
            np.asarray(depth, dtype=np.float64),
        )
        k = self.section_at(along)
        points = (
            self.origin[k]
            + (along - self.y_from[k])[..., None] * self.up[k]
            + out[..., None] * self.normal[k]
        )
        points[..., 0] += across
        return points

    def to_surface(self, points: ArrayLike) -> Floats:
        """Surface coordinates (x, y, signed distance out), shape (..., 3), of world points.

        (x, y) is the nearest point of the folded surface. Where a fold juts out toward the
        climber, points before it have their nearest point on the fold itself; there, and nowhere
        else, the distance is not measured along the normal of a section.
        """
        world = np.asarray(points, dtype=np.float64)
        y, distance = self._nearest(world)
        return np.stack([world[..., 0], y, distance], axis=-1)

    def clearance(self, points: ArrayLike) -> Floats:
        """Signed distance, shape (...), m, of world points (..., 3) from the folded surface.

        Positive on the climber's side, negative inside the wall. The first section is prolonged
        downward and the last upward.
        """
        return self._nearest(np.asarray(points, dtype=np.float64))[1]

    def gravity(self, section: int) -> Floats:
        """Gravity in the axes of a section (right, up along it, out), m/s².

        (0, −g cos θ, +g sin θ): on an overhang it pulls out of the wall.
        """
        angle = float(self.overhang[section])
        return np.array([0.0, -GRAVITY * math.cos(angle), GRAVITY * math.sin(angle)])

    def _nearest(self, world: Floats) -> tuple[Floats, Floats]:
        """Surface y of the nearest point and signed distance, each of shape (...)."""
        last = len(self.y_from) - 1
        best_y = np.zeros(world.shape[:-1])
        best = np.full(world.shape[:-1], np.inf)
        for k in range(last + 1):
            relative = world - self.origin[k]
            along = relative @ self.up[k]
            low = -np.inf if k == 0 else 0.0
            high = np.inf if k == last else self.length[k]
            nearest = np.clip(along, low, high)
            distance = np.hypot(along - nearest, relative @ self.normal[k])
            closer = distance < best
            best = np.where(closer, distance, best)
            best_y = np.where(closer, self.y_from[k] + nearest, best_y)
        # The profile is a function of height (every overhang is within ±π/2), so the side is
        # told by comparing depths at the point's own height, whichever way a fold turns.
        level = np.searchsorted(self.origin[:, 1], world[..., 1], side="right") - 1
        level = np.clip(level, 0, last)
        side = np.sum((world - self.origin[level]) * self.normal[level], axis=-1)
        return best_y, np.where(side < 0.0, -best, best)


def surface_of(wall: Wall) -> Surface:
    """The folded surface of a wall: section k begins where section k − 1 ends."""
    length = np.array([section.height for section in wall.sections])
    overhang = np.array([section.overhang for section in wall.sections])
    zero = np.zeros_like(overhang)
    up = np.stack([zero, np.cos(overhang), np.sin(overhang)], axis=-1)
    normal = np.stack([zero, -np.sin(overhang), np.cos(overhang)], axis=-1)
    steps = length[:, None] * up
    origin = np.concatenate([np.zeros((1, 3)), np.cumsum(steps, axis=0)[:-1]])
    y_from = np.concatenate([np.zeros(1), np.cumsum(length)[:-1]])
    floor_height = wall.floor_y * float(np.cos(overhang[0]))
    return Surface(y_from, overhang, origin, up, normal, length, floor_height)

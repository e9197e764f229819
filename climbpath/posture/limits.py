"""The limits a posture must keep, as plain functions of where the trunk is.

One definition serves the solver (with slopes and curvature), the check of a posture that was
found, and the choice among centre-of-mass samples.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import cos

import numpy as np
from numpy.typing import NDArray

from climbpath.posture.batch import StanceBatch
from climbpath.posture.linkage import (
    LIMB_SIDE,
    TOE_SPACE,
    TRUNK_TILT,
    TRUNK_TURN,
    Linkage,
)

Array = NDArray[np.float64]

SOFT = 0.01
"""Rounding of the horizontal distance hip to toe near zero, m: keeps its slope finite there."""


@dataclass(frozen=True)
class LimbGeometry:
    """Root to contact of all limbs in trunk axes.

    ``point`` (3, 4, N): contact seen from the trunk's origin. ``along`` (3, 4, N): unit vector
    root to contact. ``distance`` (4, N) [m]. ``rise`` (4, N) [m]: how far the shoulder has
    lifted. ``rising`` (4, N) bool: the shoulder is between rest and full lift.
    """

    point: Array
    along: Array
    distance: Array
    rise: Array
    rising: NDArray[np.bool_]


def limb_geometry(linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array) -> LimbGeometry:
    """Seen from a trunk at ``shift`` (3, N) [m], turned by ``turn`` (3, 3, N).

    The shoulder lifts by up to ``shoulder_rise`` along the trunk to meet a hand above it: the
    distance is that from the contact to the segment the joint can slide on, a convex function.
    """
    dx = [batch.target[i] - shift[i] for i in range(3)]
    point = np.stack(
        [dx[0] * turn[0, j] + dx[1] * turn[1, j] + dx[2] * turn[2, j] for j in range(3)]
    )
    away = point - linkage.roots.T[:, :, None]
    rise = np.zeros_like(away[1])
    rise[:2] = np.clip(away[1, :2], 0.0, linkage.shoulder_rise)
    rising = np.zeros(rise.shape, dtype=bool)
    rising[:2] = (away[1, :2] > 0.0) & (away[1, :2] < linkage.shoulder_rise)
    away[1] -= rise
    distance = np.maximum(np.sqrt(away[0] ** 2 + away[1] ** 2 + away[2] ** 2), 0.02)
    return LimbGeometry(point, away / distance, distance, rise, rising)


UPPER = ((0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2))
"""Order of the entries of symmetric 3 by 3 matrices."""

HEIGHT_SIDE = np.array([1.0, 1.0, -1.0, -1.0])
"""Hands stay above the hips, feet below."""


@dataclass(frozen=True)
class JointLimits:
    """Joint ranges as limits on where contacts may be seen from the trunk.

    ``height`` (4, N): a hand not below the hips (below them it can neither pull nor press), a toe
    not above its hip (a straight leg lifts to about a right angle, from memory). ``across``
    (4, N): the contact is not too far on the other side of the body. ``lift`` (2, N) with slope
    (3, 2, N): the thigh at full flexion still lets the lower leg come down to the toe,
    |toe - knee| >= lower leg in the plane of hip, toe and trunk, and ``lift_curve`` (6, 2, N) its
    second derivatives (xx, xy, xz, yy, yz, zz). ``out`` (2, N): the toe's distance
    to the side, at most that of a straight leg at full abduction.
    """

    height: Array
    across: Array
    lift: Array
    lift_slope: Array
    lift_curve: list[Array]
    out: Array


def joint_limits(linkage: Linkage, geometry: LimbGeometry) -> JointLimits:
    """Evaluate the joint ranges of N trunks."""
    away = geometry.along * geometry.distance
    side = LIMB_SIDE[:, None]
    height = np.empty_like(geometry.distance)
    height[:2] = geometry.point[1, :2]
    height[2:] = -away[1, 2:]
    x, y, z = away[:, 2:]
    knee_across, knee_up = linkage.knee_limit
    level = np.sqrt(x**2 + z**2 + SOFT**2)
    gap = np.maximum(np.sqrt((level - knee_across) ** 2 + (y - knee_up) ** 2), 1e-6)
    before, above = (level - knee_across) / gap, (y - knee_up) / gap
    # Second derivatives: along the circle about the knee, and around the trunk's axis.
    along_circle = (-above * x / level, before, -above * z / level)
    around = (-z / level, np.zeros_like(z), x / level)
    curve = [along_circle[i] * along_circle[j] / gap + before * around[i] * around[j] / level
             for i, j in UPPER]
    return JointLimits(
        height=height,
        across=linkage.across[:, None] + side * away[0],
        lift=gap - linkage.lower_leg[1],
        lift_slope=np.stack([before * x / level, above, before * z / level]),
        lift_curve=curve,
        out=linkage.out_limit - side[2:] * x,
    )


TILT_LIMIT = cos(TRUNK_TILT)
TURN_LIMIT = cos(TRUNK_TURN)


@dataclass(frozen=True)
class PointLimit:
    """A limit linear in a trunk point: ``value`` (N,), ``normal`` (3, N) in trunk axes."""

    value: Array
    normal: Array
    offset: Array
    shifts: bool
    spare: bool
    active: NDArray[np.bool_] | None = None


@dataclass(frozen=True)
class PointLayout:
    """Which point limits a batch has: planes (point, slot) of the trunk, and feet on the floor."""

    planes: tuple[tuple[int, int], ...]
    feet: tuple[int, ...]


def point_layout(batch: StanceBatch) -> PointLayout:
    """The limits that some stance of the batch needs; a part of the batch needs no others."""
    planes = [(which, slot) for which in range(2) for slot in range(2)
              if not slot or not np.array_equal(batch.plane[which, 0], batch.plane[which, 1])]
    return PointLayout(tuple(planes), tuple(foot for foot in (2, 3) if batch.floor[foot].any()))


def point_limits(
    linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array, spare: Array,
    layout: PointLayout | None = None,
) -> list[PointLimit]:
    """Trunk clear of the surface, trunk tilt and turn, and feet on the floor."""
    chosen = layout or point_layout(batch)
    limits: list[PointLimit] = []
    offsets = (np.zeros(3), np.array([0.0, linkage.chest_height, 0.0]))
    spaces = (linkage.pelvis_space, linkage.chest_space)
    for which, slot in chosen.planes:
        plane, offset = batch.plane[which, slot], offsets[which]
        normal = _into_trunk(turn, plane[:3])
        value = _dot(plane[:3], shift) + plane[3] + _dot(offset, normal) - spaces[which]
        active = None
        if slot:
            # Only where the second plane is another than the first does it count at all.
            active = np.asarray((plane != batch.plane[which, 0]).any(axis=0))
        limits.append(PointLimit(value, normal, offset, True, False, active))
    up, out = np.array([0.0, 1.0, 0.0]), np.array([0.0, 0.0, 1.0])
    limits.append(PointLimit(turn[1, 1] - TILT_LIMIT, turn[1], up, False, False))
    limits.append(PointLimit(turn[2, 2] - TURN_LIMIT, turn[2], out, False, False))
    for foot in chosen.feet:
        active = batch.floor[foot]
        normal = _into_trunk(turn, batch.vertical)
        root = linkage.roots[foot]
        height = _dot(batch.vertical, shift) + _dot(root, normal) - batch.floor_level
        limits.append(
            PointLimit(linkage.tiptoe_reach - spare - height, -normal, root, True, True, active)
        )
        limits.append(PointLimit(height - linkage.fold[foot], normal, root, True, False, active))
        # The ground point below the hip lies before the surface, also of a slab.
        ahead = _into_trunk(turn, batch.out)
        value = _dot(batch.out, shift) + _dot(root, ahead) - batch.floor_out - TOE_SPACE
        limits.append(PointLimit(value, ahead, root, True, False, active))
    return limits


def _into_trunk(turn: Array, vector: Array) -> Array:
    """R^T n for N turns and vectors. Shapes (3, 3, N), (3, N) -> (3, N)."""
    return np.stack(
        [turn[0, j] * vector[0] + turn[1, j] * vector[1] + turn[2, j] * vector[2] for j in range(3)]
    )


def _dot(first: Array, second: Array) -> Array:
    return np.asarray(first[0] * second[0] + first[1] * second[1] + first[2] * second[2])


def slack(
    linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array
) -> tuple[Array, Array]:
    """Spare reach and the worst hard limit of N postures, both (N,) in metres.

    The hard limits are folds, joint ranges and clearance; tilt and turn count in trunk lengths.
    """
    count = batch.size
    geometry = limb_geometry(linkage, batch, turn, shift)
    spare = np.where(batch.engaged, batch.reach - geometry.distance, np.inf).min(axis=0)
    fold = geometry.distance - batch.fold
    hard = np.where(batch.engaged, fold, np.inf).min(axis=0)
    joints = joint_limits(linkage, geometry)
    for value in (joints.height, joints.across, joints.lift, joints.out):
        engaged = batch.engaged[-len(value):]
        hard = np.minimum(hard, np.where(engaged, value, np.inf).min(axis=0))
    zero = np.zeros(count)
    for limit in point_limits(linkage, batch, turn, shift, zero):
        value = limit.value if limit.active is None else np.where(limit.active, limit.value, np.inf)
        if limit.spare:
            spare = np.minimum(spare, value)
        else:
            hard = np.minimum(hard, value if limit.shifts else value * linkage.trunk)
    return spare, hard


def upright(count: int) -> Array:
    """N trunks parallel to the surface. Shape (3, 3, N)."""
    return np.repeat(np.eye(3)[:, :, None], count, axis=2)


def turned(turn: Array, step: Array) -> Array:
    """R exp(w) for N turns (3, 3, N) and steps w (3, N) (Rodrigues' formula)."""
    angle_squared = step[0] ** 2 + step[1] ** 2 + step[2] ** 2
    angle = np.sqrt(np.maximum(angle_squared, 1e-16))
    first = np.sin(angle) / angle
    second = (1.0 - np.cos(angle)) / angle**2
    x, y, z = step
    spin = np.empty_like(turn)
    for i in range(3):
        for j in range(3):
            spin[i, j] = second * step[i] * step[j]
        spin[i, i] += 1.0 - second * angle_squared
    spin[0, 1] -= first * z
    spin[1, 0] += first * z
    spin[0, 2] += first * y
    spin[2, 0] -= first * y
    spin[1, 2] -= first * x
    spin[2, 1] += first * x
    return np.stack(
        [np.stack([turn[i, 0] * spin[0, j] + turn[i, 1] * spin[1, j] + turn[i, 2] * spin[2, j]
                   for j in range(3)]) for i in range(3)]
    )


def twisted(angle: Array) -> Array:
    """Trunks turned about their own length by ``angle`` (N,) [rad]. Shape (3, 3, N)."""
    c, s, zero = np.cos(angle), np.sin(angle), np.zeros_like(angle)
    return np.array([[c, zero, s], [zero, zero + 1.0, zero], [-s, zero, c]])


def tilted(angle: Array) -> Array:
    """Trunks leaning to the right by ``angle`` (N,) [rad] in the surface's plane. (3, 3, N)"""
    c, s, zero = np.cos(angle), np.sin(angle), np.zeros_like(angle)
    return np.array([[c, s, zero], [-s, c, zero], [zero, zero, zero + 1.0]])

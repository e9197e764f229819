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
    """Seen from a trunk at ``shift`` (3, N) [m], turned by ``turn`` (3, 3, N)."""
    return geometry_of(linkage, batch.target, turn, shift)


def geometry_of(linkage: Linkage, target: Array, turn: Array, shift: Array) -> LimbGeometry:
    """The same for contacts ``target`` (3, 4, N) [m].

    The shoulder lifts by up to ``shoulder_rise`` along the trunk to meet a hand above it: the
    distance is that from the contact to the segment the joint can slide on, a convex function.
    """
    point = np.einsum("iln,ijn->jln", target - shift[:, None], turn)
    away = point - linkage.roots.T[:, :, None]
    rise = np.zeros_like(away[1])
    above = away[1, :2]
    np.minimum(np.maximum(above, 0.0), linkage.shoulder_rise, out=rise[:2])
    rising = np.zeros(rise.shape, dtype=bool)
    np.logical_and(above > 0.0, above < linkage.shoulder_rise, out=rising[:2])
    above -= rise[:2]
    square = away * away
    distance = square[0]
    distance += square[1]
    distance += square[2]
    np.sqrt(distance, out=distance)
    np.maximum(distance, 0.02, out=distance)
    away /= distance
    return LimbGeometry(point, away, distance, rise, rising)


HEIGHT_SIDE = np.array([1.0, 1.0, -1.0, -1.0])
"""Hands stay above the hips, feet below."""


@dataclass(frozen=True)
class JointLimits:
    """Joint ranges as limits on where contacts may be seen from the trunk.

    ``height`` (4, N): a hand not below the hips (below them it can neither pull nor press), a toe
    not above its hip (a straight leg lifts to about a right angle, from memory). ``across``
    (4, N): the contact is not too far on the other side of the body. ``lift`` (2, N) with slope
    (3, 2, N): the thigh at full flexion still lets the lower leg come down to the toe,
    |toe - knee| >= lower leg in the plane of hip, toe and trunk. Its second derivatives are
    ``circle`` circle^T / ``gap`` along the circle about the knee plus ``around`` around^T
    ``before_level`` around the trunk's axis: (3, 2, N) and (2, N). ``out`` (2, N): the toe's
    distance to the side, at most that of a straight leg at full abduction.
    """

    height: Array
    across: Array
    lift: Array
    lift_slope: Array
    circle: Array
    gap: Array
    around: Array
    before_level: Array
    out: Array


def joint_limits(linkage: Linkage, geometry: LimbGeometry) -> JointLimits:
    """Evaluate the joint ranges of N trunks."""
    away = geometry.along * geometry.distance
    height = np.empty_like(geometry.distance)
    height[:2] = geometry.point[1, :2]
    np.negative(away[1, 2:], out=height[2:])
    x, y, z = away[:, 2:]
    knee_across, knee_up = linkage.knee_limit
    level = np.sqrt(x * x + z * z + SOFT**2)
    before, above = level - knee_across, y - knee_up
    gap = np.maximum(np.sqrt(before * before + above * above), 1e-6)
    before /= gap
    above /= gap
    slope, circle, around = (np.empty_like(away[:, 2:]) for _ in range(3))
    np.divide(x, level, out=around[2])
    np.divide(z, level, out=around[0])
    np.multiply(before, around[::2], out=slope[2::-2])
    slope[1] = above
    np.multiply(above, around[::2], out=circle[2::-2])
    np.negative(circle, out=circle)
    circle[1] = before
    np.negative(around[0], out=around[0])
    around[1] = 0.0
    return JointLimits(
        height=height,
        across=linkage.across[:, None] + LIMB_SIDE[:, None] * away[0],
        lift=gap - linkage.lower_leg[1],
        lift_slope=slope,
        circle=circle,
        gap=gap,
        around=around,
        before_level=before / level,
        out=linkage.out_limit - LIMB_SIDE[2:, None] * x,
    )


TILT_LIMIT = cos(TRUNK_TILT)
TURN_LIMIT = cos(TRUNK_TURN)


@dataclass(frozen=True)
class PointLimits:
    """P limits, each linear in a point of the trunk: n . (p + R o) + const >= 0.

    ``value`` (P, N); ``normal`` n (3, P, N) in trunk axes; ``offset`` o (3, P, 1) or (3, P, N).
    ``spare`` (P,) bool: the spare reach counts against it. The first ``fixed`` of them are limits
    of a direction, which a shift does not change.
    """

    value: Array
    normal: Array
    offset: Array
    spare: NDArray[np.bool_]
    fixed: int = 0


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


def trunk_limits(
    linkage: Linkage, plane: Array, turn: Array, shift: Array, layout: PointLayout
) -> PointLimits:
    """Tilt and turn of the trunk, then trunk clear of the surface.

    ``plane`` (4, K, N): normals and offsets of the planes of the layout (``planes_of``).
    """
    count = shift.shape[1]
    number = 2 + len(layout.planes)
    normal, value = np.empty((3, number, count)), np.empty((number, count))
    offset, least = np.zeros((3, number, 1)), np.empty((number, 1))
    normal[:, 0], normal[:, 1] = turn[1], turn[2]
    offset[1, 0], offset[2, 1] = 1.0, 1.0
    value[0], value[1] = turn[1, 1], turn[2, 2]
    least[0], least[1] = TILT_LIMIT, TURN_LIMIT
    np.einsum("ijn,ikn->jkn", turn, plane[:3], out=normal[:, 2:])
    np.einsum("ikn,in->kn", plane[:3], shift, out=value[2:])
    value[2:] += plane[3]
    for row, (which, _) in enumerate(layout.planes, start=2):
        least[row] = (linkage.pelvis_space, linkage.chest_space)[which]
        if which:
            offset[1, row] = linkage.chest_height
            value[row] += linkage.chest_height * normal[1, row]
    value -= least
    return PointLimits(value, normal, offset, np.zeros(number, dtype=bool), 2)


def planes_of(batch: StanceBatch, layout: PointLayout) -> Array:
    """The planes that the trunk keeps clear of, (4, K, N) in the order of the layout."""
    return np.stack([batch.plane[which, slot] for which, slot in layout.planes], axis=1)


def trunk_active(batch: StanceBatch, layout: PointLayout) -> NDArray[np.bool_]:
    """Which stances each of the trunk's limits counts for, (P, N).

    A second plane counts only where it is another than the first.
    """
    active = np.ones((2 + len(layout.planes), batch.size), dtype=bool)
    for row, (which, slot) in enumerate(layout.planes, start=2):
        if slot:
            active[row] = (batch.plane[which, 1] != batch.plane[which, 0]).any(axis=0)
    return active


@dataclass(frozen=True)
class Ground:
    """The ground as N stances see it, each field as in ``StanceBatch``."""

    vertical: Array
    floor_level: Array
    out: Array
    floor_out: Array


def ground_of(batch: StanceBatch, part: NDArray[np.int64] | None = None) -> Ground:
    """The ground of the chosen stances (None: of all)."""
    values = (batch.vertical, batch.floor_level, batch.out, batch.floor_out)
    return Ground(*(v if part is None else v.take(part, axis=-1) for v in values))


def floor_limits(
    linkage: Linkage, ground: Ground, turn: Array, shift: Array, spare: Array, feet: tuple[int, ...]
) -> PointLimits:
    """Feet on the floor: within tiptoe reach, not folded too far, ground before the surface."""
    count = shift.shape[1]
    number = 3 * len(feet)
    normal, value = np.empty((3, number, count)), np.empty((number, count))
    offset = np.zeros((3, number, 1))
    up, ahead = _into_trunk(turn, ground.vertical), _into_trunk(turn, ground.out)
    height = _dot(ground.vertical, shift) - ground.floor_level
    before = _dot(ground.out, shift) - ground.floor_out - TOE_SPACE
    for row, foot in zip(range(0, number, 3), feet, strict=True):
        across, along, off = root = linkage.roots[foot]
        hip = height + (across * up[0] + along * up[1] + off * up[2])
        np.subtract(linkage.tiptoe_reach - spare, hip, out=value[row])
        np.subtract(hip, linkage.fold[foot], out=value[row + 1])
        # The ground point below the hip lies before the surface, also of a slab.
        value[row + 2] = before + (across * ahead[0] + along * ahead[1] + off * ahead[2])
        np.negative(up, out=normal[:, row])
        normal[:, row + 1], normal[:, row + 2] = up, ahead
        offset[:, row:row + 3] = root[:, None, None]
    return PointLimits(value, normal, offset, np.arange(number) % 3 == 0)


@dataclass(frozen=True)
class PointLimit:
    """One limit of a trunk point: its values (N,), whether a shift changes it, whether the spare
    reach counts against it, and for which stances it counts (None: all)."""

    value: Array
    shifts: bool
    spare: bool
    active: NDArray[np.bool_] | None = None


def point_limits(
    linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array, spare: Array,
    layout: PointLayout | None = None,
) -> list[PointLimit]:
    """Trunk tilt and turn, trunk clear of the surface, and feet on the floor, one by one."""
    chosen = layout or point_layout(batch)
    trunk = trunk_limits(linkage, planes_of(batch, chosen), turn, shift, chosen)
    limits = [
        PointLimit(value, row >= trunk.fixed, False, None if active.all() else active)
        for row, (value, active) in enumerate(
            zip(trunk.value, trunk_active(batch, chosen), strict=True))
    ]
    if chosen.feet:
        floor = floor_limits(linkage, ground_of(batch), turn, shift, spare, chosen.feet)
        limits += [PointLimit(value, True, bool(spares), batch.floor[chosen.feet[row // 3]])
                   for row, (value, spares) in enumerate(
                       zip(floor.value, floor.spare, strict=True))]
    return limits


def _into_trunk(turn: Array, vector: Array) -> Array:
    """R^T n for N turns and vectors. Shapes (3, 3, N), (3, N) -> (3, N)."""
    return np.asarray(np.einsum("ijn,in->jn", turn, vector))


def _dot(first: Array, second: Array) -> Array:
    return np.asarray(np.einsum("in,in->n", first, second))


def slack(
    linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array
) -> tuple[Array, Array]:
    """Spare reach and the worst hard limit of N postures, both (N,) in metres.

    The hard limits are folds, joint ranges and clearance; tilt and turn count in trunk lengths.
    """
    geometry = limb_geometry(linkage, batch, turn, shift)
    joints = joint_limits(linkage, geometry)
    off = np.where(batch.engaged, 0.0, np.inf)
    spare = (batch.reach - geometry.distance + off).min(axis=0)
    least = np.minimum(geometry.distance - batch.fold, joints.height)
    np.minimum(least, joints.across, out=least)
    np.minimum(least[2:], joints.lift, out=least[2:])
    np.minimum(least[2:], joints.out, out=least[2:])
    least += off
    hard = least.min(axis=0)
    layout = point_layout(batch)
    trunk = trunk_limits(linkage, planes_of(batch, layout), turn, shift, layout)
    np.minimum(hard, trunk.value[:2].min(axis=0) * linkage.trunk, out=hard)
    for row, (which, slot) in enumerate(layout.planes, start=2):
        value = trunk.value[row]
        if slot:
            other = (batch.plane[which, 1] != batch.plane[which, 0]).any(axis=0)
            value = np.where(other, value, np.inf)
        np.minimum(hard, value, out=hard)
    if layout.feet:
        part = np.flatnonzero(batch.floor.any(axis=0))
        floor = floor_limits(linkage, ground_of(batch, part), turn.take(part, axis=-1),
                             shift.take(part, axis=-1), np.zeros(len(part)), layout.feet)
        stands = np.repeat(batch.floor[list(layout.feet)][:, part], 3, axis=0)
        value = np.where(stands, floor.value, np.inf)
        spare[part] = np.minimum(spare[part], value[floor.spare].min(axis=0))
        hard[part] = np.minimum(hard[part], value[~floor.spare].min(axis=0))
    return spare, hard


def upright(count: int) -> Array:
    """N trunks parallel to the surface. Shape (3, 3, N)."""
    return np.repeat(np.eye(3)[:, :, None], count, axis=2)


def turned(turn: Array, step: Array) -> Array:
    """R exp(w) for N turns (3, 3, N) and steps w (3, N) (Rodrigues' formula)."""
    angle_squared = np.einsum("in,in->n", step, step)
    angle = np.sqrt(np.maximum(angle_squared, 1e-16))
    first = np.sin(angle) / angle
    second = (1.0 - np.cos(angle)) / (angle * angle)
    spin = (second * step)[:, None] * step
    diagonal = 1.0 - second * angle_squared
    for i in range(3):
        spin[i, i] += diagonal
    x, y, z = first * step
    spin[0, 1] -= z
    spin[1, 0] += z
    spin[0, 2] += y
    spin[2, 0] -= y
    spin[1, 2] -= x
    spin[2, 1] += x
    return np.asarray(np.einsum("ijn,jkn->ikn", turn, spin))


def twisted(angle: Array) -> Array:
    """Trunks turned about their own length by ``angle`` (N,) [rad]. Shape (3, 3, N)."""
    c, s, zero = np.cos(angle), np.sin(angle), np.zeros_like(angle)
    return np.array([[c, zero, s], [zero, zero + 1.0, zero], [-s, zero, c]])


def tilted(angle: Array) -> Array:
    """Trunks leaning to the right by ``angle`` (N,) [rad] in the surface's plane. (3, 3, N)"""
    c, s, zero = np.cos(angle), np.sin(angle), np.zeros_like(angle)
    return np.array([[c, s, zero], [-s, c, zero], [zero, zero, zero + 1.0]])

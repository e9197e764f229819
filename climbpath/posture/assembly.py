"""From trunk to whole body: every joint of N postures in closed form.

Arms and legs are two-link chains; their ends are given, so the law of cosines places the middle
joint on a circle about the line from root to end, and a preferred direction picks the point on
it: elbows out, down and off the wall, knees out to the side and as far off the wall as they
must. A leg's lower link is the distance knee to toe, which the ankle's hinge stretches when the
hip is too far for a foot at right angles.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import Limb
from climbpath.posture.batch import StanceBatch
from climbpath.posture.limits import limb_geometry
from climbpath.posture.linkage import (
    ANKLE_SPACE,
    ELBOW_SPACE,
    GRIP_SHARE,
    KNEE_SPACE,
    LIMB_SIDE,
    Linkage,
)

Array = NDArray[np.float64]

JOINTS = (
    "pelvis", "neck", "head",
    "shoulder_L", "elbow_L", "wrist_L", "LH",
    "shoulder_R", "elbow_R", "wrist_R", "RH",
    "hip_L", "knee_L", "ankle_L", "LF",
    "hip_R", "knee_R", "ankle_R", "RF",
)
"""Order of the joints axis. The limb names stand for fingertip or grip, and for the toe."""

JOINT = {name: k for k, name in enumerate(JOINTS)}
FIRST_JOINT = (3, 7, 11, 15)
"""Where the four joints of each limb begin, in the order of ``Limb``."""

ELBOW_WAY = np.array([0.6, -0.6, 0.5])
KNEE_WAY = np.array([0.9, 0.35, 0.3])
"""Preferred directions of elbow and knee for a right limb: outward, along the wall, off it."""

REST_HAND = np.array([0.20, -0.28, 0.0])
"""A free hand rests here from its shoulder, in trunk axes for the right hand, m per 0.6 m of arm:
beside the chest, ready to reach (common practice, no source)."""

REST_FOOT = np.array([0.05, -0.85, -0.08])
"""A free foot hangs here from its hip, trunk axes, in shares of the leg's reach."""


def rest_points(linkage: Linkage, limb: Limb) -> Array:
    """Where the end of a free limb rests, in trunk axes from the trunk's origin. Shape (3,) [m]."""
    side = np.array([LIMB_SIDE[limb], 1.0, 1.0])
    way = REST_HAND / 0.6 if limb <= Limb.RH else REST_FOOT
    return np.asarray(linkage.roots[limb] + side * way * linkage.reach[limb])


def assemble(linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array) -> Array:
    """All joints of N postures in base axes.

    ``turn`` (3, 3, N) and ``shift`` (3, N) [m] place the trunk. Returns (19, 3, N) [m], joints in
    the order of ``JOINTS``. Where a limb is asked to reach farther than it can, it is drawn
    straight toward its contact and its end stops short.
    """
    count = batch.size
    joints = np.empty((len(JOINTS), 3, count))
    joints[JOINT["pelvis"]] = shift
    joints[JOINT["neck"]] = shift + turn[:, 1] * linkage.trunk
    joints[JOINT["head"]] = shift + turn[:, 1] * (linkage.trunk + 0.75 * linkage.head)
    geometry = limb_geometry(linkage, batch, turn, shift)
    for limb in Limb:
        root = linkage.roots[limb][:, None] + np.zeros((3, count))
        root[1] += geometry.rise[limb]
        resting = rest_points(linkage, limb)[:, None]
        engaged, floor = batch.engaged[limb], batch.floor[limb]
        root[1] = np.where(engaged, root[1], linkage.roots[limb, 1])
        start = shift + np.einsum("ijn,jn->in", turn, root)
        rest = shift + np.einsum("ijn,jn->in", turn, np.broadcast_to(resting, (3, count)))
        rest += _off_wall(batch, rest, 0.03)
        end = np.where(engaged, batch.target[:, limb], rest)
        if limb <= Limb.RH:
            _arm(linkage, batch, joints, limb, start, end)
        else:
            ground = _below(batch, start)
            _leg(linkage, batch, joints, limb, start, np.where(floor, ground, end), floor)
    return joints


def _off_wall(batch: StanceBatch, point: Array, space: float) -> Array:
    """What moves a point at least ``space`` off the pelvis' plane. Shape (3, N) [m]."""
    normal, offset = batch.plane[0, 0, :3], batch.plane[0, 0, 3]
    gap = (normal * point).sum(axis=0) + offset
    return np.asarray(normal * np.maximum(space - gap, 0.0))


def _nearest_plane(batch: StanceBatch, limb: Limb, point: Array) -> tuple[Array, Array]:
    """Normal (3, N) and distance (N,) of the plane that bounds a limb at a point.

    Of the pelvis' plane and that of the limb's contact: in a hollow the nearer, at an edge that
    juts out the one there is more room before.
    """
    own, other = batch.plane[0, 0], batch.limb_plane[:, limb]
    first = (own[:3] * point).sum(axis=0) + own[3]
    second = (other[:3] * point).sum(axis=0) + other[3]
    use = (second < first) == batch.hollow[limb]
    return np.where(use, other[:3], own[:3]), np.where(use, second, first)


def _below(batch: StanceBatch, point: Array) -> Array:
    """The ground point vertically under each point. Shape (3, N) [m]."""
    height = (batch.vertical * point).sum(axis=0) - batch.floor_level
    return np.asarray(point - batch.vertical * height)


def _unit(vector: Array) -> Array:
    return np.asarray(vector / np.maximum(np.sqrt((vector**2).sum(axis=0)), 1e-9))


def _across(way: Array, axis: Array) -> Array:
    """Unit vector of the part of ``way`` at right angles to ``axis``."""
    return _unit(way - axis * (way * axis).sum(axis=0))


def _middle(
    start: Array, end: Array, first: Array | float, second: Array | float
) -> tuple[Array, Array, Array]:
    """Middle joint of a two-link chain: centre of its circle, radius, and unit axis."""
    axis = end - start
    distance = np.maximum(np.sqrt((axis**2).sum(axis=0)), 1e-9)
    axis = axis / distance
    distance = np.minimum(distance, np.asarray(first) + np.asarray(second))
    along = (distance**2 + np.asarray(first) ** 2 - np.asarray(second) ** 2) / (2.0 * distance)
    # Rounding can put the foot of the height a hair outside the first link.
    along = np.clip(along, -np.asarray(first), np.asarray(first))
    radius = np.sqrt(np.maximum(np.asarray(first) ** 2 - along**2, 0.0))
    return start + axis * along, radius, axis


def _arm(
    linkage: Linkage, batch: StanceBatch, joints: Array, limb: Limb, shoulder: Array, end: Array
) -> None:
    first = FIRST_JOINT[limb]
    strike = batch.reach[limb] - linkage.reach[limb]
    fore = linkage.forearm + GRIP_SHARE * linkage.hand + strike
    way = (ELBOW_WAY * [LIMB_SIDE[limb], 1.0, 1.0])[:, None] + np.zeros_like(shoulder)
    centre, radius, axis = _middle(shoulder, end, linkage.upper_arm, fore)
    way = _clear(batch, limb, centre, radius, axis, _across(way, axis), ELBOW_SPACE)
    elbow = centre + radius * way
    joints[first] = shoulder
    joints[first + 1] = elbow
    direction = _unit(end - elbow)
    joints[first + 2] = elbow + direction * linkage.forearm
    joints[first + 3] = elbow + direction * fore


def lower_leg(linkage: Linkage, distance: Array) -> Array:
    """Distance knee to toe that the ankle takes for a distance hip to toe. Shapes (N,) [m]."""
    stretched = np.maximum(linkage.lower_leg[1], distance - linkage.thigh)
    return np.minimum(stretched, linkage.lower_leg[2])


def _leg(linkage: Linkage, batch: StanceBatch, joints: Array, limb: Limb, hip: Array, end: Array,
         floor: NDArray[np.bool_]) -> None:
    """Hip to toe; on the floor, on the whole foot while the leg is long enough for that."""
    first = FIRST_JOINT[limb]
    stand = end + batch.vertical * linkage.ankle_height
    flat = floor & ((batch.vertical * (hip - end)).sum(axis=0) <= linkage.floor_reach)
    goal = np.where(flat, stand, end)
    distance = np.sqrt(((goal - hip) ** 2).sum(axis=0))
    lower = np.where(flat, linkage.shank, lower_leg(linkage, distance))
    way = (KNEE_WAY * [LIMB_SIDE[limb], 1.0, 1.0])[:, None] + np.zeros_like(hip)
    centre, radius, axis = _middle(hip, goal, linkage.thigh, lower)
    way = _clear(batch, limb, centre, radius, axis, _across(way, axis), KNEE_SPACE)
    knee = centre + radius * way
    joints[first] = hip
    joints[first + 1] = knee
    reach = _unit(goal - knee)
    toe = knee + reach * lower
    # Triangle knee, ankle, toe: in the leg's plane, with the heel on the hip's side, as the hinges
    # of knee and ankle are parallel; off the wall where the leg is straight.
    along = (lower**2 + linkage.shank**2 - linkage.toe**2) / (2.0 * lower)
    height = np.sqrt(np.maximum(linkage.shank**2 - along**2, 0.0))
    off = _across(_across(hip - knee, reach) * radius + 1e-4 * batch.plane[0, 0, :3], reach)
    foot = knee + reach * along
    off = _clear(batch, limb, foot, height, reach, off, ANKLE_SPACE)
    ankle = np.where(flat, knee + reach * linkage.shank, foot + off * height)
    joints[first + 2] = ankle
    joints[first + 3] = np.where(flat, end, toe)


def _clear(
    batch: StanceBatch, limb: Limb, centre: Array, radius: Array, axis: Array, way: Array,
    space: float,
) -> Array:
    """Turn a middle joint about its circle just far enough to keep it ``space`` off the wall.

    Returns the unit direction (3, N) from the circle's centre. If the preferred direction stands
    too near the wall, the part along the most outward direction is raised to what is needed.
    """
    normal, gap = _nearest_plane(batch, limb, centre)
    outward = _across(normal, axis)
    steep = np.maximum((normal * outward).sum(axis=0), 1e-6)
    needed = np.clip((space - gap) / np.maximum(radius * steep, 1e-9), -1.0, 1.0)
    has = (way * outward).sum(axis=0)
    rest = way - outward * has
    raised = outward * needed + _unit(rest) * np.sqrt(1.0 - needed**2)
    return np.where(has < needed, raised, way)

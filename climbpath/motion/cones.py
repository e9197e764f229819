"""The force each contact can give: cones of contact forces on the climber, as rays.

A cone is one ray along its axis and eight on its rim, all unit vectors in world axes. Since what
bounds a limb is the sum of its ray coefficients, the ray along the axis lets the best direction
count in full: with the rim alone a force along the axis of a 45 degree cone would cost 1.41 times
its size. The eight lie symmetric about both planes through the axis, so mirroring keeps cones.

- A hand's cone stands about the hold's best support: ``support`` counter-clockwise from +x in the
  surface, tilted into the wall by ``support_in``, with the hold's ``range`` as half-angle. At 90
  degrees and a positive tilt the hold bears the hand up the surface and draws it toward the wall.
- A foot's cone stands half way between the surface's outward normal and up along the surface, and
  its half-angle is the friction angle of the sole: toes are taken to stand on the edge of a
  rounded body, so the wall pushes the foot up and out, and never in.
- A smearing foot has the friction cone about the outward normal alone, a foot on the floor that
  about the vertical.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import atan, pi, radians

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FEET, FLOOR, HANDS, SMEAR
from climbpath.stance.options import ContactOptions
from climbpath.wall import Wall

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

RIM = 8
"""Rays on a cone's rim."""

RAYS = RIM + 1
"""Rays of a cone: its axis first, then the rim."""

SOLE_FRICTION = 0.9
"""Friction of climbing rubber on a wall and its holds (from memory: 0.7 to 1.2, falling with the
load; chalked fingers on rock have 0.64 to 0.74, Amca et al. 2012, from a secondary page)."""

FLOOR_FRICTION = 0.8
"""Friction of a shoe on the floor (from memory)."""

FOOT_TILT = radians(45.0)
"""Tilt of a foothold's best direction from the outward normal up along the surface (an assumption,
no source). With the friction above a foothold bears from 3 to 87 degrees off the normal, so feet
alone never hold a body on a vertical or overhanging wall, and do on a slab."""


@dataclass(frozen=True)
class HoldCones:
    """Cones of H holds in the order of ``ContactOptions.ids``: ``hand`` and ``foot``
    (H, 9, 3), unit rays in world axes; 0 for a pad that is only struck.
    """

    hand: Array
    foot: Array


def cone_rays(axis: Array, side: Array, half_angle: Array | float) -> Array:
    """Rays (..., 9, 3) about unit vectors ``axis`` (..., 3); ``side`` (..., 3) is any unit vector
    at right angles to it, ``half_angle`` (...) [rad].
    """
    other = np.cross(side, axis)
    angle = np.arange(RIM) * (2.0 * pi / RIM)
    around = (np.cos(angle)[:, None] * other[..., None, :]
              + np.sin(angle)[:, None] * side[..., None, :])
    half = np.asarray(half_angle)[..., None, None]
    rim = np.cos(half) * axis[..., None, :] + np.sin(half) * around
    return np.concatenate([axis[..., None, :], rim], axis=-2)


def _hand_cones(up: Array, normal: Array, support: Array, tilt: Array, half: Array) -> Array:
    """Cones (H, 9, 3) from the surface's directions (H, 3) and the hold's angles (H,) [rad]."""
    right = np.array([1.0, 0.0, 0.0])
    cos, sin = np.cos(support)[:, None], np.sin(support)[:, None]
    along = cos * right + sin * up
    side = -sin * right + cos * up
    axis = np.cos(tilt)[:, None] * along - np.sin(tilt)[:, None] * normal
    return cone_rays(axis, side, half)


def _foot_cones(up: Array, normal: Array, tilt: float) -> Array:
    """Friction cones (M, 9, 3) about the normal tilted up along the surface by ``tilt``."""
    axis = np.cos(tilt) * normal + np.sin(tilt) * up
    side = np.broadcast_to([1.0, 0.0, 0.0], axis.shape)
    return cone_rays(axis, side, atan(SOLE_FRICTION))


def hold_cones(wall: Wall, options: ContactOptions) -> HoldCones:
    """Cones of a wall's holds. ``options`` must be those of the same wall."""
    holds = [wall.hold(name) for name in options.ids]
    section = options.surface.section_at(options.place[:, 1])
    up, normal = options.surface.up[section], options.surface.normal[section]
    angles = np.array([[h.support, h.support_in, h.range] for h in holds]).reshape(-1, 3).T
    hand = _hand_cones(up, normal, *angles)
    foot = _foot_cones(up, normal, FOOT_TILT)
    bears = ~options.strike[:, None, None]
    return HoldCones(np.where(bears, hand, 0.0), np.where(bears, foot, 0.0))


def contact_cones(
    options: ContactOptions, cones: HoldCones, contacts: Ints, points: Array
) -> Array:
    """Rays (N, 4, 9, 3) of stances ``contacts`` (N, 4); 0 for limbs that touch nothing.

    ``points`` (N, 4, 3) [m], world: only those of smearing feet matter here.
    """
    rays = np.zeros((*contacts.shape, RAYS, 3))
    for limbs, own in ((HANDS, cones.hand), (FEET, cones.foot)):
        for limb in limbs:
            on = contacts[:, limb] >= 0
            rays[on, limb] = own[contacts[on, limb]]
    smear = contacts == SMEAR
    along = options.surface.to_surface(points[smear])[:, 1]
    section = options.surface.section_at(along)
    rays[smear] = _foot_cones(options.surface.up[section], options.surface.normal[section], 0.0)
    rays[contacts == FLOOR] = cone_rays(
        np.array([0.0, 1.0, 0.0]), np.array([1.0, 0.0, 0.0]), atan(FLOOR_FRICTION)
    )
    return rays

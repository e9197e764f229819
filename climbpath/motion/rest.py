"""Loads of whole stances at rest: from contacts, joints and centres of mass to shares."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FLOOR, FREE, SMEAR, Limb
from climbpath.motion.capacity import Capacities, LimbState, limb_capacities
from climbpath.motion.cones import HoldCones, contact_cones
from climbpath.motion.load import Held, least_load, limb_loads
from climbpath.posture.assembly import FIRST_JOINT, JOINT
from climbpath.posture.com import SEGMENT_JOINTS
from climbpath.posture.linkage import Linkage
from climbpath.stance.options import ContactOptions
from climbpath.wall.frames import GRAVITY

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True)
class RestLoads:
    """Loads of N stances at rest.

    ``load`` (N,): the least common share of all capacities, inf where no forces hold the stance;
    ``gap`` (N,): how far above it the forces found lie. ``by_limb`` (N, 4): the shares with the
    least sum of squares, 0 for limbs that bear nothing, inf where the load is; ``turning`` (N,):
    the share of what turning absorbs, likewise. ``force`` (N, 4, 3) [body weights], world: on the
    climber, at those shares, NaN where the load is inf.
    """

    load: Array
    gap: Array
    by_limb: Array
    turning: Array
    force: Array


def trunk_level(joints: Array, points: Array) -> Array:
    """Where along the trunk ``points`` (N, M, 3) lie, 0 at the hips, 1 at the shoulders: (N, M).

    ``joints`` (N, 19, 3) [m], any axes, the same as those of the points.
    """
    hips = joints[:, JOINT["pelvis"]]
    trunk = joints[:, JOINT["neck"]] - hips
    along = np.einsum("nma,na->nm", points - hips[:, None], trunk)
    return np.asarray(along / (trunk**2).sum(axis=1)[:, None])


def knee_flexion(joints: Array) -> Array:
    """Flexion of both knees, (N, 2) [rad], 0 for a straight leg. ``joints`` (N, 19, 3) [m]."""
    flexion = np.empty((len(joints), 2))
    for side, limb in enumerate((Limb.LF, Limb.RF)):
        hip, knee, ankle = (joints[:, FIRST_JOINT[limb] + k] for k in range(3))
        thigh, shank = knee - hip, ankle - knee
        length = np.linalg.norm(thigh, axis=1) * np.linalg.norm(shank, axis=1)
        cosine = (thigh * shank).sum(axis=1) / np.maximum(length, 1e-12)
        # Rounding can put the cosine of a straight leg a hair above 1.
        flexion[:, side] = np.arccos(np.clip(cosine, -1.0, 1.0))
    return flexion


def _joint(name: str, side: str) -> int:
    if name in ("H", "F"):
        return JOINT[side + name]
    return JOINT[f"{name}_{side}" if side else name]


def gyration(linkage: Linkage, joints: Array, com: Array) -> Array:
    """Squared radii of gyration about the world axes through the centre of mass, (N, 3) [m²].

    ``joints`` (N, 19, 3), ``com`` (N, 3) [m]. Segments are thin rods of their length about their
    own centres: Σ m (|r|² − r_a²) + m L² (1 − e_a²) / 12 over the body's mass.
    """
    total = np.zeros((len(joints), 3))
    for name, mass, centre in zip(
        linkage.segment_names, linkage.segment_mass, linkage.segment_cm, strict=True
    ):
        kind, _, side = name.rpartition("_") if name[-2:] in ("_L", "_R") else (name, "", "")
        first, second, share = SEGMENT_JOINTS[kind]
        start = joints[:, _joint(first, side)]
        rod = (joints[:, _joint(second, side)] - start) / share
        square = (start + centre * rod - com)**2 + rod**2 / 12.0
        total += mass * (square.sum(axis=1, keepdims=True) - square)
    return total


def limb_state(
    options: ContactOptions, contacts: Ints, points: Array, joints: Array, com: Array
) -> LimbState:
    """What the capacities of stances depend on; arguments as of ``rest_loads``."""
    index = np.where(contacts >= 0, contacts, 0)
    quality = np.zeros(contacts.shape)
    if options.holds:
        quality[:, :2] = options.hand_quality[index[:, :2]]
        quality[:, 2:] = options.foot_quality[index[:, 2:]]
    quality = np.where(contacts >= 0, quality, np.where(contacts == FREE, 0.0, 1.0))
    top = float(options.surface.to_world(np.zeros(1), np.array([options.height]))[0, 1])
    above = com[:, 1] - options.floor_level
    return LimbState(
        quality=quality,
        level=trunk_level(joints, points[:, :2]),
        knee=knee_flexion(joints),
        matched=(contacts[:, 0] >= 0) & (contacts[:, 0] == contacts[:, 1]),
        smear=contacts[:, 2:] == SMEAR,
        height=above / max(top - options.floor_level, 1e-6),
    )


def held_at_rest(
    options: ContactOptions, cones: HoldCones, linkage: Linkage, capacities: Capacities,
    contacts: Ints, points: Array, joints: Array, com: Array,
) -> Held:
    """What holds stances; arguments as of ``rest_loads``."""
    ends = np.stack([joints[:, FIRST_JOINT[limb] + 3] for limb in Limb], axis=1)
    placed = np.where((contacts == FLOOR)[:, :, None], ends, points)
    state = limb_state(options, contacts, placed, joints, com)
    return Held(
        rays=contact_cones(options, cones, contacts, placed),
        point=placed,
        com=com,
        capacity=limb_capacities(capacities, state),
        turn=capacities.turn / GRAVITY * gyration(linkage, joints, com),
    )


def rest_loads(
    options: ContactOptions, cones: HoldCones, linkage: Linkage, capacities: Capacities,
    contacts: Ints, points: Array, joints: Array, com: Array,
) -> RestLoads:
    """Loads of N stances at rest.

    ``contacts`` (N, 4); ``points`` (N, 4, 3) of the contacts (``contact_points``; a foot on the
    floor is taken where its joint is), ``joints`` (N, 19, 3) and ``com`` (N, 3) [m], all world.
    """
    held = held_at_rest(options, cones, linkage, capacities, contacts, points, joints, com)
    least = least_load(held)
    count = len(contacts)
    bearing = held.bearing()
    by_limb = np.where(bearing, np.inf, 0.0)
    turning = np.full(count, np.inf)
    force = np.full((count, 4, 3), np.nan)
    fine = np.flatnonzero(np.isfinite(least.load))
    shares = limb_loads(held.take(fine))
    by_limb[fine], turning[fine], force[fine] = shares.share, shares.turning, shares.force
    return RestLoads(least.load, least.gap, by_limb, turning, force)

"""The body as a linkage: the lengths, limits and masses that the posture solver works with.

Trunk axes: x to the climber's right as seen facing the wall, y from the hip centre to the
shoulder line, z out of the back (away from the wall). The origin is the hip centre.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import acos, asin, cos, pi, sin, sqrt

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete, segment_table

Array = NDArray[np.float64]

GRIP_SHARE = 0.5
"""A hand on a hold ends at mid-finger: this share of the hand's length from the wrist on.

Half of the hand's length is about where the fingers begin to bend round an edge (common
practice, no source)."""

TRUNK_TILT = np.deg2rad(40.0)
"""Largest angle between the trunk and the surface's upward direction (a choice of the model: fast
climbing is done upright)."""

ARM_ACROSS = np.deg2rad(25.0)
"""How far an arm may point across the body, past straight ahead (a choice of the model: crossed
arms are rare in fast climbing)."""

BENT = 0.7
"""Share of a leg's full reach at which its limit on crossing is taken. The limit is a plane, which
keeps the allowed places convex: an angle alone would let a bent leg cross less than it can."""

TRUNK_TURN = np.deg2rad(50.0)
"""Largest angle between the front of the trunk and the surface's inward normal (a choice of the
model; it also keeps every arm well inside the shoulder's extension range)."""

KNEE_SPACE = 0.04
"""Least distance of a knee's centre from the surface, m (half a slim knee's depth, from memory)."""

ELBOW_SPACE = 0.03
"""Least distance of an elbow's centre from the surface, m (from memory)."""

ANKLE_SPACE = 0.02
"""Least distance of an ankle's centre from the surface, m (from memory)."""

TOE_SPACE = 0.02
"""A foot on the floor stands at least this far before the surface, m."""

LIMB_SIDE = np.array([-1.0, 1.0, -1.0, 1.0])
"""-1 for a left, +1 for a right limb, in the order of ``Limb``."""


@dataclass(frozen=True)
class Linkage:
    """Lengths in m, angles in rad, masses as shares of the body.

    ``roots`` (4, 3): shoulder and hip joints in trunk axes. ``lower_leg`` is the range of the
    distance knee to toe that the ankle's range allows; ``reach`` (4,) the longest distance from
    root to contact of a gripping hand and of a toe; ``fold`` (4,) the shortest,
    ``strike_fold`` that of a hand that touches with the fingertip. ``knee_limit``:
    the knee before and above the hip at full flexion; ``out_limit``: how far a toe may stand to
    the side of its hip; ``across`` (4,) [m]: how far a contact may lie beyond its limb's root on
    the other side of the body.
    """

    roots: Array
    shoulder_rise: float
    upper_arm: float
    forearm: float
    hand: float
    hand_breadth: float
    thigh: float
    shank: float
    toe: float
    ankle_height: float
    lower_leg: tuple[float, float, float]
    reach: Array
    fold: Array
    strike_fold: float
    knee_limit: Array
    out_limit: float
    across: Array
    head: float
    chest_height: float
    pelvis_space: float
    chest_space: float
    segment_mass: Array
    segment_cm: Array
    segment_names: tuple[str, ...]
    mass: float

    @property
    def trunk(self) -> float:
        """Hip centre to shoulder line, m."""
        return float(self.roots[0, 1])

    @property
    def strike_extra(self) -> float:
        """How much farther the fingertip reaches than a gripping hand, m."""
        return (1.0 - GRIP_SHARE) * self.hand

    @property
    def floor_reach(self) -> float:
        """Hip height of a straight leg on the whole foot, m."""
        return self.thigh + self.shank + self.ankle_height

    @property
    def tiptoe_reach(self) -> float:
        """Hip height of a straight leg risen on the toes, m."""
        return float(self.reach[2])


def _side(first: float, second: float, angle: float) -> float:
    """Third side of a triangle from two sides and the angle between them."""
    return sqrt(first**2 + second**2 - 2.0 * first * second * cos(angle))


def linkage_of(athlete: Athlete) -> Linkage:
    """The linkage of an athlete.

    The ankle is taken as a hinge: at rest the sole stands at a right angle to the shank, so that
    the line ankle to toe, which slants down to the sole, opens a little more. Between full
    dorsiflexion and full plantarflexion the distance knee to toe runs from ``lower_leg[0]`` over
    ``lower_leg[1]`` (at rest) to ``lower_leg[2]`` (law of cosines). The fold of a limb is its
    length at the joint's full flexion, likewise.
    """
    length, limit = athlete.length, athlete.ranges
    toe, shank, thigh = length("ankle_to_toe"), length("shank"), length("thigh")
    rest = pi / 2 + asin(min(length("ankle_height") / toe, 1.0))
    lower_leg = (
        _side(shank, toe, rest - limit["ankle_dorsiflexion"]),
        _side(shank, toe, rest),
        _side(shank, toe, min(rest + limit["ankle_plantarflexion"], pi)),
    )
    arm_end = length("forearm") + GRIP_SHARE * length("hand")
    arm = length("upper_arm") + arm_end
    arm_fold = _side(length("upper_arm"), arm_end, pi - limit["elbow_flexion"])
    leg = thigh + lower_leg[2]
    # The knee bends between thigh and shank; the line knee to toe opens wider by the angle at the
    # knee between shank and that line.
    heel = acos((lower_leg[1] ** 2 + shank**2 - toe**2) / (2.0 * lower_leg[1] * shank))
    leg_fold = _side(thigh, lower_leg[1], pi - limit["knee_flexion"] + heel)
    strike_fold = _side(length("upper_arm"), arm_end + (1.0 - GRIP_SHARE) * length("hand"),
                        pi - limit["elbow_flexion"])
    shoulder, hip = length("shoulder_half_width"), length("hip_half_width")
    lift = limit["hip_flexion"] - pi / 2
    segments = segment_table(athlete)
    return Linkage(
        roots=np.array(
            [
                [-shoulder, length("trunk"), 0.0],
                [shoulder, length("trunk"), 0.0],
                [-hip, 0.0, 0.0],
                [hip, 0.0, 0.0],
            ]
        ),
        shoulder_rise=length("shoulder_rise"),
        upper_arm=length("upper_arm"),
        forearm=length("forearm"),
        hand=length("hand"),
        hand_breadth=length("hand_breadth"),
        thigh=thigh,
        shank=shank,
        toe=toe,
        ankle_height=length("ankle_height"),
        lower_leg=lower_leg,
        reach=np.array([arm, arm, leg, leg]),
        fold=np.array([arm_fold, arm_fold, leg_fold, leg_fold]),
        strike_fold=strike_fold,
        knee_limit=thigh * np.array([cos(lift), sin(lift)]),
        out_limit=leg * sin(limit["hip_abduction"]),
        across=np.array([arm, arm, BENT * leg, BENT * leg])
        * np.sin([ARM_ACROSS, ARM_ACROSS, limit["hip_adduction"], limit["hip_adduction"]]),
        head=length("neck_head"),
        chest_height=0.75 * length("trunk"),
        pelvis_space=length("pelvis_depth") / 2,
        chest_space=length("chest_depth") / 2,
        segment_mass=segments.mass_fraction,
        segment_cm=segments.cm_fraction,
        segment_names=segments.names,
        mass=athlete.mass,
    )

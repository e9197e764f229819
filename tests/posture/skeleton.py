"""A check of postures from their joints alone: what a body may do, read off 19 points.

Every check returns by how much it is broken (0 or less where it holds), so that a test can say
what is wrong and by how far. Lengths m, angles rad; N postures at a time.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete
from climbpath.contacts import FLOOR, FREE
from climbpath.posture.assembly import JOINT
from climbpath.wall import Surface
from tests.posture.oracle import ARM_ACROSS, GRIP, LEG_BENT, SIDE, TILT, TURN

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

LENGTH_TOLERANCE = 1e-6
CLEAR_TOLERANCE = 5e-4
INSIDE_TOLERANCE = 1e-3
ANGLE_TOLERANCE = np.deg2rad(0.5)
ARM, LEG = ("shoulder", "elbow", "wrist"), ("hip", "knee", "ankle")
LIMB_NAMES = ("LH", "RH", "LF", "RF")


def _norm(vector: Array) -> Array:
    return np.asarray(np.sqrt((vector**2).sum(axis=-1)))


def _angle(first: Array, second: Array) -> Array:
    cosine = (first * second).sum(axis=-1) / (_norm(first) * _norm(second))
    return np.asarray(np.arccos(np.clip(cosine, -1.0, 1.0)))


class Skeleton:
    """Joints (N, 19, 3) in the world, and trunk axes (columns) found from them."""

    def __init__(self, joints: Array) -> None:
        self.joints = joints
        along = self.at("neck") - self.at("pelvis")
        across = self.at("hip_R") - self.at("hip_L")
        self.y = along / _norm(along)[:, None]
        self.x = across / _norm(across)[:, None]
        self.z = np.cross(self.x, self.y)

    def at(self, name: str) -> Array:
        """One joint, (N, 3)."""
        return np.asarray(self.joints[:, JOINT[name]])

    def seen(self, vector: Array) -> Array:
        """A vector (N, 3) in trunk axes."""
        return np.stack([(vector * axis).sum(axis=-1) for axis in (self.x, self.y, self.z)], axis=1)


def broken(
    athlete: Athlete, surface: Surface, section: int | Ints, contacts: Ints, points: Array,
    strike: NDArray[np.bool_], joints: Array,
) -> dict[str, Array]:
    """By how much each rule is broken, beyond its tolerance, in N postures.

    ``section``: the section that tilt and turn are measured from, one for all or (N,).
    ``contacts`` (N, 4), ``points`` (N, 4, 3) world [m], ``strike`` (N, 4), ``joints``
    (N, 19, 3) world [m].
    """
    body = Skeleton(joints)
    found = _trunk(athlete, surface, section, body)
    for limb, name in enumerate(LIMB_NAMES):
        used = contacts[:, limb] != FREE
        rules = (_arm if limb < 2 else _leg)(
            athlete, surface, body, limb, contacts[:, limb], points[:, limb], strike[:, limb]
        )
        for rule, (value, free_too) in rules.items():
            found[f"{name} {rule}"] = value if free_too else np.where(used, value, -np.inf)
    return found


def verify_posture(
    athlete: Athlete, surface: Surface, section: int | Ints, contacts: Ints, points: Array,
    strike: NDArray[np.bool_], joints: Array,
) -> list[str]:
    """What is wrong with one posture or N of them, worst case of each rule; empty when all hold."""
    many = joints.reshape(-1, len(JOINT), 3)
    found = broken(athlete, surface, section, contacts.reshape(-1, 4), points.reshape(-1, 4, 3),
                   strike.reshape(-1, 4), many)
    return [
        f"{rule}: {int((value > 0).sum())} of {len(many)}, worst {value.max():.5f} "
        f"in {value.argmax()}"
        for rule, value in found.items() if (value > 0).any() or np.isnan(value).any()
    ]


def _same(found: Array, wanted: float) -> Array:
    return np.asarray(np.abs(found - wanted) - LENGTH_TOLERANCE)


def _trunk(
    athlete: Athlete, surface: Surface, section: int | Ints, body: Skeleton
) -> dict[str, Array]:
    length = athlete.length
    trunk, hip = length("trunk"), length("hip_half_width")
    pelvis, neck = body.at("pelvis"), body.at("neck")
    chest = pelvis + 0.75 * (neck - pelvis)
    hips = (body.at("hip_L") + body.at("hip_R")) / 2
    return {
        "trunk length": _same(_norm(neck - pelvis), trunk),
        "hips apart": _same(_norm(body.at("hip_R") - body.at("hip_L")), 2 * hip),
        "hips at the pelvis": _same(_norm(hips - pelvis), 0.0),
        "hips square to the trunk": np.abs((body.x * body.y).sum(axis=1)) - 1e-9,
        # The joint called head lies three quarters of the way up, in line with the trunk.
        "head": _same(_norm(body.at("head") - neck - 0.75 * length("neck_head") * body.y), 0.0),
        "pelvis clear": length("pelvis_depth") / 2 - surface.clearance(pelvis) - CLEAR_TOLERANCE,
        "chest clear": length("chest_depth") / 2 - surface.clearance(chest) - CLEAR_TOLERANCE,
        "tilt": _angle(body.y, surface.up[section] + 0.0 * body.y) - TILT - ANGLE_TOLERANCE,
        "turn": _angle(body.z, surface.normal[section] + 0.0 * body.z) - TURN - ANGLE_TOLERANCE,
    }


Rules = dict[str, tuple[Array, bool]]


def _across(body: Skeleton, limb: int, away: Array, limit: float) -> Array:
    """By how much a limb's end lies too far on the other side of its root, m."""
    return np.asarray(-SIDE[limb] * body.seen(away)[:, 0] - limit - CLEAR_TOLERANCE)


def _arm(
    athlete: Athlete, surface: Surface, body: Skeleton, limb: int, contact: Ints, point: Array,
    strike: NDArray[np.bool_],
) -> Rules:
    length = athlete.length
    side = "LR"[limb]
    shoulder, elbow, wrist = (body.at(f"{name}_{side}") for name in ARM)
    end = body.at(LIMB_NAMES[limb])
    hand = np.where(strike, 1.0, GRIP) * length("hand")
    at = body.seen(shoulder - body.at("neck"))
    lift = at[:, 1]
    level = np.array([SIDE[limb] * length("shoulder_half_width"), 0.0])
    up = body.seen(end - body.at("pelvis"))[:, 1]
    bent = _angle(elbow - shoulder, wrist - elbow)
    arm = length("upper_arm") + length("forearm") + GRIP * length("hand")
    return {
        "shoulder beside the neck": (_norm(at[:, [0, 2]] - level) - LENGTH_TOLERANCE, True),
        "shoulder lift": (
            np.maximum(-lift, lift - length("shoulder_rise")) - LENGTH_TOLERANCE, True),
        "upper arm": (_same(_norm(elbow - shoulder), length("upper_arm")), True),
        "forearm": (_same(_norm(wrist - elbow), length("forearm")), True),
        "hand": (np.abs(_norm(end - wrist) - hand) - LENGTH_TOLERANCE, True),
        "straight wrist": (_angle(wrist - elbow, end - wrist) - 1e-6, True),
        "at the hold": (_norm(end - point) - LENGTH_TOLERANCE, False),
        "elbow flexion": (bent - athlete.ranges["elbow_flexion"] - ANGLE_TOLERANCE, True),
        "elbow outside": (-surface.clearance(elbow) - INSIDE_TOLERANCE, True),
        "hand above the hips": (-up - CLEAR_TOLERANCE, False),
        "across": (_across(body, limb, end - shoulder, arm * np.sin(ARM_ACROSS)), False),
    }


def _leg(
    athlete: Athlete, surface: Surface, body: Skeleton, limb: int, contact: Ints, point: Array,
    strike: NDArray[np.bool_],
) -> Rules:
    length, limit = athlete.length, athlete.ranges
    side = "LR"[limb - 2]
    hip, knee, ankle = (body.at(f"{name}_{side}") for name in LEG)
    end = body.at(LIMB_NAMES[limb])
    stands = contact == FLOOR
    ground = np.array([0.0, surface.floor_height, 0.0])
    below = ankle - np.array([0.0, length("ankle_height"), 0.0])
    toe = length("ankle_to_toe")
    # On the floor the whole foot stands, or the foot has risen on the toe.
    whole, risen = _norm(below - end), np.abs(_norm(end - ankle) - toe)
    foot_on_floor = np.maximum(np.minimum(whole, risen), np.abs((end - ground)[:, 1]))
    foot_on_floor = np.maximum(foot_on_floor, _norm((end - hip)[:, [0, 2]])) - LENGTH_TOLERANCE
    rest = np.pi / 2 + np.arcsin(min(length("ankle_height") / toe, 1.0))
    angle = _angle(knee - ankle, end - ankle)
    hinge = np.maximum(rest - limit["ankle_dorsiflexion"] - angle,
                       angle - rest - limit["ankle_plantarflexion"])
    away = body.seen(end - hip)
    leg = length("thigh") + np.sqrt(
        length("shank") ** 2 + toe**2
        - 2 * length("shank") * toe * np.cos(rest + limit["ankle_plantarflexion"])
    )
    flexed = _angle(knee - hip, -body.y) - limit["hip_flexion"] - ANGLE_TOLERANCE
    sideways = SIDE[limb] * away[:, 0] - leg * np.sin(limit["hip_abduction"])
    held = ~stands
    crossing = LEG_BENT * leg * np.sin(limit["hip_adduction"])
    beside = np.array([SIDE[limb] * length("hip_half_width"), 0.0, 0.0])
    return {
        "hip": (_norm(body.seen(hip - body.at("pelvis")) - beside) - LENGTH_TOLERANCE, True),
        "thigh": (_same(_norm(knee - hip), length("thigh")), True),
        "shank": (_same(_norm(ankle - knee), length("shank")), True),
        "foot": (np.where(held, _same(_norm(end - ankle), toe), foot_on_floor), True),
        "at the hold": (np.where(held, _norm(end - point) - LENGTH_TOLERANCE, -1.0), False),
        "knee flexion": (
            _angle(knee - hip, ankle - knee) - limit["knee_flexion"] - ANGLE_TOLERANCE, True),
        "ankle range": (np.where(held, hinge - ANGLE_TOLERANCE, -1.0), True),
        "hip flexion": (np.where(held, flexed, -1.0), True),
        "thigh on the floor": (np.where(held, -1.0, flexed), True),
        "knee outside": (-surface.clearance(knee) - INSIDE_TOLERANCE, True),
        "ankle outside": (-surface.clearance(ankle) - INSIDE_TOLERANCE, True),
        "toe below the hip": (np.where(held, away[:, 1] - CLEAR_TOLERANCE, -1.0), False),
        "across": (np.where(held, _across(body, limb, end - hip, crossing), -1.0), False),
        "to the side": (np.where(held, sideways - CLEAR_TOLERANCE, -1.0), False),
    }

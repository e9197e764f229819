"""Segment centres of an upright body, built from its lengths alone."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from climbpath.body import SEGMENT_ENDS, Athlete, segment_table, whole_body_com


def standing_joints(athlete: Athlete, arms: str) -> dict[str, NDArray[np.float64]]:
    """Joints (x right, y forward, z up; m) standing with the arms "down", "out" or "up"; "swung" is
    up about shoulders that stay where they are."""
    length = athlete.length
    hip, shoulder = athlete.hip_height, athlete.shoulder_height
    joints = {
        "hip_centre": np.array([0.0, 0.0, hip]),
        "shoulder_centre": np.array([0.0, 0.0, shoulder]),
        "head_top": np.array([0.0, 0.0, shoulder + length("neck_head")]),
    }
    along = {"down": [0, 0, -1], "out": [1, 0, 0], "up": [0, 0, 1], "swung": [0, 0, 1]}[arms]
    for side, sign in (("L", -1.0), ("R", 1.0)):
        step = np.array([sign * along[0], 0.0, float(along[2])])
        rise = length("shoulder_rise") if arms == "up" else 0.0
        point = np.array([sign * length("shoulder_half_width"), 0.0, shoulder + rise])
        for name, part in (
            ("shoulder", 0.0),
            ("elbow", length("upper_arm")),
            ("wrist", length("forearm")),
            ("fingertip", length("hand")),
        ):
            point = point + part * step
            joints[f"{name}_{side}"] = point
        point = np.array([sign * length("hip_half_width"), 0.0, hip])
        for name, part in (("hip", 0.0), ("knee", length("thigh")), ("ankle", length("shank"))):
            point = point - np.array([0.0, 0.0, part])
            joints[f"{name}_{side}"] = point
        forward = np.sqrt(length("ankle_to_toe") ** 2 - length("ankle_height") ** 2)
        joints[f"toe_{side}"] = np.array([point[0], forward, 0.0])
    return joints


def standing_com(athlete: Athlete, arms: str) -> NDArray[np.float64]:
    """Whole-body centre of mass of ``standing_joints``, m."""
    joints = standing_joints(athlete, arms)
    table = segment_table(athlete)
    first = np.array([joints[a] for a, _ in SEGMENT_ENDS])
    second = np.array([joints[b] for _, b in SEGMENT_ENDS])
    centres = first + table.cm_fraction[:, None] * (second - first)
    return whole_body_com(centres, table.mass_fraction)

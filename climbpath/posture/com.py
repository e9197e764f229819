"""Centre of mass of assembled postures: one weight a joint.

Each segment's centre lies on the line between two joints, so the whole-body centre of mass,
sum of m_s (proximal + c_s (distal - proximal)), is a fixed weighted mean of the joints.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from climbpath.posture.assembly import JOINT, JOINTS
from climbpath.posture.linkage import GRIP_SHARE, Linkage

Array = NDArray[np.float64]

HEAD_SHARE = 0.75
"""The joint called head lies at this share of the way from the shoulder line to its top."""

SEGMENT_JOINTS = {
    "trunk": ("pelvis", "neck", 1.0),
    "head_neck": ("neck", "head", HEAD_SHARE),
    "upper_arm": ("shoulder", "elbow", 1.0),
    "forearm": ("elbow", "wrist", 1.0),
    "hand": ("wrist", "H", GRIP_SHARE),
    "thigh": ("hip", "knee", 1.0),
    "shank": ("knee", "ankle", 1.0),
    "foot": ("ankle", "F", 1.0),
}
"""Segment: proximal joint, distal joint, and the share of the segment's length between them."""


def joint_weights(linkage: Linkage) -> Array:
    """Weight of each joint in the centre of mass, shape (19,), sum 1."""
    weights = np.zeros(len(JOINTS))
    for name, mass, centre in zip(
        linkage.segment_names, linkage.segment_mass, linkage.segment_cm, strict=True
    ):
        kind, _, side = name.rpartition("_") if name[-2:] in ("_L", "_R") else (name, "", "")
        first, second, share = SEGMENT_JOINTS[kind]
        weights[JOINT[_joint(first, side)]] += mass * (1.0 - centre / share)
        weights[JOINT[_joint(second, side)]] += mass * centre / share
    return weights


def _joint(name: str, side: str) -> str:
    if name in ("H", "F"):
        return side + name
    return f"{name}_{side}" if side else name


def com_of(weights: Array, joints: Array) -> Array:
    """Centre of mass (3, N) [m] of joints (19, 3, N) [m]."""
    # Joint by joint in order: a product of matrices is slow where one side has a single row.
    return np.asarray(np.einsum("j,jin->in", weights, joints))
